"""The correlation time and what it makes of an occupation, against an independent library.

emcee 3 (MIT licence) estimates the integrated autocorrelation time with Sokal's automatic window (A. Sokal, Monte Carlo
Methods in Statistical Mechanics, 1996). For a Gauss-Markov process sampled every second with correlation time tau it is
(1 + rho)/(1 - rho) with rho = exp(-1/tau), about 2 tau; n divided by it is the number of independent epochs.
"""

from __future__ import annotations

import math

import emcee.autocorr
import numpy as np
import pytest

from fieldbook.reduce.correlated_mean import process_variance
from fieldbook.reduce.summary_statistics import variance_of_mean_ar1


def gauss_markov(n: int, tau_s: float, seed: int) -> np.ndarray:
    """n samples of unit variance, one a second."""
    rng = np.random.default_rng(seed)
    rho = math.exp(-1 / tau_s)
    noise = rng.normal(0.0, math.sqrt(1 - rho**2), n)
    series = np.empty(n)
    series[0] = rng.normal()
    for index in range(1, n):
        series[index] = rho * series[index - 1] + noise[index]
    return series


@pytest.mark.parametrize("tau_s", [20.0, 60.0, 200.0])
def test_effective_number_agrees_with_the_library(tau_s: float) -> None:
    """Our variance of the mean of a Gauss-Markov process, as a number of independent epochs; within 10 %.

    The library's estimate of 400 000 samples is itself good to a few per cent.
    """
    n = 400_000
    integrated = float(emcee.autocorr.integrated_time(gauss_markov(n, tau_s, 3), quiet=True)[0])
    assert 1 / process_variance(n / tau_s) == pytest.approx(n / integrated, rel=0.10)


@pytest.mark.parametrize("tau_s", [20.0, 60.0, 200.0])
def test_closed_form_agrees_with_the_library(tau_s: float) -> None:
    n = 400_000
    integrated = float(emcee.autocorr.integrated_time(gauss_markov(n, tau_s, 4), quiet=True)[0])
    variance = variance_of_mean_ar1(math.exp(-1 / tau_s), n)
    assert 1 / variance == pytest.approx(n / integrated, rel=0.10)
