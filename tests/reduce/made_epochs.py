"""Epochs made for tests: positions in metres about a mark, rounded to the digits a receiver would send."""

from __future__ import annotations

import math

import numpy as np

from fieldbook.model.epoch import DAY_MS, E8MIN_PER_DEG, Epoch

LAT_DEG, LON_DEG, HEIGHT_M, SEPARATION_M = -37.6, 144.9, 123.0, 4.567
# metres of one arc-minute at that place (GRS 80 radii), good to 1 ppm: the tests that need more use their own truth
M_PER_MIN_LAT, M_PER_MIN_LON = 1849.84, 1472.27


def _rounded(value: float, decimals: int, unit_decimals: int) -> int:
    return round(value * 10**decimals) * 10 ** (unit_decimals - decimals)


def make(
    enu: np.ndarray,
    *,
    start_ms: int = 8 * 3_600_000,
    step_ms: int = 1000,
    quality: int | np.ndarray = 4,
    decimals: int = 7,
    altitude_decimals: int = 3,
    separation_decimals: int = 3,
    instants_ms: np.ndarray | None = None,
    first_number: int = 1,
    **fields: object,
) -> list[Epoch]:
    """One epoch per row of enu (n, 3), metres."""
    n = len(enu)
    times = start_ms + step_ms * np.arange(n) if instants_ms is None else instants_ms
    qualities = np.broadcast_to(np.asarray(quality), (n,))
    epochs = []
    for i in range(n):
        east, north, up = (float(v) for v in enu[i])
        lat = LAT_DEG * 60 + north / M_PER_MIN_LAT
        lon = LON_DEG * 60 + east / M_PER_MIN_LON
        separation = _rounded(SEPARATION_M, separation_decimals, 5)
        epoch = Epoch(
            number=first_number + i,
            source="GGA",
            talker="GN",
            day=int(times[i]) // DAY_MS,
            time_ms=int(times[i]) % DAY_MS,
            latitude_e8min=_rounded(lat, decimals, 8),
            longitude_e8min=_rounded(lon, decimals, 8),
            latitude_decimals=decimals,
            longitude_decimals=decimals,
            altitude_e5m=_rounded(HEIGHT_M - SEPARATION_M + up, altitude_decimals, 5),
            altitude_decimals=altitude_decimals,
            separation_e5m=separation,
            separation_decimals=separation_decimals,
            quality=int(qualities[i]),
            satellites=14,
            hdop_milli=800,
            age_ms=1000,
            station="0042",
        )
        for name, value in fields.items():
            setattr(epoch, name, value)
        epochs.append(epoch)
    return epochs


def gauss_markov(rng: np.random.Generator, n: int, step_s: float, tau_s: float, sigma: float) -> np.ndarray:
    """First-order Gauss-Markov series, by its recursion."""
    fade = math.exp(-step_s / tau_s)
    noise = rng.normal(size=n) * sigma
    out = np.empty(n)
    out[0] = noise[0]
    drive = math.sqrt(1 - fade * fade)
    for i in range(1, n):
        out[i] = fade * out[i - 1] + drive * noise[i]
    return out


def rtk_errors(rng: np.random.Generator, n: int, step_s: float = 1.0) -> np.ndarray:
    """(n, 3) errors of a quiet RTK occupation: white 2/4 mm, Gauss-Markov 6/11 mm of 200 s."""
    columns = [
        rng.normal(size=n) * white + gauss_markov(rng, n, step_s, 200.0, slow)
        for white, slow in ((0.002, 0.006), (0.002, 0.006), (0.004, 0.011))
    ]
    return np.column_stack(columns)


__all__ = ["E8MIN_PER_DEG", "HEIGHT_M", "LAT_DEG", "LON_DEG", "gauss_markov", "make", "rtk_errors"]
