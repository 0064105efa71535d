"""Local grids against an independent least squares, against truth, and what is refused. All marks are constructed."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy import optimize, stats

from fieldbook.errors import ReductionError, UsageError
from fieldbook.model.local_grid import ControlMark
from fieldbook.model.reduction import Ellipse95, Uncertainty
from fieldbook.reduce.constants import GRS80
from fieldbook.reduce.frames import geodesic, on_local_plane
from fieldbook.reduce.geodesy import mean_radius_m
from fieldbook.reduce.local_grid import fit_local_grid, hull, place_in

FRAME = "EPSG:7843"
LAT, LON, H = -34.27, 146.05, 250.0
PLACES = [(-900.0, -700.0), (1100.0, -800.0), (900.0, 1000.0), (-1000.0, 800.0), (50.0, -1200.0)]
TRUE = {"east": 5000.0, "north": 12000.0, "turn_deg": 31.7, "ppm": 18.0}
COV = ((4e-6, 1.5e-6), (1.5e-6, 9e-6))


def local(x: float, y: float) -> tuple[float, float]:
    """Truth: the local coordinates of a place of the plane about (LAT, LON)."""
    scale, turn = 1 + TRUE["ppm"] * 1e-6, math.radians(TRUE["turn_deg"])
    a, b = scale * math.cos(turn), scale * math.sin(turn)
    return TRUE["east"] + a * x - b * y, TRUE["north"] + b * x + a * y


def geographic_of(x: float, y: float) -> tuple[float, float]:
    """Latitude and longitude of a place of the plane, by going back what is left until nothing is."""
    scale0 = 1 + H / mean_radius_m(LAT)
    lat, lon = LAT, LON
    for _ in range(30):
        found = on_local_plane(GRS80, LAT, LON, scale0, lat, lon)
        lat, lon = lat + (y - found[1]) / 110_900, lon + (x - found[0]) / 92_100
    return lat, lon


PLANE_PLACES = {place: geographic_of(*place) for place in [*PLACES, (100.0, 50.0), (1500.0, 1500.0)]}


def marks(count: int = 5, seed: int | None = None, *, heights: bool = False, tilt: tuple[float, float] = (0.0, 0.0)):
    rng = np.random.default_rng(seed)
    found = []
    for number, (x, y) in enumerate(PLACES[:count]):
        lat, lon = PLANE_PLACES[x, y]
        east, north = local(x, y)
        h = H + (number - (count - 1) / 2) * 4.0  # mean H
        given = h - 17.25 + tilt[0] * x + tilt[1] * y
        if seed is not None:
            turn = math.radians(TRUE["turn_deg"])
            rotation = np.array([[math.cos(turn), -math.sin(turn)], [math.sin(turn), math.cos(turn)]])
            noise = rotation @ rng.multivariate_normal([0, 0], COV) + rng.normal(size=2) * 0.003
            east, north = east + noise[0], north + noise[1]
            given += rng.normal() * math.hypot(0.004, 0.002)
        found.append(
            ControlMark(
                f"LG-{number + 1}", lat, lon, h, COV, 0.004, east, north, 0.003,
                given if heights else None, 0.002 if heights else None,
            )
        )  # fmt: skip
    return found


def measured(u: float = 0.002) -> Uncertainty:
    return Uncertainty(
        [u, u, 2 * u], [[u * u, 0.0], [0.0, u * u]], [None, None, None], [1.96] * 3, Ellipse95(u, u, 0.0),
        2.45 * u, 3.92 * u, None, "class", "", [],
    )  # fmt: skip


def test_truth_is_found_without_noise() -> None:
    """0.01 mm and 0.01 ppm at marks and elsewhere; the plane's own origin and height differ from the truth's by rounding of
    its origin (0.00001 degree), which the similarity takes up."""
    grid = fit_local_grid("quarry", FRAME, marks())
    assert grid.plane_height_m == pytest.approx(H, abs=1e-9)
    assert (grid.scale - 1) * 1e6 == pytest.approx(TRUE["ppm"], abs=0.01)
    for item in grid.misfits:
        assert math.hypot(item.residual_east_m, item.residual_north_m) < 1e-5
        assert math.hypot(item.predicted_east_m, item.predicted_north_m) < 3e-5
    lat, lon = PLANE_PLACES[100.0, 50.0]
    found = place_in(grid, lat, lon, H, measured(), outside_accepted=False)
    assert (found.easting_m, found.northing_m) == pytest.approx(local(100.0, 50.0), abs=2e-5)
    assert found.inside


def test_against_an_independent_least_squares() -> None:
    """scipy.optimize.least_squares with all coordinates of both systems as observations and the true places as unknowns
    (errors in both), constructed data with noise: parameters to a hundredth of their uncertainty, covariance to 1 %."""
    control = marks(5, seed=4)
    grid = fit_local_grid("quarry", FRAME, control)
    plane = np.array(
        [on_local_plane(GRS80, grid.lat0_deg, grid.lon0_deg, grid.scale0, m.lat_deg, m.lon_deg)[:2] for m in control]
    )
    given = np.array([[m.east_m, m.north_m] for m in control])
    lower = np.linalg.cholesky(np.linalg.inv(np.array(COV))).T

    def off(unknown: np.ndarray) -> np.ndarray:
        east, north, a, b = unknown[0] + given[0, 0], unknown[1] + given[0, 1], unknown[2], unknown[3]
        places = unknown[4:].reshape(-1, 2) + plane
        fitted = np.column_stack(
            [east + a * places[:, 0] - b * places[:, 1], north + b * places[:, 0] + a * places[:, 1]]
        )
        return np.concatenate([((given - fitted) / 0.003).ravel(), (unknown[4:].reshape(-1, 2) @ lower.T).ravel()])

    start = np.concatenate([[0.0, 0.0, grid.a, grid.b], np.zeros(2 * len(control))])
    scale = np.concatenate([[1e-3, 1e-3, 1e-6, 1e-6], np.full(2 * len(control), 1e-3)])
    solved = optimize.least_squares(off, start, x_scale=scale, xtol=1e-15, ftol=1e-15, gtol=1e-15)
    covariance = np.linalg.inv(solved.jac.T @ solved.jac)[:4, :4]
    found = np.array([grid.east_m - given[0, 0], grid.north_m - given[0, 1], grid.a, grid.b])
    u = np.sqrt(np.diag(covariance))
    assert np.abs((found - solved.x[:4]) / u).max() < 0.01
    own = np.asarray(grid.covariance_4) / max(1.0, grid.variance_factor)
    assert own == pytest.approx(covariance, rel=0.01, abs=0.01 * float(np.outer(u, u).max()) * 1e-6)
    assert grid.variance_factor * grid.dof == pytest.approx(2 * solved.cost, rel=0.01)


def test_equal_weights_are_the_textbook_formula() -> None:
    """Circular, equal uncertainties: a and b by the closed formula of the similarity about the centroids (common practice):
    a = sum(x E + y N) / sum(x^2 + y^2), b = sum(x N - y E) / the same."""
    control = [replace(m, cov_en_m2=((4e-6, 0.0), (0.0, 4e-6))) for m in marks(4, seed=9)]
    grid = fit_local_grid("quarry", FRAME, control)
    plane = np.array(
        [on_local_plane(GRS80, grid.lat0_deg, grid.lon0_deg, grid.scale0, m.lat_deg, m.lon_deg)[:2] for m in control]
    )
    given = np.array([[m.east_m, m.north_m] for m in control])
    x, y = (plane - plane.mean(axis=0)).T
    east, north = (given - given.mean(axis=0)).T
    total = float(np.sum(x * x + y * y))
    assert grid.a == pytest.approx(float(np.sum(x * east + y * north)) / total, abs=1e-12)
    assert grid.b == pytest.approx(float(np.sum(x * north - y * east)) / total, abs=1e-12)


def test_leave_one_out_is_a_fit_of_its_own() -> None:
    control = marks(5, seed=2)
    grid = fit_local_grid("quarry", FRAME, control)
    without = fit_local_grid("quarry", FRAME, control[1:])
    lat, lon = control[0].lat_deg, control[0].lon_deg
    found = place_in(without, lat, lon, control[0].h_m, measured(), outside_accepted=True)
    left = grid.misfits[0]
    # another centroid and mean height: the same similarity of another plane, to 0.05 mm
    assert left.predicted_east_m == pytest.approx(control[0].east_m - found.easting_m, abs=5e-5)
    assert left.predicted_north_m == pytest.approx(control[0].north_m - found.northing_m, abs=5e-5)
    larger = [abs(m.predicted_east_m) > abs(m.residual_east_m) for m in grid.misfits]
    assert sum(larger) >= 4, "a mark pulls its own fit"


def test_a_wrong_mark_is_found_by_prediction_not_by_residual() -> None:
    """20 mm wrong: its prediction says so, and the parameters' covariance is widened."""
    control = marks(5, seed=3)
    control[2] = replace(control[2], east_m=control[2].east_m + 0.020)
    grid = fit_local_grid("quarry", FRAME, control)
    worst = min(grid.misfits, key=lambda item: item.significance)
    assert worst.mark == "LG-3"
    assert worst.significance < 0.01
    assert abs(worst.predicted_east_m) > abs(worst.residual_east_m)
    assert grid.widened


