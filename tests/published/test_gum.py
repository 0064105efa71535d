"""JCGM 100:2008 (GUM, first edition 2008, corrected 2010). Values quoted from memory and reproduced from the data.

Tolerance: half a unit of the last printed digit, unless the line says otherwise.
"""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest

from fieldbook.reduce.budget import (
    arcsine,
    propagated,
    rectangular,
    sd_of_experimental_sd,
    triangular,
    welch_satterthwaite,
)
from fieldbook.reduce.region import t_quantile
from fieldbook.reduce.summary_statistics import correlation, fit_line, summarise

DATA = Path(__file__).parent / "data"


def test_4_4_3_twenty_temperatures() -> None:
    result = summarise(np.loadtxt(DATA / "gum_4_4_3_temperatures.txt"))
    assert result.n == 20
    assert result.mean == pytest.approx(100.145, abs=5e-4)
    assert result.sd == pytest.approx(1.489, abs=5e-4)
    assert result.sd_of_independent_mean == pytest.approx(0.333, abs=5e-4)


def test_4_3_7_to_4_4_6_half_widths() -> None:
    assert rectangular(1.0) == pytest.approx(0.577, abs=5e-4)  # 4.3.7
    assert rectangular(4.0) == pytest.approx(2.3, abs=0.05)  # 4.4.5
    assert triangular(1.0) == pytest.approx(0.408, abs=5e-4)  # 4.3.9
    assert triangular(4.0) == pytest.approx(1.6, abs=0.05)  # 4.4.6
    assert arcsine(1.0) == pytest.approx(1 / math.sqrt(2), rel=1e-12)


@pytest.mark.parametrize(("n", "percent"), [(2, 76), (3, 52), (4, 42), (5, 36), (10, 24), (20, 16), (30, 13), (50, 10)])
def test_table_e_1_uncertainty_of_an_experimental_sd(n: int, percent: float) -> None:
    assert 100 * sd_of_experimental_sd(n) == pytest.approx(percent, abs=0.5)


def test_g_4_1_welch_satterthwaite() -> None:
    """Relative u 0.25, 0.57, 0.82 % from n = 10, 5, 15: u_c/y 1.03 %, nu_eff 19.0, t_95(19) = 2.09, U 2.2 %."""
    u, dof = welch_satterthwaite([(0.25, 9), (0.57, 4), (0.82, 14)])
    assert u == pytest.approx(1.03, abs=5e-3)
    assert dof == pytest.approx(19.0, abs=0.05)
    assert t_quantile(0.975, 19) == pytest.approx(2.09, abs=5e-3)
    assert t_quantile(0.975, 19) * u == pytest.approx(2.2, abs=0.05)


@pytest.mark.parametrize(
    ("dof", "t95", "t9545"),
    [(1, 12.71, 13.97), (2, 4.30, 4.53), (3, 3.18, 3.31), (4, 2.78, 2.87), (5, 2.57, 2.65), (10, 2.23, 2.28),
     (20, 2.09, 2.13), (None, 1.960, 2.000)],
)  # fmt: skip
def test_table_g_2_t_factors(dof: float | None, t95: float, t9545: float) -> None:
    assert t_quantile(0.975, dof) == pytest.approx(t95, abs=5e-3)
    assert t_quantile(0.5 + 0.9545 / 2, dof) == pytest.approx(t9545, abs=5e-3)


def test_h_1_end_gauge_block() -> None:
    """Table H.1, nm: standard 25 (18 dof), repeatability 5.8 (24), random 3.9 (5), systematic 6.7 (8),
    expansion coefficient difference 2.9 (50), temperature difference 16.6 (2).

    Printed 32 nm, nu_eff 16, t_99(16) = 2.92, U_99 93 nm. The table's rounded entries give 31.7, 16.8 and 92.5 to 93.5:
    tolerance 0.5 nm, 1 dof, 0.005, 1 nm. The three parts of the difference count as one quantity, 9.7 nm with 25.6 dof.
    """
    difference = welch_satterthwaite([(5.8, 24), (3.9, 5), (6.7, 8)])
    assert difference[0] == pytest.approx(9.7, abs=0.05)
    assert difference[1] == pytest.approx(25.6, abs=0.2)  # printed from u rounded to 9.7
    u, dof = welch_satterthwaite([(25.0, 18), difference, (2.9, 50), (16.6, 2)])
    assert u == pytest.approx(32, abs=0.5)
    assert dof is not None
    assert math.floor(dof) == 16
    assert t_quantile(0.995, 16) == pytest.approx(2.92, abs=5e-3)
    assert t_quantile(0.995, 16) * 31.7 == pytest.approx(93, abs=1.0)


