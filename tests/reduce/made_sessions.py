"""Sessions made for tests of the detectors: errors, 10 s sums and the estimate of them, without going through epochs.

The simulator knows nothing of the detectors and has what the estimator does not assume: two correlation times in
irregular proportion, sizes drawn anew for every session. Standard deviations per axis in metres, 1 Hz.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from fieldbook.reduce.blocks import Blocks
from fieldbook.reduce.correlated_mean import correlated_mean
from fieldbook.reduce.estimate import Estimate, Resolution
from fieldbook.reduce.fix_classes import AUTONOMOUS, DIFFERENTIAL, RTK_FIXED, ClassOfFix, GstVerdict
from fieldbook.reduce.local_frame import LocalFrame


@dataclass(frozen=True)
class Regime:
    fix_class: ClassOfFix
    slow_m: tuple[float, float, float]
    fast_m: tuple[float, float, float]
    white_m: tuple[float, float, float]
    slow_s: float
    fast_s: float


RTK = Regime(RTK_FIXED, (0.006, 0.006, 0.011), (0.0, 0.0, 0.0), (0.002, 0.002, 0.004), 200.0, 60.0)
RTK_TWO = Regime(RTK_FIXED, (0.006, 0.006, 0.012), (0.004, 0.004, 0.008), (0.003, 0.003, 0.006), 1000.0, 60.0)
DGPS = Regime(DIFFERENTIAL, (0.40, 0.40, 0.70), (0.2, 0.2, 0.3), (0.05, 0.05, 0.1), 800.0, 60.0)
AUTO = Regime(AUTONOMOUS, (1.5, 1.5, 2.8), (0.5, 0.5, 0.9), (0.1, 0.1, 0.2), 1800.0, 120.0)
REGIMES = {"rtk": RTK, "rtk_two": RTK_TWO, "dgps": DGPS, "autonomous": AUTO}


def gauss_markov(rng: np.random.Generator, sessions: int, n: int, tau_s: np.ndarray, sigma: np.ndarray) -> np.ndarray:
    """(sessions, n, 3) by the recursion, all sessions at once; tau (sessions, 1), sigma (sessions, 3)."""
    fade = np.exp(-1.0 / tau_s)
    drive = sigma * np.sqrt(1 - fade**2)
    out = np.empty((n, sessions, 3))
    out[0] = rng.normal(size=(sessions, 3)) * sigma
    noise = rng.normal(size=(n, sessions, 3)) * drive
    for k in range(1, n):
        out[k] = fade * out[k - 1] + noise[k]
    return out.transpose(1, 0, 2)


def errors(regime: Regime, seed: int, sessions: int, minutes: float) -> np.ndarray:
    """(sessions, n, 3) metres, n = 60 x minutes."""
    rng, n = np.random.default_rng(seed), int(60 * minutes)
    size = rng.lognormal(0, 0.2, size=(sessions, 1))
    slow_s = regime.slow_s * rng.lognormal(0, 0.3, size=(sessions, 1))
    fast_s = regime.fast_s * rng.lognormal(0, 0.3, size=(sessions, 1))
    total = gauss_markov(rng, sessions, n, slow_s, size * np.array(regime.slow_m))
    total += gauss_markov(rng, sessions, n, fast_s, size * np.array(regime.fast_m))
    return total + rng.normal(size=total.shape) * np.array(regime.white_m)


def blocks_of(enu: np.ndarray, *, start_s: int = 28_800, initialisation: int = 1, heights: bool = True) -> Blocks:
    """10 s blocks of 1 Hz errors (n, 3), n a multiple of 10; first epoch at start_s of the occupation's clock."""
    n = len(enu) // 10 * 10
    units = np.rint(enu[:n] * 1e8).astype(np.int64).reshape(-1, 10, 3)
    sums = units.sum(axis=1)
    m2 = ((units - units.mean(axis=1, keepdims=True)) ** 2).sum(axis=1) / 1e16
    index = start_s // 10 + np.arange(len(sums))
    ten = np.full(len(sums), 10)
    instants = 10_000 * (index * 10) + 45_000
    if not heights:
        sums[:, 2], m2[:, 2] = 0, 0.0
    whole = np.column_stack(
        [
            np.full(len(sums), initialisation),
            index,
            ten,
            ten if heights else 0 * ten,
            sums,
            instants,
            10 * np.arange(len(sums)),
            10 * np.arange(len(sums)) + 9,
        ]
    )
    return Blocks(10, whole.astype(np.int64), m2)


def estimate_of(
    blocks: Blocks, fix_class: ClassOfFix, step_m: tuple[float, float, float] = (0.0001, 0.0001, 0.001)
) -> Estimate:
    """The estimate that the reduction would make of these blocks."""
    east, north, up = blocks.bins(0), blocks.bins(1), blocks.bins(2)
    assert east is not None
    assert north is not None
    mean = correlated_mean(east, north, up, fix_class)
    frame = LocalFrame(0, 0, 0)
    lat, lon, h = frame.geodetic(mean.east.mean_m, mean.north.mean_m, None if mean.up is None else mean.up.mean_m)
    floor, index = fix_class.floor_enu_m, blocks.column("index")
    kept, instant = int(blocks.column("count").sum()), blocks.mean_instant_ms
    assert instant is not None
    resolution = Resolution(step_m, tuple(s / math.sqrt(12) * 1e-3 for s in step_m), 3, 0.0003, {}, {})
    return Estimate(
        frame, mean, lat, lon, h, fix_class, GstVerdict(None, None, "none", "none"),
        (floor[0], floor[1], None if mean.up is None else floor[2]), resolution, blocks.sd_m(), kept, 0, float(kept),
        int(index[0]) * 10_000, int(index[-1]) * 10_000 + 9_000, instant, blocks, blocks,
    )  # fmt: skip


def session(regime: Regime, enu: np.ndarray) -> Estimate:
    """Estimate of one session's errors (n, 3)."""
    return estimate_of(blocks_of(enu), regime.fix_class)