def test_stated_uncertainty_of_a_new_mark_holds() -> None:
    """200 drawn sets of marks: error of a new mark inside its stated 95 % in 92 to 99 % (binomial 2.2 % at three sigma, and
    widening where a set happens to fit badly); the figure is the fit's, the new mark itself without error."""
    lat, lon = PLANE_PLACES[100.0, 50.0]
    inside = 0
    for seed in range(200):
        grid = fit_local_grid("quarry", FRAME, marks(4, seed=seed))
        found = place_in(grid, lat, lon, H, measured(1e-6), outside_accepted=False)
        east, north = local(100.0, 50.0)
        inside += math.hypot(found.easting_m - east, found.northing_m - north) <= found.horizontal95_m
    assert 0.92 <= inside / 200 <= 1.0


def test_its_own_uncertainty_is_added() -> None:
    """sqrt(fit^2 + own^2) per axis, the own one turned and scaled."""
    grid = fit_local_grid("quarry", FRAME, marks(5, seed=1))
    lat, lon = PLANE_PLACES[100.0, 50.0]
    fit_only = place_in(grid, lat, lon, H, measured(1e-9), outside_accepted=False)
    both = place_in(grid, lat, lon, H, measured(0.005), outside_accepted=False)
    for axis in (0, 1):
        assert both.u_en_m[axis] == pytest.approx(math.hypot(fit_only.u_en_m[axis], 0.005 * grid.scale), rel=1e-6)
    far = place_in(grid, *PLANE_PLACES[1500.0, 1500.0], H, measured(1e-9), outside_accepted=True)
    assert far.u_en_m[0] > fit_only.u_en_m[0]


