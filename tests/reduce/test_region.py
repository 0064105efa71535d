"""The 95 % region of a bivariate t, against drawn samples and against its limits."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fieldbook.reduce.region import circle_radius, f2_quantile, region_95, standard_ellipse


@pytest.mark.parametrize("nu", [3.0, 5.5, 20.0])
@pytest.mark.parametrize(
    "covariance", [[[1.0, 0.0], [0.0, 1.0]], [[4.0, 1.5], [1.5, 2.0]], [[1.0, 0.09], [0.09, 0.01]]]
)
def test_regions_hold_95_percent_of_drawn_bivariate_t(nu: float, covariance: list[list[float]]) -> None:
    """400 000 draws: three binomial standard deviations are 0.10 %."""
    rng = np.random.default_rng(11)
    region = region_95(covariance, nu, nu + 7)
    scale = np.array(covariance) * nu / (nu - 1)
    values, vectors = np.linalg.eigh(scale)
    normal = (rng.normal(size=(400_000, 2)) * np.sqrt(np.maximum(values, 0))) @ vectors.T
    drawn = normal / np.sqrt(rng.chisquare(nu - 1, 400_000) / (nu - 1))[:, None]
    inside = (np.hypot(drawn[:, 0], drawn[:, 1]) <= region.radius_m).mean()
    assert inside == pytest.approx(0.95, abs=0.0012)
    azimuth = math.radians(region.ellipse.azimuth_deg)
    along = drawn @ [math.sin(azimuth), math.cos(azimuth)]
    across = drawn @ [math.cos(azimuth), -math.sin(azimuth)]
    if region.ellipse.minor > 0.02 * region.ellipse.major:
        in_ellipse = (along / region.ellipse.major) ** 2 + (across / region.ellipse.minor) ** 2 <= 1
        assert in_ellipse.mean() == pytest.approx(0.95, abs=0.0012)


def test_factor_at_four_degrees_of_freedom_is_wider_than_the_known_shape_one() -> None:
    """sqrt(2 nu/(nu-1) F_.95(2, nu-1)) at nu = 4 is 5.05, against 3.727 of sqrt(2 F_.95(2, 4)) (design section 5)."""
    assert region_95(np.eye(2), 4, 4).ellipse.major == pytest.approx(5.05, abs=5e-3)


def test_dof_below_three_count_as_three_and_the_smaller_governs() -> None:
    assert region_95(np.eye(2), 1.2, 50).radius_m == region_95(np.eye(2), 3, 3).radius_m
    assert region_95(np.eye(2), None, 9).dof == 9


@settings(max_examples=60, deadline=None)
@given(st.floats(1e-5, 1e3), st.floats(0.0, 1.0), st.floats(0.0, 180.0, exclude_max=True), st.floats(2.0, 1e4))
def test_circle_lies_between_interval_and_ellipse(size: float, ratio: float, azimuth: float, nu: float) -> None:
    s, c = math.sin(math.radians(azimuth)), math.cos(math.radians(azimuth))
    turn = np.array([[s, c], [c, -s]])  # columns: major, minor axis in east, north
    covariance = turn @ np.diag([size**2, (ratio * size) ** 2]) @ turn.T
    covariance[1, 0] = covariance[0, 1]
    radius = circle_radius(covariance, nu)
    assert radius <= size * math.sqrt(2 * f2_quantile(0.95, nu)) * (1 + 1e-9)
    from fieldbook.reduce.region import coverage_factor_95

    assert radius >= size * coverage_factor_95(nu) * (1 - 1e-6)
    found = standard_ellipse(covariance)
    assert found.major == pytest.approx(size, rel=1e-9)
    if ratio < 0.9:
        assert abs((found.azimuth_deg - azimuth + 90) % 180 - 90) < 1e-5


def test_a_line_is_the_limit_of_a_narrow_ellipse() -> None:
    for nu in (None, 6.0):
        wide, narrow = circle_radius([[1, 0], [0, 4e-8]], nu), circle_radius([[1, 0], [0, 0]], nu)
        assert wide == pytest.approx(narrow, rel=1e-6)


@pytest.mark.parametrize("matrix", [[[1, 2], [2, 1]], [[1, 0.1], [0.2, 1]], [[-1, 0], [0, 1]], [[math.nan, 0], [0, 1]]])
def test_what_is_no_covariance_is_refused(matrix: list[list[float]]) -> None:
    with pytest.raises(ValueError, match="covariance"):
        standard_ellipse(matrix)
