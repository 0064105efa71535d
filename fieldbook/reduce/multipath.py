"""A periodic error, as a reflecting surface makes on an antenna that stands still.

Strategy. Hann-windowed periodogram I(f) of the 10 s means; background S(f) = A [1/(1 + (2 pi f tau)^2) + rho], the
Lorentzian of a Gauss-Markov process plus white noise, fitted to the WHOLE periodogram by Whittle's likelihood,
minimum of sum(ln S + I/S); A follows from tau and rho in closed form. Without a period I/S is exponential with mean 1:
a frequency stands out when 1 - (1 - e^-(I/S))^K is below 1 % (Sidak over the K frequencies; 3 % for the three axes).
Fits that leave out the peaks first give 5 to 50 % false alarms and are not used.

Looked for: periods from 3 spacings up to a third of the session, so at least three whole periods have been seen. Over
5.7 h the spacing grows beyond 10 s and the shortest period with it.

Sources: P. Whittle, Bulletin of the IMS 12 (1952) (from memory); Z. Sidak, JASA 62 (1967) 626-633 (from memory); period
of multipath T = lambda/(2 h cos e de/dt): 6 to 12 minutes on a tripod.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from fieldbook.reduce.series import AXES, Series

Floats = NDArray[np.float64]

ALPHA = 0.03 / 3  # per axis
LEAST_PERIODS = 3
MOST_PLACES = 2048
LEAST_PLACES = 48
_LEAST_FILLED = 0.8


@dataclass(frozen=True)
class Periodic:
    """A period that stands out: axis, seconds, amplitude in metres (half of peak to peak), periods seen, p."""

    axis: str
    period_s: float
    amplitude_m: float
    periods: float
    p: float


def periodic(series: Series) -> Periodic | None:
    """The most significant period of the three axes, if there is one."""
    best: Periodic | None = None
    for axis in range(3):
        even = series.even(axis, MOST_PLACES, _LEAST_FILLED)
        if even is None or len(even[1]) < LEAST_PLACES:
            continue
        found = _period(AXES[axis], even[0], even[1])
        if found is not None and (best is None or found.p < best.p):
            best = found
    return best


def _period(axis: str, spacing_s: float, values: Floats) -> Periodic | None:
    n = len(values)
    level = values - values.mean()
    if not level.any():
        return None
    window = np.hanning(n + 1)[:-1]
    spectrum = np.fft.rfft(level * window)
    power = np.abs(spectrum) ** 2
    background = _background(power[1 : (n + 1) // 2], n)
    rows = np.arange(LEAST_PERIODS, n // 3 + 1)
    ratio = power[rows] / background[rows - 1]
    peak = int(ratio.argmax())
    p = -math.expm1(rows.size * math.log1p(-min(math.exp(-float(ratio[peak])), 0.5)))
    if p >= ALPHA:
        return None
    row = int(rows[peak])
    # between two frequencies: the Hann window's peak from its two larger neighbours, delta = (2 r - 1)/(r + 1)
    side = 1 if power[row + 1] >= power[row - 1] else -1
    r = math.sqrt(power[row + side] / power[row])
    frequency = row + side * min(max((2 * r - 1) / (r + 1), 0.0), 0.5)
    wave = window * np.exp(-2j * np.pi * frequency * np.arange(n) / n)
    amplitude = 2 * abs(complex(wave @ level)) / float(window.sum())
    return Periodic(axis, spacing_s * n / frequency, amplitude, frequency, p)


def _background(power: Floats, n: int) -> Floats:
    """S at the frequencies 1, 2, ... of a periodogram of n values (zero and the last left out)."""
    shapes, logs = _coarse(n)
    amplitude = (power / shapes).mean(axis=1)
    best = int((logs + len(power) * np.log(amplitude)).argmin())
    taus, rhos = _grid(n)
    return _refined(power, n, taus[best], rhos[best])


def _refined(power: Floats, n: int, tau: float, rho: float) -> Floats:
    """Three finer looks about the best point of the coarse grid."""
    result = power
    for width in (1.6, 1.3, 1.15):
        around = np.array([1 / width, 1.0, width])
        taus, rhos = (item.ravel() for item in np.meshgrid(tau * around, rho * around**2))
        shapes = _shapes(n, taus, rhos)
        amplitude = (power / shapes).mean(axis=1)
        best = int((np.log(shapes).sum(axis=1) + len(power) * np.log(amplitude)).argmin())
        tau, rho, result = float(taus[best]), float(rhos[best]), amplitude[best] * shapes[best]
    return result


def _grid(n: int) -> tuple[Floats, Floats]:
    """tau in spacings, 1/2 to 2 n; rho 1e-6 to 10."""
    taus, rhos = np.geomspace(0.5, 2.0 * n, 14), np.geomspace(1e-6, 10.0, 12)
    grid = np.meshgrid(taus, rhos)
    return grid[0].ravel(), grid[1].ravel()


def _shapes(n: int, taus: Floats, rhos: Floats) -> Floats:
    frequency = np.arange(1, (n + 1) // 2) / n
    return 1.0 / (1.0 + (2 * np.pi * np.outer(taus, frequency)) ** 2) + rhos[:, None]


@lru_cache(maxsize=4)
def _coarse(n: int) -> tuple[Floats, Floats]:
    """The coarse grid's shapes and the sums of their logarithms: the same for every look at a session of this length."""
    shapes = _shapes(n, *_grid(n))
    return shapes, np.log(shapes).sum(axis=1)