def test_variance_factor_is_chi_squared() -> None:
    """Mean of the variance factors of drawn sets is 1 within four standard errors, sqrt(2 / (dof n)): the weights are right."""
    factors = [fit_local_grid("quarry", FRAME, marks(5, seed=seed)).variance_factor for seed in range(150)]
    assert np.mean(factors) == pytest.approx(1.0, abs=4 * math.sqrt(2 / (6 * 150)))
    values = np.array(factors) * 6
    assert stats.kstest(values, stats.chi2(6).cdf).pvalue > 0.001


# --- directions, lengths, heights ---------------------------------------------------------------------------------


def test_bearing_and_length_of_a_short_line() -> None:
    """A line of 120 m between two marks: azimuth = local bearing + correction to 0.1", grid length = ground length x combined
    factor to 0.01 mm; at the mean height the combined factor is the similarity's own scale."""
    grid = fit_local_grid("quarry", FRAME, marks())
    one, two = PLANE_PLACES[100.0, 50.0], geographic_of(190.0, -30.0)
    ends = [place_in(grid, *place, H, measured(), outside_accepted=False) for place in (one, two)]
    length, azimuth, _ = geodesic(GRS80, one, two)
    ground = length * (1 + H / mean_radius_m(one[0]))
    east, north = ends[1].easting_m - ends[0].easting_m, ends[1].northing_m - ends[0].northing_m
    bearing = math.degrees(math.atan2(east, north))
    assert (azimuth - bearing - ends[0].bearing_correction_deg + 180) % 360 - 180 == pytest.approx(0.0, abs=0.1 / 3600)
    assert math.hypot(east, north) == pytest.approx(ground * ends[0].combined_factor, abs=2e-5)
    assert ends[0].combined_factor == pytest.approx(1 + TRUE["ppm"] * 1e-6, abs=2e-8)
    higher = place_in(grid, *one, H + 63.8, measured(), outside_accepted=False)
    assert (higher.combined_factor / ends[0].combined_factor - 1) * 1e6 == pytest.approx(-10.0, abs=0.05)