def test_h_2_correlated_inputs() -> None:
    """Table H.2 to H.4: resistance, reactance, impedance from five simultaneous sets; correlation matters."""
    sets = np.loadtxt(DATA / "gum_h2.csv", delimiter=",", skiprows=2)
    sets[:, 1] *= 1e-3  # mA
    volt, ampere, phase = (summarise(sets[:, column]) for column in range(3))
    u = [item.sd_of_independent_mean or math.nan for item in (volt, ampere, phase)]
    assert volt.mean == pytest.approx(4.9990, abs=5e-5)
    assert ampere.mean == pytest.approx(19.6610e-3, abs=5e-8)
    assert phase.mean == pytest.approx(1.04446, abs=5e-6)
    assert u == [pytest.approx(0.0032, abs=5e-5), pytest.approx(0.0095e-3, abs=5e-8), pytest.approx(0.00075, abs=5e-6)]
    pairs = [(0, 1, -0.36), (0, 2, 0.86), (1, 2, -0.65)]
    covariance = np.diag(np.square(u))
    for first, second, printed in pairs:
        r = correlation(sets[:, first], sets[:, second])
        assert r == pytest.approx(printed, abs=0.006)  # -0.645 and -0.355 are printed -0.65 and -0.36
        covariance[first, second] = covariance[second, first] = r * u[first] * u[second]
    v, i, phi = volt.mean, ampere.mean, phase.mean
    z, c, s = v / i, math.cos(phi), math.sin(phi)
    jacobian = [[c / i, -z * c / i, -z * s], [s / i, -z * s / i, z * c], [1 / i, -z / i, 0.0]]
    result = propagated(jacobian, covariance)
    sd = np.sqrt(np.diag(result))
    assert [z * c, z * s, z] == [
        pytest.approx(w, abs=a) for w, a in ((127.732, 5e-4), (219.847, 6e-4), (254.260, 5e-4))
    ]
    # printed 0.295 for X comes from rounded inputs, the data give 0.2956
    assert list(sd) == [pytest.approx(w, abs=a) for w, a in ((0.071, 5e-4), (0.295, 1e-3), (0.236, 5e-4))]
    for first, second, printed in [(0, 1, -0.588), (0, 2, -0.485), (1, 2, 0.993)]:
        assert result[first, second] / sd[first] / sd[second] == pytest.approx(printed, abs=5e-4)


def test_h_3_thermometer_line() -> None:
    """Table H.6 and H.3.3: correction against temperature, reference 20 C."""
    t, b = np.loadtxt(DATA / "gum_h3.csv", delimiter=",", skiprows=2).T
    line = fit_line(t - 20.0, b)
    sd = np.sqrt(np.diag(line.covariance))
    assert line.intercept == pytest.approx(-0.1712, abs=5e-5)
    assert line.slope == pytest.approx(0.00218, abs=5e-6)
    assert list(sd) == [pytest.approx(0.0029, abs=5e-5), pytest.approx(0.00067, abs=5e-6)]
    assert line.covariance[0, 1] / sd[0] / sd[1] == pytest.approx(-0.930, abs=5e-4)
    assert line.s == pytest.approx(0.0035, abs=5e-5)
    assert line.dof == 9
    value, u = line.at(10.0)
    assert value == pytest.approx(-0.1494, abs=5e-5)
    assert u == pytest.approx(0.0041, abs=5e-5)


def test_a_line_with_known_correlation_equals_the_textbook_estimator() -> None:
    """Generalised least squares written out with the inverse: same estimate and covariance, to 1e-10."""
    rng = np.random.default_rng(3)
    x, y = np.arange(12.0), rng.normal(size=12)
    shape = np.exp(-np.abs(x[:, None] - x[None, :]) / 3)
    line = fit_line(x, y, shape)
    design, inverse = np.column_stack([np.ones(12), x]), np.linalg.inv(shape)
    normal = design.T @ inverse @ design
    estimate = np.linalg.solve(normal, design.T @ inverse @ y)
    residual = y - design @ estimate
    assert [line.intercept, line.slope] == pytest.approx(list(estimate), rel=1e-10)
    assert line.covariance == pytest.approx(residual @ inverse @ residual / 10 * np.linalg.inv(normal), rel=1e-10)
