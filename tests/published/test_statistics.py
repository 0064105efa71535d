"""Statistics against published values.

NIST StRD: Statistical Reference Datasets, Univariate Summary Statistics (NIST), certified values as in the files'
headers. Tolerances: 1e-12 relative for what a double can hold, 1e-9 for NumAcc3 and 1e-7 for NumAcc4, whose values
(10000000.1) have no exact binary form; the GNU Scientific Library uses the same limits (statistics/test_nist.c).
Correlated mean: closed form of the double sum over rho^|i-j| for a first-order autoregressive series (N. F. Zhang,
Metrologia 43 (2006) S276-S281, from memory); correlation times 115 s (Miller et al., J. Surv. Eng. 138(1), 2012) and
1020 s, 2200 s (Odolinski, GPS Solutions 16, 2012, 147-155). Table values computed to five digits: tolerance 5e-6.
"""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest

from fieldbook.reduce.correlated_mean import bin_correlation, process_variance
from fieldbook.reduce.summary_statistics import summarise, variance_of_mean_ar1

DATA = Path(__file__).parent / "data"

STRD = [  # set, n, mean, sd, lag-1 autocorrelation, relative tolerance
    ("lew", 200, -177.435000000000, 277.332168044316, -0.307304800605679, 1e-12),
    ("lottery", 218, 518.958715596330, 291.699727470969, -0.120948622967393, 1e-12),
    ("mavro", 50, 2.00185600000000, 0.000429123454003053, 0.937989183438248, 1e-12),
    ("michelso", 100, 299.852400000000, 0.0790105478190518, 0.535199668621283, 1e-12),
    ("numacc1", 3, 10000002.0, 1.0, -0.5, 1e-12),
    ("numacc2", 1001, 1.2, 0.1, -0.999, 1e-12),
    ("numacc3", 1001, 1000000.2, 0.1, -0.999, 1e-9),
    ("numacc4", 1001, 10000000.2, 0.1, -0.999, 1e-7),
]


@pytest.mark.parametrize(("name", "n", "mean", "sd", "lag1", "tolerance"), STRD)
def test_nist_strd(name: str, n: int, mean: float, sd: float, lag1: float, tolerance: float) -> None:
    result = summarise(np.loadtxt(DATA / f"strd_{name}.txt"))
    assert result.n == n
    assert result.mean == pytest.approx(mean, rel=1e-14)
    assert result.sd == pytest.approx(sd, rel=tolerance)
    assert result.lag1 == pytest.approx(lag1, rel=tolerance)


AR1 = [  # correlation time s at 1 Hz, n, sd of the mean / sd, n_eff
    (60, 60, 0.85781, 1.36),
    (60, 180, 0.67493, 2.20),
    (115, 180, 0.79504, 1.58),
    (300, 300, 0.85777, 1.36),
    (1020, 180, 0.97143, 1.06),
    (1020, 3600, 0.64095, 2.43),
    (2200, 3600, 0.78786, 1.61),
]


@pytest.mark.parametrize(("tau", "n", "sd_of_mean", "n_eff"), AR1)
def test_mean_of_an_autoregressive_series(tau: float, n: int, sd_of_mean: float, n_eff: float) -> None:
    variance = variance_of_mean_ar1(math.exp(-1 / tau), n)
    lags = np.abs(np.arange(n)[:, None] - np.arange(n)[None, :])
    assert variance == pytest.approx(np.exp(-lags / tau).mean(), rel=1e-10)  # the double sum itself
    assert math.sqrt(variance) == pytest.approx(sd_of_mean, abs=5e-6)
    assert 1 / variance == pytest.approx(n_eff, abs=5e-3)


@pytest.mark.parametrize(("tau", "n", "sd_of_mean", "n_eff"), AR1)
def test_covariance_of_bin_means_gives_the_same_variance_of_the_plain_mean(
    tau: float, n: int, sd_of_mean: float, n_eff: float
) -> None:
    """Any division into bins gives g(T/tau) exactly; the sampled series differs from it by order 1/(12 n tau)."""
    for bins in (1, 4, 20):
        g = bin_correlation(np.arange(bins), n / bins, np.array([float(tau)]))[0]
        assert g.mean() == pytest.approx(process_variance(n / tau), rel=1e-12)
    assert math.sqrt(process_variance(n / tau)) == pytest.approx(sd_of_mean, rel=3e-4)
