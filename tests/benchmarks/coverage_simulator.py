"""Simulated occupations of known truth and exactly known covariance, for the calibration benchmark.

Strategy: errors are sums of stationary processes (`Part`) whose autocovariance is written down beside the way they are
drawn; nothing of the estimator's code or shape is used. The received epochs are made from the errors with an own
ellipsoid and own rounding. What a regime does to the output (losses of fix, wrong fix, gaps, outliers, bursts, frozen
stretches) is done here too, and remembered, so that the known-covariance mean can be formed from the good epochs.

Place, start, size and correlation time of the errors, and the true separation are drawn anew per session.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray
from scipy.signal import lfilter

from fieldbook.model.epoch import DAY_MS, Epoch

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]

A_M, E2 = 6378137.0, 0.00669438002290  # GRS 1980
LN_SD_SIZE, LN_SD_TIME = 0.2, 0.4  # spread of the true sizes and correlation times between sessions
BURST_EVERY_S, OUTLIER_SHARE, OUTLIER_SIGMAS = 600.0, 0.01, 20.0


@dataclass(frozen=True)
class Part:
    """One process: 'white', 'gm' (first-order Gauss-Markov), 'sine' (random phase), 'flicker' (1/f), 'fgn'.

    sd in metres; time_s: correlation time or period. fgn: fractional Gaussian noise, `time_s` holds its H.
    """

    kind: str
    sd_m: float
    time_s: float = 0.0

    def scaled(self, size: float, time: float) -> Part:
        """Another session's size and correlation time."""
        stretches = self.kind == "gm"
        return replace(self, sd_m=self.sd_m * size, time_s=self.time_s * time if stretches else self.time_s)

    def autocovariance(self, count: int, step_s: float) -> Floats:
        """Exact autocovariance at lags 0 .. count - 1 epochs, m^2."""
        lag = np.arange(count)
        if self.kind == "white":
            return self.sd_m**2 * (lag == 0)
        if self.kind == "gm":
            return self.sd_m**2 * np.exp(-lag * step_s / self.time_s)
        if self.kind == "sine":
            return self.sd_m**2 * np.cos(2 * np.pi * lag * step_s / self.time_s)
        if self.kind == "flicker":
            return self.sd_m**2 * np.mean([np.exp(-lag * step_s / tau) for tau in _OCTAVES_S], axis=0)
        power = 2 * self.time_s
        far, here, near = np.abs(lag + 1.0) ** power, lag.astype(float) ** power, np.abs(lag - 1.0) ** power
        return self.sd_m**2 * (far - 2 * here + near) / 2

    def slower_m2(self, seconds: float) -> float:
        """Variance of what turns over more slowly than `seconds`: a session of that length cannot see it of itself."""
        if self.kind == "flicker":
            return self.sd_m**2 * float(np.mean(np.array(_OCTAVES_S) > seconds))
        return self.sd_m**2 if self.kind == "gm" and self.time_s > seconds else 0.0

    def draw(self, rng: np.random.Generator, count: int, step_s: float) -> Floats:
        """A series of `count` epochs."""
        if self.kind == "white":
            return self.sd_m * rng.normal(size=count)
        if self.kind == "gm":
            return self.sd_m * _gauss_markov(rng, count, step_s / self.time_s)
        if self.kind == "sine":
            phase = 2 * np.pi * (np.arange(count) * step_s / self.time_s + rng.random())
            return self.sd_m * math.sqrt(2) * np.sin(phase)
        if self.kind == "flicker":
            terms = [_gauss_markov(rng, count, step_s / tau) for tau in _OCTAVES_S]
            return self.sd_m * np.sum(terms, axis=0) / math.sqrt(len(_OCTAVES_S))
        return self.sd_m * _circulant(rng, self.scaled(1 / self.sd_m, 1).autocovariance(count + 1, step_s))[:count]


_OCTAVES_S = [2.0**k for k in range(17)]  # 1 s to 18 h: equal variance per octave is 1/f between them


def _gauss_markov(rng: np.random.Generator, count: int, step_over_tau: float) -> Floats:
    fade = math.exp(-step_over_tau)
    drive = rng.normal(size=count) * math.sqrt(-math.expm1(-2 * step_over_tau))
    drive[0] = rng.normal()
    return lfilter([1.0], [1.0, -fade], drive)


def _circulant(rng: np.random.Generator, covariance: Floats) -> Floats:
    """Davies and Harte: exact draw of a stationary series from its autocovariance."""
    ring = np.concatenate([covariance, covariance[-2:0:-1]])
    spectrum = np.maximum(np.fft.fft(ring).real, 0.0)
    noise = rng.normal(size=len(ring)) + 1j * rng.normal(size=len(ring))
    return np.fft.fft(np.sqrt(spectrum / len(ring)) * noise).real


