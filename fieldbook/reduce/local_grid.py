"""A local plane grid from marks known in both systems: four-parameter similarity by weighted least squares.

Strategy: the marks' latitudes and longitudes go onto a transverse Mercator plane about the centroid of their hull, scaled by
1 + h/R to their mean height h, so that its lengths are ground lengths there and the similarity's own scale says how far the
local grid is from the ground. Then

    E = east + a x - b y,   N = north + b x + a y

with the weight matrix of both systems together: C = C_local + J C_gnss J', J = [[a, -b], [b, a]], which is fixed in a few
rounds because J hardly changes. Every mark is predicted by the fit without it: residuals of few marks are small because
the marks themselves pulled the fit to them. Where the marks fit worse than stated, the parameters' covariance is widened by
the variance factor; where better, it stays.

Heights, if given: H = h + shift, from four marks on also a tilt, by the same rules.

A new mark's uncertainty is its own, turned into the grid, and that of the parameters at its place. The frame operation is
the same error in all marks and is absorbed by the fit; it is in neither.

Sources: similarity and least squares: common practice of the trade; covariance J C J': GUM 5.2.2.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy import special

from fieldbook.errors import ReductionError, UsageError
from fieldbook.model.local_grid import ControlMark, LocalGrid, LocalPosition, Misfit
from fieldbook.model.reduction import Uncertainty
from fieldbook.reduce.budget import Term, combine, welch_satterthwaite
from fieldbook.reduce.constants import Ellipsoid
from fieldbook.reduce.frames import frame_info, on_local_plane
from fieldbook.reduce.geodesy import enu_of_xyz, geocentric, geographic, mean_radius_m, xyz_of_enu
from fieldbook.reduce.region import coverage_factor_95

Floats = NDArray[np.float64]
LEAST_MARKS, LEAST_FOR_TILT = 3, 4
WIDEST_M = 50_000.0  # from the centroid: a grid of plane ground lengths has no business further out
THINNEST_M = 1.0  # the hull's narrowest width
HULL_TOLERANCE_M = 0.001
ROUNDS = 20


@dataclass(frozen=True)
class _Fit:
    """Parameters with covariance, chi-squared and residuals (given minus fitted)."""

    parameters: Floats
    covariance: Floats
    chi2: float
    residuals: Floats


def fit_local_grid(name: str, frame: str, marks: Sequence[ControlMark], *, tilt: bool = False) -> LocalGrid:
    """The local grid of at least three marks.

    Raises:
        UsageError: under three marks (four heights for a tilt), one twice, nearly on a line, too wide, uncertainties that
            are not positive.
    """
    _check(marks)
    ellipsoid = frame_info(frame).ellipsoid
    lat0, lon0 = _centroid(marks, ellipsoid)
    height = math.fsum(item.h_m for item in marks) / len(marks)
    scale0 = 1.0 + height / mean_radius_m(lat0, ellipsoid)
    plane = np.array([on_local_plane(ellipsoid, lat0, lon0, scale0, item.lat_deg, item.lon_deg)[:2] for item in marks])
    _check_shape(plane)
    whole = _plan_fit(plane, marks)
    dof = 2 * len(marks) - 4
    factor = whole.chi2 / dof
    grid = LocalGrid(
        name=name,
        frame=frame_info(frame).code,
        lat0_deg=lat0,
        lon0_deg=lon0,
        scale0=scale0,
        plane_height_m=height,
        east_m=float(whole.parameters[0]),
        north_m=float(whole.parameters[1]),
        a=float(whole.parameters[2]),
        b=float(whole.parameters[3]),
        covariance_4=_rows(whole.covariance * max(1.0, factor)),
        dof=dof,
        variance_factor=factor,
        marks=tuple(marks),
        misfits=(),
    )
    grid, height_left = _with_heights(grid, plane, marks, tilt=tilt)
    return replace(grid, misfits=_misfits(plane, marks, whole, height_left))


def place_in(
    grid: LocalGrid, lat_deg: float, lon_deg: float, h_m: float, uncertainty: Uncertainty, *, outside_accepted: bool
) -> LocalPosition:
    """A mark of the grid's own frame in the local grid.

    Args:
        uncertainty: of the mark as measured, without the frame operation.

    Raises:
        ReductionError: outside the hull of the grid's marks without a recorded decision.
    """
    ellipsoid = frame_info(grid.frame).ellipsoid
    x, y, convergence, scale = on_local_plane(ellipsoid, grid.lat0_deg, grid.lon0_deg, grid.scale0, lat_deg, lon_deg)
    inside = inside_hull(grid, x, y)
    if not inside and not outside_accepted:
        raise ReductionError(
            f"The mark lies outside the marks that made the local grid {grid.name} ({_names(grid)}).",
            "Fit the grid to marks around it, or record a decision: outside_hull=true with its reason.",
            code="outside_hull",
        )
    turn = np.array([[grid.a, -grid.b], [grid.b, grid.a]])
    east, north = np.array([grid.east_m, grid.north_m]) + turn @ np.array([x, y])
    own = turn @ np.asarray(uncertainty.cov_en_m2) @ turn.T
    design = _design(np.array([[x, y]]))
    of_fit = design @ np.asarray(grid.covariance_4) @ design.T
    dofs = [dof for dof in uncertainty.dof_enu[:2] if dof is not None]
    fit_dof = float(grid.dof) if grid.widened else None
    total = combine(
        [
            _plan_term("the mark", own, min(dofs) if dofs else None),
            _plan_term("the local grid", of_fit, fit_dof),
        ]
    )
    local_h, local_95 = _height_of(grid, x, y, h_m, uncertainty)
    radius = mean_radius_m(lat_deg, ellipsoid)
    # scale0 is in `scale`; together with the similarity's own it leads from the ellipsoid to the local grid
    scale_factor = scale * grid.scale
    elevation = radius / (radius + h_m)
    return LocalPosition(
        name=grid.name,
        easting_m=float(east),
        northing_m=float(north),
        height_m=local_h,
        u_en_m=[float(value) for value in total.u_enu_m[:2] if value is not None],
        horizontal95_m=total.horizontal95_m,
        vertical95_m=local_95,
        bearing_correction_deg=_signed_deg(convergence + math.degrees(math.atan2(grid.b, grid.a))),
        scale_factor=scale_factor,
        elevation_factor=elevation,
        combined_factor=scale_factor * elevation,
        plane_height_m=grid.plane_height_m,
        inside=inside,
        marks=[item.mark for item in grid.marks],
        largest_residual_m=max(math.hypot(m.residual_east_m, m.residual_north_m) for m in grid.misfits),
        largest_predicted_m=max(math.hypot(m.predicted_east_m, m.predicted_north_m) for m in grid.misfits),
        scale_ppm=(grid.scale - 1.0) * 1e6,
        widened=grid.widened,
    )


def inside_hull(grid: LocalGrid, x_m: float, y_m: float) -> bool:
    """Is a place of the plane within the convex hull of the grid's marks (1 mm tolerance)?"""
    ellipsoid = frame_info(grid.frame).ellipsoid
    points = np.array(
        [
            on_local_plane(ellipsoid, grid.lat0_deg, grid.lon0_deg, grid.scale0, item.lat_deg, item.lon_deg)[:2]
            for item in grid.marks
        ]
    )
    corners = hull(points)
    for start, end in zip(corners, np.roll(corners, -1, axis=0), strict=True):
        edge = end - start
        off = (edge[0] * (y_m - start[1]) - edge[1] * (x_m - start[0])) / math.hypot(*edge)
        if off < -HULL_TOLERANCE_M:
            return False
    return True


