"""Short form of the coverage study: does the stated 95 % hold the truth, on errors made here, not by the estimator?

The simulator knows nothing of the estimator's shape: errors are a sum of a slow and a fast first-order process, white
noise and a sinusoid of multipath, of sizes drawn anew for every session about the figures of published practice
(RTK 8 mm and 15 mm; code differential 0.3 to 0.8 m; autonomous 1 to 3 m), at 1 Hz, rounded to 7 decimals of a minute
(5 for code). No floor error is added. Naive: 1.96 s/sqrt(n).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from made_epochs import gauss_markov, make

from fieldbook.model.epoch import E8MIN_PER_DEG
from fieldbook.reduce.budget import Term, combine
from fieldbook.reduce.estimate import estimate
from fieldbook.reduce.fix_classes import FLOOR_DOF
from fieldbook.reduce.gates import Limits
from fieldbook.reduce.initialisations import InitialisationJudge
from fieldbook.reduce.screening import Screening

SEEDS = 24


@dataclass(frozen=True)
class Regime:
    quality: int
    decimals: int
    slow_m: tuple[float, float, float]
    fast_m: tuple[float, float, float]
    white_m: tuple[float, float, float]
    slow_s: float
    fast_s: float


REGIMES = {
    "rtk": Regime(4, 7, (0.005, 0.005, 0.010), (0.003, 0.003, 0.006), (0.002, 0.002, 0.004), 500.0, 40.0),
    "dgps": Regime(2, 5, (0.40, 0.40, 0.70), (0.2, 0.2, 0.3), (0.05, 0.05, 0.1), 800.0, 60.0),
    "autonomous": Regime(1, 5, (1.5, 1.5, 2.8), (0.5, 0.5, 0.9), (0.1, 0.1, 0.2), 1800.0, 120.0),
}


def errors(regime: Regime, rng: np.random.Generator, n: int) -> np.ndarray:
    columns = []
    for axis in range(3):
        size = rng.lognormal(0, 0.2)
        slow = gauss_markov(rng, n, 1.0, regime.slow_s * rng.lognormal(0, 0.3), size * regime.slow_m[axis])
        fast = gauss_markov(rng, n, 1.0, regime.fast_s, size * regime.fast_m[axis])
        wave = np.sin(2 * np.pi * (np.arange(n) / rng.uniform(200, 700) + rng.random()))
        columns.append(slow + fast + 0.4 * regime.fast_m[axis] * wave + rng.normal(0, regime.white_m[axis], n))
    return np.column_stack(columns)


def one(regime: Regime, seed: int, minutes: float) -> tuple[bool, bool, bool, float]:
    """(circle holds the truth, height interval holds it, naive east holds it, radius)."""
    rng = np.random.default_rng(seed)
    n = int(60 * minutes)
    epochs = make(errors(regime, rng, n), quality=regime.quality, decimals=regime.decimals)
    truth = make(np.zeros((1, 3)), decimals=8, altitude_decimals=5)[0]
    screening = Screening(Limits((regime.quality,)))
    screening.push(epochs)
    state = screening.evaluate()
    result = estimate(state, InitialisationJudge().judge(state))
    assert result is not None
    mean, resolution = result.mean, result.resolution
    assert mean.up is not None
    terms = [
        Term("mean", "A", "t", (mean.east.u_m, mean.north.u_m, mean.up.u_m),
             (mean.east.dof, mean.north.dof, mean.up.dof), rho_en=mean.rho_en),
        Term("floor", "B", "normal", result.floor_enu_m, (FLOOR_DOF,) * 3),
        Term("resolution", "B", "rectangular", resolution.u_enu_m),
        Term("separation", "B", "rectangular", (0.0, 0.0, resolution.separation_u_m)),
    ]  # fmt: skip
    budget = combine(terms)
    frame = result.frame
    east, north, up = frame.enu_units(
        np.array([truth.latitude_e8min]), np.array([truth.longitude_e8min]), np.array([truth.height_e5m])
    )
    gap_e, gap_n = mean.east.mean_m - east[0] / 1e8, mean.north.mean_m - north[0] / 1e8
    gap_u = mean.up.mean_m - up[0] / 1e8
    naive = 1.96 * (result.sd_enu_m[0] or 0.0) / np.sqrt(result.kept)
    assert budget.vertical95_m is not None
    assert abs(result.lat_deg - (truth.latitude_e8min or 0) / E8MIN_PER_DEG) < 1e-3
    return (
        bool(np.hypot(gap_e, gap_n) <= budget.horizontal95_m),
        bool(abs(gap_u) <= budget.vertical95_m),
        bool(abs(gap_e) <= naive),
        budget.horizontal95_m,
    )


@pytest.mark.slow
@pytest.mark.parametrize("name", list(REGIMES))
def test_coverage(name: str) -> None:
    """72 sessions a regime of 5, 12 and 30 minutes. 95 % less two binomial errors is 90 %."""
    found = [one(REGIMES[name], seed, minutes) for minutes in (5, 12, 30) for seed in range(SEEDS)]
    circle, height, naive = (np.mean([item[k] for item in found]) for k in range(3))
    print(
        f"{name}: circle {circle:.3f} height {height:.3f} naive {naive:.3f} radius {np.median([f[3] for f in found]):.4f}"
    )
    assert circle >= 0.90
    assert height >= 0.90
    assert naive < 0.30
    assert np.median([item[3] for item in found]) < {"rtk": 0.035, "dgps": 2.2, "autonomous": 9.0}[name]