@dataclass(frozen=True)
class Regime:
    """What a simulated receiver does. Parts per axis; `kind` is its true class of fix."""

    name: str
    quality: int
    horizontal: tuple[Part, ...]
    vertical: tuple[Part, ...]
    group: str = "clean"  # "clean", "disturbed", "quantised"
    decimals: int = 7
    altitude_decimals: int = 3
    separation_decimals: int = 3
    padded: tuple[int, int, int] = (0, 0, 0)  # zeros printed behind the decimals: coordinates, altitude, separation
    step_s: float = 1.0
    initialisations: int = 1  # at least; more in long sessions where `bias_m` is drawn
    bias_m: tuple[float, float] = (0.0, 0.0)  # sd of the bias of each initialisation, H and V
    wrong_m: tuple[float, float] | None = None  # distance of a wrong initialisation, smallest and largest
    wrong_share: tuple[float, float] = (0.08, 0.38)  # of the time
    gaps: bool = False
    outliers: bool = False
    burst_s: tuple[int, int] = (3, 20)
    frozen: bool = False


@dataclass
class Made:
    """One simulated occupation. Rows = epochs as received, in order."""

    regime: Regime
    place: Place
    index: Ints  # place of each epoch on the regular grid of epochs
    quality: Ints
    errors_m: Floats  # (n, 3) before rounding, disturbances included
    clean: Flags  # epochs the known-covariance mean may use
    number: Ints  # initialisation of each epoch, from 0
    horizontal: tuple[Part, ...]  # as drawn for this session
    vertical: tuple[Part, ...]
    wrong: int | None = None
    floor_m: Floats = field(default_factory=lambda: np.zeros(3))

    def covariance(self, axis: int, count: int) -> Floats:
        """Autocovariance of the errors of one axis at lags 0 .. count - 1."""
        parts = self.vertical if axis == 2 else self.horizontal
        return np.sum([part.autocovariance(count, self.regime.step_s) for part in parts], axis=0)

    def first(self, seconds: float) -> int:
        """Number of epochs within the first `seconds`."""
        return int(np.searchsorted(self.index * self.regime.step_s, seconds))


@dataclass(frozen=True)
class Place:
    """The true mark, the receiver's geoid separation there, and the second of the day the occupation starts."""

    lat_deg: float
    lon_deg: float
    h_m: float
    separation_m: float
    start_s: int

    @classmethod
    def drawn(cls, rng: np.random.Generator) -> Place:
        """Anywhere between 60 south and 60 north."""
        return cls(
            rng.uniform(-60, 60), rng.uniform(-179, 179), rng.uniform(0, 500), rng.uniform(-60, 60),
            int(rng.integers(0, 86_400)),
        )  # fmt: skip

    @property
    def metres_per_degree(self) -> tuple[float, float]:
        """Of longitude and of latitude, at the mark's own height."""
        lat = math.radians(self.lat_deg)
        bend = 1 - E2 * math.sin(lat) ** 2
        east = (A_M / math.sqrt(bend) + self.h_m) * math.cos(lat)
        return math.radians(east), math.radians(A_M * (1 - E2) / bend**1.5 + self.h_m)

    def gap_m(self, lat_deg: float, lon_deg: float, h_m: float) -> Floats:
        """A stated position minus the truth, east, north, up."""
        east, north = self.metres_per_degree
        return np.array([(lon_deg - self.lon_deg) * east, (lat_deg - self.lat_deg) * north, h_m - self.h_m])


def simulate(regime: Regime, length_s: float, rng: np.random.Generator, place: Place | None = None) -> Made:
    """One occupation of `length_s` seconds."""
    place = Place.drawn(rng) if place is None else place
    count = round(length_s / regime.step_s)
    size, time = math.exp(rng.normal(0, LN_SD_SIZE)), math.exp(rng.normal(0, LN_SD_TIME))
    horizontal = tuple(part.scaled(size, time) for part in regime.horizontal)
    vertical = tuple(part.scaled(size, time) for part in regime.vertical)
    errors = np.column_stack([
        np.sum([part.draw(rng, count, regime.step_s) for part in parts], axis=0)
        for parts in (horizontal, horizontal, vertical)
    ])  # fmt: skip
    made = Made(
        regime, place, np.arange(count), np.full(count, regime.quality), errors, np.ones(count, dtype=bool),
        np.zeros(count, dtype=np.int64), horizontal, vertical,
    )  # fmt: skip
    if regime.initialisations > 1:
        _split(made, rng, length_s)
    if regime.frozen:
        _freeze(made, rng)
    if regime.outliers:
        _spoil(made, rng)
    if regime.gaps:
        _thin(made, rng)
    return made


