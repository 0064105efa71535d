"""Error ellipse, 95 % circle, t and F factors against tables.

First row of ELLIPSES: read in the tests of GeodePy (Geoscience Australia, commit 00bd9834). The others, the circle
table and the factors were computed by numerical integration with an independent program (scipy 1.17.1), printed to the
digits given; tolerance half a unit of the last. Constants 2.447747 and 1.9600: FGDC-STD-007.3-1998, 3-A.1 and 3-A.2.
Cubic: Leenhouts, Navigation 1985, and ICSM SP1 (coefficients from memory); within 0.004 of the exact radius.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import special

from fieldbook.reduce.region import (
    circle_radius,
    coverage_factor_95,
    f2_quantile,
    region_95,
    standard_ellipse,
)

ELLIPSES = [  # ee, en, nn, a, b, azimuth, 95 % a, 95 % b, exact R95
    (1.44, -1.32, 1.22, 1.6292867776, 0.0736518590, 132.6181791546, 3.98808, 0.18028, None),
    (4, 1.5, 2, 2.191524, 1.094177, 61.8450, 5.36430, 2.67827, 4.46105),
    (25, -12, 16, 5.772002, 2.772002, 124.7220, 14.12840, 6.78516, 11.71028),
    (9, 0, 4, 3, 2, 90, 7.34324, 4.89549, 6.36652),
    (4, 0, 9, 3, 2, 0, 7.34324, 4.89549, 6.36652),
    (5, 3, 5, 2.828427, 1.414214, 45, 6.92327, 3.46164, 5.75828),
]


@pytest.mark.parametrize(("ee", "en", "nn", "a", "b", "azimuth", "a95", "b95", "r95"), ELLIPSES)
def test_ellipse_and_circle(
    ee: float, en: float, nn: float, a: float, b: float, azimuth: float, a95: float, b95: float, r95: float | None
) -> None:
    covariance = [[ee, en], [en, nn]]
    ellipse = standard_ellipse(covariance)
    assert ellipse.major == pytest.approx(a, abs=5e-7)
    assert ellipse.minor == pytest.approx(b, abs=5e-7)
    assert ellipse.azimuth_deg == pytest.approx(azimuth, abs=5e-5)
    region = region_95(covariance, None, None)
    assert region.ellipse.major == pytest.approx(a95, abs=6e-6)
    assert region.ellipse.minor == pytest.approx(b95, abs=6e-6)
    if r95 is not None:
        assert region.radius_m == pytest.approx(r95, abs=5e-6)


@pytest.mark.parametrize(
    ("ratio", "exact"),
    [(0.0, 1.9600), (0.2, 1.9704), (0.4, 2.0051), (0.5, 2.0359), (0.6, 2.0813), (0.7, 2.1460), (0.8, 2.2303),
     (1.0, 2.4477)],
)  # fmt: skip
def test_circle_by_ratio_of_axes(ratio: float, exact: float) -> None:
    assert circle_radius([[1, 0], [0, ratio**2]]) == pytest.approx(exact, abs=5e-5)
    cubic = 1.960790 + 0.004071 * ratio + 0.114276 * ratio**2 + 0.371625 * ratio**3
    assert circle_radius([[1, 0], [0, ratio**2]]) == pytest.approx(cubic, abs=0.004)


@pytest.mark.parametrize(
    ("nu", "t", "f"),
    [(2, 4.303, 6.164), (4, 2.776, 3.727), (8, 2.306, 2.986), (10, 2.228, 2.865), (20, 2.086, 2.643),
     (28, 2.048, 2.585), (60, 2.000, 2.510)],
)  # fmt: skip
def test_t_and_f_factors(nu: float, t: float, f: float) -> None:
    assert coverage_factor_95(nu) == pytest.approx(t, abs=5e-4)
    assert math.sqrt(2 * f2_quantile(0.95, nu)) == pytest.approx(f, abs=5e-4)
    assert f2_quantile(0.95, nu) == pytest.approx(float(special.fdtri(2, nu, 0.95)), rel=1e-10)


def test_constants() -> None:
    assert math.sqrt(2 * f2_quantile(0.95, None)) == pytest.approx(2.447747, abs=5e-7)
    assert math.sqrt(2 * f2_quantile(0.99, None)) == pytest.approx(3.034854, abs=5e-7)
    assert circle_radius(np.eye(2), None, 0.5) == pytest.approx(1.177410, abs=5e-7)
    assert coverage_factor_95(None) == pytest.approx(1.959964, abs=5e-7)
    assert coverage_factor_95(1) == pytest.approx(12.71, abs=5e-3)