def hull(points: Floats) -> Floats:
    """Corners of the convex hull, anticlockwise, shape (k, 2). A. M. Andrew's monotone chain (1979; from memory, high)."""
    ordered = sorted({(float(x), float(y)) for x, y in points})

    def chain(source: Sequence[tuple[float, float]]) -> list[tuple[float, float]]:
        found: list[tuple[float, float]] = []
        for point in source:
            while len(found) > 1 and _turn(found[-2], found[-1], point) <= 0.0:
                found.pop()
            found.append(point)
        return found[:-1]

    return np.array([*chain(ordered), *chain(ordered[::-1])])


def _turn(one: tuple[float, float], two: tuple[float, float], three: tuple[float, float]) -> float:
    return (two[0] - one[0]) * (three[1] - one[1]) - (two[1] - one[1]) * (three[0] - one[0])


# -- the fit -----------------------------------------------------------------------------------------------------


def _plan_fit(plane: Floats, marks: Sequence[ControlMark]) -> _Fit:
    """East, north, a, b from 2 n coordinates. Two marks fit exactly."""
    given = np.array([value for item in marks for value in (item.east_m, item.north_m)])
    centre = given.reshape(-1, 2).mean(axis=0)
    design = _design(plane)
    reduced = given - np.tile(centre, len(marks))
    parameters = np.linalg.lstsq(design, reduced, rcond=None)[0]
    for _ in range(ROUNDS):
        a, b = parameters[2:]
        lower = np.linalg.cholesky(_covariance(marks, np.array([[a, -b], [b, a]])))
        left, right = np.linalg.solve(lower, design), np.linalg.solve(lower, reduced)
        better = np.linalg.lstsq(left, right, rcond=None)[0]
        moved = float(np.abs(better - parameters).max())
        parameters = better
        if moved < 1e-13:
            break
    r = np.linalg.qr(left, mode="r")
    inverse = np.linalg.solve(r, np.eye(4))
    residuals = reduced - design @ parameters
    whitened = np.linalg.solve(lower, residuals)
    found = parameters + np.array([*centre, 0.0, 0.0])
    return _Fit(found, inverse @ inverse.T, float(whitened @ whitened), residuals.reshape(-1, 2))