def _split(made: Made, rng: np.random.Generator, length_s: float) -> None:
    """Losses of fix between initialisations; each its own bias; one of them wrong if the regime says so."""
    regime, count = made.regime, len(made.index)
    parts = max(regime.initialisations, min(12, round(length_s / 900)))
    shares = rng.dirichlet(np.full(parts, 4.0))
    if regime.wrong_m is not None:
        made.wrong = int(rng.integers(parts))
        shares[made.wrong] = 0.0
        shares *= (1 - (share := rng.uniform(*regime.wrong_share))) / shares.sum()
        shares[made.wrong] = share
    edges = np.concatenate([[0], np.rint(np.cumsum(shares) * count).astype(int)])
    edges[-1] = count
    for number in range(parts):
        rows = slice(edges[number], edges[number + 1])
        made.number[rows] = number
        made.errors_m[rows] += rng.normal(size=3) * np.array([regime.bias_m[0]] * 2 + [regime.bias_m[1]])
        if number:
            made.quality[edges[number] : edges[number] + int(rng.integers(3, 9))] = 5
    if made.wrong is not None:
        direction = rng.normal(size=3)
        offset = direction / np.linalg.norm(direction) * rng.uniform(*regime.wrong_m)  # type: ignore[misc]
        made.errors_m[made.number == made.wrong] += offset
        made.clean &= made.number != made.wrong
    made.clean &= made.quality == regime.quality


def _freeze(made: Made, rng: np.random.Generator) -> None:
    """Stretches of 10 to 60 epochs that repeat the position before them; about a fifth of the time."""
    row, count = int(rng.integers(10, 60)), len(made.index)
    while row < count:
        length = int(rng.integers(10, 61))
        made.errors_m[row : row + length] = made.errors_m[row - 1]
        made.clean[row : row + length] = False
        row += length + int(rng.exponential(140)) + 2


def _spoil(made: Made, rng: np.random.Generator) -> None:
    """1 % single outliers of 20 sigma and bursts (3 to 20 s if not stated) of 5 to 20 sigma, in all components."""
    count = len(made.index)
    sigma = np.sqrt([made.covariance(axis, 1)[0] for axis in range(3)])
    rows = np.flatnonzero(rng.random(count) < OUTLIER_SHARE)
    made.errors_m[rows] += OUTLIER_SIGMAS * sigma * rng.normal(size=(len(rows), 3))
    made.clean[rows] = False
    for start in np.flatnonzero(rng.random(count) < made.regime.step_s / BURST_EVERY_S):
        stop = start + int(rng.integers(made.regime.burst_s[0], made.regime.burst_s[1] + 1))
        made.errors_m[start:stop] += rng.uniform(5, 20) * sigma * rng.choice([-1, 1], size=3)
        made.clean[start:stop] = False


def _thin(made: Made, rng: np.random.Generator) -> None:
    """1 % of the epochs missing, and silences that take about a quarter of the time."""
    count = len(made.index)
    here = rng.random(count) > 0.01
    for _ in range(3):
        length = int(count * rng.uniform(0.02, 0.15))
        start = int(rng.integers(1, max(count - length, 2)))
        here[start : start + length] = False
    here[:1] = True
    for name in ("index", "quality", "errors_m", "clean", "number"):
        setattr(made, name, getattr(made, name)[here])


def epochs_of(made: Made, start: int = 0, stop: int | None = None) -> list[Epoch]:
    """The received epochs start <= i < stop: truth + errors + floor error, rounded to the regime's digits."""
    regime, place = made.regime, made.place
    rows = slice(start, stop)
    errors = made.errors_m[rows] + made.floor_m
    per_lon, per_lat = place.metres_per_degree
    lat = _received((place.lat_deg + errors[:, 1] / per_lat) * 60, regime.decimals, 8)
    lon = _received((place.lon_deg + errors[:, 0] / per_lon) * 60, regime.decimals, 8)
    altitude = _received(place.h_m - place.separation_m + errors[:, 2], regime.altitude_decimals, 5)
    separation = int(_received(np.array([place.separation_m]), regime.separation_decimals, 5)[0])
    printed = np.array([regime.decimals, regime.altitude_decimals, regime.separation_decimals]) + regime.padded
    of_angle, of_altitude, of_separation = printed.tolist()
    instants = place.start_s * 1000 + np.rint(made.index[rows] * regime.step_s * 1000).astype(np.int64)
    return [
        Epoch(
            start + i + 1, "GGA", "GN", instant // DAY_MS, instant % DAY_MS, None, latitude, longitude,
            of_angle, of_angle, height, of_altitude, separation, of_separation, quality, 15, 800, None, None, 1000, "0042",
        )
        for i, (instant, latitude, longitude, height, quality) in enumerate(
            zip(instants.tolist(), lat, lon, altitude, made.quality[rows].tolist(), strict=True)
        )
    ]  # fmt: skip


def _received(values: Floats, decimals: int, unit_decimals: int) -> list[int]:
    steps = np.rint(values * 10.0**decimals).astype(np.int64)
    return (steps * 10 ** (unit_decimals - decimals)).tolist()