def test_heights_shift_and_tilt() -> None:
    lat, lon = PLANE_PLACES[100.0, 50.0]
    shifted = fit_local_grid("quarry", FRAME, marks(3, heights=True))
    assert shifted.height_parameters == pytest.approx((-17.25,), abs=1e-9)
    assert place_in(shifted, lat, lon, 260.0, measured(), outside_accepted=False).height_m == pytest.approx(242.75)
    tilted = fit_local_grid("quarry", FRAME, marks(4, heights=True, tilt=(3e-5, -2e-5)), tilt=True)
    found = place_in(tilted, lat, lon, 260.0, measured(), outside_accepted=False)
    assert found.height_m == pytest.approx(242.75 + 3e-5 * 100 - 2e-5 * 50, abs=2e-5)
    assert found.vertical95_m is not None
    assert found.vertical95_m > 1.96 * 0.004
    plain = fit_local_grid("quarry", FRAME, marks(4, heights=True, tilt=(3e-5, -2e-5)))
    assert plain.height_variance_factor > 10, "the tilt shows in the residuals of a mere shift"
    without = fit_local_grid("quarry", FRAME, marks(4))
    assert place_in(without, lat, lon, 260.0, measured(), outside_accepted=False).height_m is None


# --- refusals ---------------------------------------------------------------------------------------------------


def test_three_marks_at_least_and_four_for_a_tilt() -> None:
    with pytest.raises(UsageError, match="needs 3 marks"):
        fit_local_grid("quarry", FRAME, marks(2))
    assert fit_local_grid("quarry", FRAME, marks(3)).dof == 2
    with pytest.raises(UsageError, match="needs 4 marks"):
        fit_local_grid("quarry", FRAME, marks(3, heights=True), tilt=True)


def test_marks_that_make_no_grid() -> None:
    line = [geographic_of(float(x), 0.0) for x in (0, 500, 1000)]
    on_line = [replace(m, lat_deg=place[0], lon_deg=place[1]) for m, place in zip(marks(3), line, strict=True)]
    wide = [*marks(3), replace(marks(4)[3], lat_deg=LAT + 2.0)]
    for control, said in (
        (on_line, "on a line"),
        (wide, "more than 50 km"),
        ([*marks(3), marks(3)[0]], "stands twice"),
        ([replace(marks(3)[0], u_m=0.0), *marks(3)[1:]], "over zero"),
        ([replace(marks(3, heights=True)[0], u_height_m=None), *marks(3)[1:]], "over zero"),
    ):
        with pytest.raises(UsageError, match=said) as refused:
            fit_local_grid("quarry", FRAME, control)
        assert refused.value.remedy


def test_outside_the_hull_needs_a_decision() -> None:
    grid = fit_local_grid("quarry", FRAME, marks())
    lat, lon = PLANE_PLACES[1500.0, 1500.0]
    with pytest.raises(ReductionError) as refused:
        place_in(grid, lat, lon, H, measured(), outside_accepted=False)
    assert refused.value.code == "outside_hull"
    assert "LG-1, LG-2" in refused.value.text
    assert not place_in(grid, lat, lon, H, measured(), outside_accepted=True).inside
    for item in marks():  # the marks themselves are inside
        assert place_in(grid, item.lat_deg, item.lon_deg, item.h_m, measured(), outside_accepted=False).inside


def test_hull_against_scipy() -> None:
    from scipy.spatial import ConvexHull

    rng = np.random.default_rng(8)
    for _ in range(20):
        points = rng.normal(size=(12, 2)) * 1000
        theirs = {tuple(points[index]) for index in ConvexHull(points).vertices}
        assert {tuple(corner) for corner in hull(points)} == theirs