def _covariance(marks: Sequence[ControlMark], turn: Floats) -> Floats:
    """Of given minus fitted, shape (2 n, 2 n): the local coordinates' and the turned ones of latitude and longitude."""
    total = np.zeros((2 * len(marks), 2 * len(marks)))
    for row, item in enumerate(marks):
        place = slice(2 * row, 2 * row + 2)
        total[place, place] = item.u_m**2 * np.eye(2) + turn @ np.asarray(item.cov_en_m2) @ turn.T
    return total


def _design(plane: Floats) -> Floats:
    """Rows (1, 0, x, -y) and (0, 1, y, x) for each place, shape (2 n, 4)."""
    x, y = plane[:, 0], plane[:, 1]
    one, none = np.ones_like(x), np.zeros_like(x)
    return np.stack([np.stack([one, none, x, -y], axis=1), np.stack([none, one, y, x], axis=1)], axis=1).reshape(-1, 4)


def _with_heights(
    grid: LocalGrid, plane: Floats, marks: Sequence[ControlMark], *, tilt: bool
) -> tuple[LocalGrid, dict[str, tuple[float, float | None, float | None]]]:
    """The grid with its heights, and per mark residual, predicted difference and its u."""
    rows = [row for row, item in enumerate(marks) if item.height_m is not None]
    least = LEAST_FOR_TILT if tilt else 1
    if tilt and len(rows) < LEAST_FOR_TILT:
        raise UsageError(
            f"A tilt of the heights needs {LEAST_FOR_TILT} marks with heights, and there are {len(rows)}.",
            "Leave the tilt out, or add marks with heights.",
            code="local_grid_heights",
        )
    if len(rows) < least:
        return grid, {}
    chosen = [marks[row] for row in rows]
    whole = _height_fit(plane[rows], chosen, tilt=tilt)
    dof = len(rows) - len(whole.parameters)
    factor = whole.chi2 / dof if dof > 0 else 1.0
    left: dict[str, tuple[float, float | None, float | None]] = {}
    for place, item in enumerate(chosen):
        others = [row for row in range(len(chosen)) if row != place]
        if len(others) < len(whole.parameters):
            left[item.mark] = (float(whole.residuals[place]), None, None)
            continue
        without = _height_fit(plane[rows][others], [chosen[row] for row in others], tilt=tilt)
        row = _height_design(plane[rows][place : place + 1], tilt=tilt)
        predicted = (item.height_m or 0.0) - item.h_m - float((row @ without.parameters)[0])
        u = math.sqrt(float((row @ without.covariance @ row.T)[0, 0]) + _height_u2(item))
        left[item.mark] = (float(whole.residuals[place]), predicted, u)
    found = replace(
        grid,
        height_parameters=tuple(float(value) for value in whole.parameters),
        height_covariance=_rows(whole.covariance * max(1.0, factor)),
        height_dof=dof,
        height_variance_factor=factor,
    )
    return found, left


def _height_fit(plane: Floats, marks: Sequence[ControlMark], *, tilt: bool) -> _Fit:
    design = _height_design(plane, tilt=tilt)
    given = np.array([(item.height_m or 0.0) - item.h_m for item in marks])
    weight = 1.0 / np.sqrt(np.array([_height_u2(item) for item in marks]))
    parameters = np.linalg.lstsq(design * weight[:, None], given * weight, rcond=None)[0]
    normal = (design * weight[:, None]).T @ (design * weight[:, None])
    residuals = given - design @ parameters
    return _Fit(parameters, np.linalg.inv(normal), float(np.sum((residuals * weight) ** 2)), residuals)


def _height_design(plane: Floats, *, tilt: bool) -> Floats:
    one = np.ones((len(plane), 1))
    return np.hstack([one, plane]) if tilt else one


def _height_u2(item: ControlMark) -> float:
    return (item.u_up_m or 0.0) ** 2 + (item.u_height_m or 0.0) ** 2


def _misfits(
    plane: Floats,
    marks: Sequence[ControlMark],
    whole: _Fit,
    heights: dict[str, tuple[float, float | None, float | None]],
) -> tuple[Misfit, ...]:
    found = []
    for place, item in enumerate(marks):
        others = [row for row in range(len(marks)) if row != place]
        without = _plan_fit(plane[others], [marks[row] for row in others])
        design = _design(plane[place : place + 1])
        predicted = np.array([item.east_m, item.north_m]) - design @ without.parameters
        a, b = without.parameters[2:]
        turn = np.array([[a, -b], [b, a]])
        covariance = design @ without.covariance @ design.T + _covariance([item], turn)
        chi2 = float(predicted @ np.linalg.solve(covariance, predicted))
        height = heights.get(item.mark)
        found.append(
            Misfit(
                mark=item.mark,
                residual_east_m=float(whole.residuals[place, 0]),
                residual_north_m=float(whole.residuals[place, 1]),
                residual_height_m=None if height is None else height[0],
                predicted_east_m=float(predicted[0]),
                predicted_north_m=float(predicted[1]),
                u_east_m=math.sqrt(float(covariance[0, 0])),
                u_north_m=math.sqrt(float(covariance[1, 1])),
                significance=float(special.chdtrc(2.0, chi2)),
                predicted_height_m=None if height is None else height[1],
                u_height_m=None if height is None else height[2],
            )
        )
    return tuple(found)


# -- a new mark --------------------------------------------------------------------------------------------------


def _plan_term(source: str, covariance: Floats, dof: float | None) -> Term:
    u_e, u_n = math.sqrt(float(covariance[0, 0])), math.sqrt(float(covariance[1, 1]))
    rho = float(covariance[0, 1]) / (u_e * u_n) if u_e > 0.0 and u_n > 0.0 else 0.0
    return Term(source, "B", "normal", (u_e, u_n, 0.0), (dof, dof, None), rho_en=rho)


def _height_of(
    grid: LocalGrid, x: float, y: float, h_m: float, uncertainty: Uncertainty
) -> tuple[float | None, float | None]:
    """Local height and its 95 %, where the grid has heights."""
    if grid.height_parameters is None or grid.height_covariance is None:
        return None, None
    row = _height_design(np.array([[x, y]]), tilt=len(grid.height_parameters) > 1)[0]
    height = h_m + float(row @ np.asarray(grid.height_parameters))
    u_up, dof_up = uncertainty.u_enu_m[2], uncertainty.dof_enu[2]
    if u_up is None:
        return height, None
    of_fit = math.sqrt(float(row @ np.asarray(grid.height_covariance) @ row))
    fit_dof = float(grid.height_dof) if grid.height_variance_factor > 1.0 and grid.height_dof else None
    u, dof = welch_satterthwaite([(u_up, dof_up), (of_fit, fit_dof)])
    return height, coverage_factor_95(dof) * u


# -- what is refused -----------------------------------------------------------------------------------------------


def _check(marks: Sequence[ControlMark]) -> None:
    if len(marks) < LEAST_MARKS:
        raise UsageError(
            f"A local grid needs {LEAST_MARKS} marks, so that something is left to check it, and there are {len(marks)}.",
            "Add marks known in both systems.",
            code="local_grid_marks",
        )
    names = [item.mark for item in marks]
    twice = next((name for name in names if names.count(name) > 1), None)
    if twice is not None:
        raise UsageError(f"Mark {twice} stands twice.", "Give each mark once.", code="local_grid_marks")
    for item in marks:
        if not item.u_m > 0.0 or (item.height_m is not None and not (item.u_height_m or 0.0) > 0.0):
            raise UsageError(
                f"The local coordinates of {item.mark} need a standard uncertainty over zero.",
                "State u_m, and u_height_m with a height: nothing is assumed to be without error.",
                code="local_grid_marks",
            )


def _check_shape(plane: Floats) -> None:
    if float(np.abs(plane).max()) > WIDEST_M:
        raise UsageError(
            f"The marks lie more than {WIDEST_M / 1000:.0f} km from their middle.",
            "A local grid holds ground lengths of one plane: fit several, or use a national grid.",
            code="local_grid_shape",
        )
    corners = hull(plane)
    narrow = min(
        max(float(_turn(tuple(one), tuple(two), tuple(point))) / math.hypot(*(two - one)) for point in corners)
        for one, two in zip(corners, np.roll(corners, -1, axis=0), strict=True)
    )
    if len(corners) < LEAST_MARKS or narrow < THINNEST_M:
        raise UsageError(
            "The marks lie on a line: there is no area between them for which a grid could stand.",
            "Add a mark to the side.",
            code="local_grid_shape",
        )


def _centroid(marks: Sequence[ControlMark], ellipsoid: Ellipsoid) -> tuple[float, float]:
    """Centroid of the area of the marks' hull, in latitude and longitude, to 0.00001 degree: it names the plane."""
    xyz = [geocentric(item.lat_deg, item.lon_deg, 0.0, ellipsoid) for item in marks]
    lat, lon, _ = geographic(np.mean(xyz, axis=0), ellipsoid)
    middle = geocentric(lat, lon, 0.0, ellipsoid)
    flat = np.array([enu_of_xyz(point - middle, lat, lon)[:2] for point in xyz])
    corners = hull(flat)
    if len(corners) < LEAST_MARKS:
        return round(lat, 5), round(lon, 5)  # on a line: refused right after, by its shape
    after = np.roll(corners, -1, axis=0)
    cross = corners[:, 0] * after[:, 1] - corners[:, 1] * after[:, 0]
    x, y = (float(np.sum((corners[:, axis] + after[:, axis]) * cross) / (3.0 * np.sum(cross))) for axis in (0, 1))
    place = geographic(middle + xyz_of_enu([x, y, 0.0], lat, lon), ellipsoid)
    return round(place[0], 5), round(place[1], 5)


def _rows(matrix: Floats) -> tuple[tuple[float, ...], ...]:
    return tuple(tuple(float(value) for value in row) for row in matrix)


def _names(grid: LocalGrid) -> str:
    return ", ".join(item.mark for item in grid.marks)


def _signed_deg(degrees: float) -> float:
    return (degrees + 180.0) % 360.0 - 180.0
