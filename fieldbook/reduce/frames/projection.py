"""Client's latitude and longitude to a plane grid. The grid contributes its projection and nothing else.

`Transformer.from_crs(client, grid)` can hide a second change of datum (1.35 m from ITRF2020 to EPSG:32614), so the
projection always runs from the grid's own base frame, after that base has been held against the client's datum.
Accepted: a projected CRS of the client's datum; one whose base is an ensemble that lists the client's datum, on
the same ellipsoid; a bare EPSG conversion put on the client's frame.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache
from typing import Any

from pyproj import CRS, Proj, Transformer
from pyproj.crs import CoordinateOperation  # type: ignore[attr-defined]
from pyproj.enums import TransformDirection
from pyproj.exceptions import CRSError, ProjError

from fieldbook.errors import ReductionError, UsageError
from fieldbook.model.reduction import GridPosition
from fieldbook.reduce.constants import CONFORMAL_LIMIT
from fieldbook.reduce.frames.registry import (
    Bounds,
    FrameInfo,
    crs_of,
    ellipsoid_of,
    epsg_number,
    frame_info,
    inside,
    shortened,
)
from fieldbook.reduce.geodesy import elevation_factor, wrapped_longitude

_WEB_MERCATOR = 1024  # Popular Visualisation Pseudo-Mercator: passes as conformal with scale 1.5
# Bare conversions whose plane axes are east and north: transverse Mercator, Lambert conic 1SP and 2SP, Mercator A
# and B, Hotine oblique Mercator A and B. South-orientated and polar ones get their axes from a CRS only.
_EAST_NORTH_METHODS = {9807, 9801, 9802, 9804, 9805, 9812, 9815}


_ROUND_TRIP_M = 1e-5


@dataclass(frozen=True)
class Projection:
    """A projection ready to run: signs and factors turn PROJ's two numbers into east and north, in metres."""

    code: str
    name: str
    text: str
    transformer: Transformer
    latitude_first: bool
    factors: Proj
    east: tuple[int, float]  # which of PROJ's two numbers, and its factor to metres
    north: tuple[int, float]
    bounds: Bounds | None
    area_name: str


@dataclass(frozen=True)
class PlanePosition:
    """East and north in metres, convergence (azimuth = grid bearing + convergence) and scale."""

    easting_m: float
    northing_m: float
    convergence_deg: float
    scale_factor: float


def check_grid(client_code: str, grid_code: str) -> None:
    """Refuse a grid by kind before anything is computed.

    Raises:
        UsageError: not EPSG, unknown, no projection, Pseudo-Mercator, or of another datum than the client's frame.
    """
    _grid(frame_info(client_code).code, grid_code)


def project(
    client_code: str,
    grid_code: str,
    lat_deg: float,
    lon_deg: float,
    h_m: float | None,
    *,
    outside_area_accepted: bool,
) -> GridPosition:
    """East and north in metres, convergence (azimuth = grid bearing + convergence), scale and elevation factor.

    The elevation factor is R / (R + h) with R = sqrt(MN); None where h is unknown.

    Raises:
        UsageError: a grid of the wrong kind (`check_grid`).
        ReductionError: outside the grid's area of use without a decision; not conformal; no finite result.
    """
    client = frame_info(client_code)
    grid = _grid(client.code, grid_code)
    lon_deg = wrapped_longitude(lon_deg)
    if not inside(grid.bounds, lat_deg, lon_deg) and not outside_area_accepted:
        raise _outside(grid, lat_deg, lon_deg)
    plane = evaluated(grid, lat_deg, lon_deg)
    elevation = None if h_m is None else elevation_factor(lat_deg, h_m, client.ellipsoid)
    return GridPosition(
        crs=grid.code,
        crs_name=grid.name,
        easting_m=plane.easting_m,
        northing_m=plane.northing_m,
        convergence_deg=plane.convergence_deg,
        scale_factor=plane.scale_factor,
        elevation_factor=elevation,
        combined_factor=None if elevation is None else plane.scale_factor * elevation,
        zone_text=grid.text,
    )


def unproject(client_code: str, grid_code: str, easting_m: float, northing_m: float) -> tuple[float, float]:
    """Latitude and longitude in the client's frame of a plane position in metres east and north.

    Raises:
        UsageError: a grid of the wrong kind (`check_grid`).
        ReductionError: no finite result, or one that does not lead back to the same figures within 0.01 mm (a point
            far outside the projection); outside the grid's area of use.
    """
    grid = _grid(frame_info(client_code).code, grid_code)
    numbers = [0.0, 0.0]
    for value, (index, factor) in ((easting_m, grid.east), (northing_m, grid.north)):
        numbers[index] = value / factor
    try:
        pair = grid.transformer.transform(numbers[0], numbers[1], direction=TransformDirection.INVERSE, errcheck=True)
    except ProjError as error:
        raise _no_result(grid) from error
    lat, lon = (float(value) for value in (pair if grid.latitude_first else reversed(pair)))
    if not (math.isfinite(lat) and math.isfinite(lon)):
        raise _no_result(grid)
    lon = wrapped_longitude(lon)
    if not inside(grid.bounds, lat, lon):
        raise _outside(grid, lat, lon)
    again = evaluated(grid, lat, lon)
    if math.hypot(again.easting_m - easting_m, again.northing_m - northing_m) > _ROUND_TRIP_M:
        raise _no_result(grid)
    return lat, lon


def evaluated(grid: Projection, lat_deg: float, lon_deg: float) -> PlanePosition:
    """The projection alone: no frame, no area of use.

    Raises:
        ReductionError: no finite result, or not conformal here.
    """
    place = (lat_deg, lon_deg) if grid.latitude_first else (lon_deg, lat_deg)
    try:
        pair = grid.transformer.transform(*place, errcheck=True)
        factors = grid.factors.get_factors(lon_deg, lat_deg, errcheck=True)
    except ProjError as error:
        raise _no_result(grid) from error
    east, north = (float(pair[index] * factor) for index, factor in (grid.east, grid.north))
    scale, across = float(factors.meridional_scale), float(factors.parallel_scale)
    convergence = float(factors.meridian_convergence)
    if not all(math.isfinite(value) for value in (east, north, scale, across, convergence)):
        raise _no_result(grid)
    if abs(scale - across) > CONFORMAL_LIMIT:
        raise ReductionError(
            f"{grid.code} {grid.name} is not conformal here: it has no single scale factor.",
            "Give a conformal grid, or leave the grid out.",
            code="grid_not_conformal",
        )
    return PlanePosition(east, north, convergence, scale)


def _outside(grid: Projection, lat_deg: float, lon_deg: float) -> ReductionError:
    return ReductionError(
        f"The mark ({lat_deg:.4f}, {lon_deg:.4f}) is outside the area of use of {grid.code} {grid.name}: "
        f"{shortened(grid.area_name)}",
        "Give the grid of this place, or record a decision that accepts figures outside the area.",
        code="outside_area",
    )


def _no_result(grid: Projection) -> ReductionError:
    return ReductionError(
        f"{grid.code} {grid.name} gives no finite figures at this mark.",
        "Give the grid of this place, or leave the grid out.",
        code="grid_no_result",
    )


@lru_cache(maxsize=64)
def _grid(client_code: str, grid_code: str) -> Projection:
    client = frame_info(client_code)
    number = epsg_number(grid_code, "frame.grid")
    code = f"EPSG:{number}"
    try:
        crs = CRS.from_epsg(number)
    except CRSError:
        return _of_conversion(client, number)
    if crs.type_name != "Projected CRS":
        raise UsageError(
            f"frame.grid: {code} ({crs.name}) is a {crs.type_name}, not a projected one.",
            "Give a projected system such as EPSG:7855, or a conversion such as EPSG:16032.",
            code="grid_kind",
        )
    tree = crs.to_json_dict()
    _refuse_web_mercator(code, tree["conversion"])
    text = _checked_base(code, crs, client)
    base = crs.geodetic_crs
    if base is None:
        raise UsageError(f"frame.grid: {code} has no base frame.", "Give another grid.", code="grid_kind")
    return projection_of(code, crs.name, text, crs, base)


def _checked_base(code: str, crs: CRS, client: FrameInfo) -> str:
    """How the grid belongs to the client's frame, in words."""
    base = crs.geodetic_crs.to_json_dict() if crs.geodetic_crs is not None else {}
    if "datum" in base and base["datum"]["name"] == client.datum_name:
        return f"{crs.name}, of {client.name}"
    ensemble = base.get("datum_ensemble")
    if ensemble is not None:
        if client.ensemble and ensemble["name"] == client.datum_name:
            return f"{crs.name}, of {client.name}"
        members = {str(member["name"]) for member in ensemble["members"]}
        if client.datum_name in members and ellipsoid_of(crs) == client.ellipsoid:
            return f"projection of {code} applied to {client.name}"
    base_name = str(base.get("name", "another frame"))
    raise UsageError(
        f"frame.grid: {code} ({crs.name}) belongs to {base_name}, not to {client.name}.",
        "Give the grid of the client's frame, or its bare conversion, e.g. EPSG:16032 for UTM zone 32 north.",
        code="grid_datum",
    )


def _of_conversion(client: FrameInfo, number: int) -> Projection:
    """A bare EPSG conversion put on the client's frame."""
    code = f"EPSG:{number}"
    try:
        operation = CoordinateOperation.from_authority("EPSG", str(number))
    except CRSError as error:
        raise UsageError(
            f"frame.grid: {code} is neither a projected system nor a conversion of the EPSG data set.",
            "Check the code, e.g. EPSG:7855 for MGA zone 55 or EPSG:16032 for UTM zone 32 north.",
            code="grid_unknown",
        ) from error
    conversion = operation.to_json_dict()
    _refuse_web_mercator(code, conversion)
    method = conversion.get("method", {}).get("id", {}).get("code")
    if operation.type_name != "Conversion" or method not in _EAST_NORTH_METHODS:
        raise UsageError(
            f"frame.grid: {code} ({operation.name}) is no map projection with axes east and north.",
            "Give a projected system, or a conversion such as EPSG:16032.",
            code="grid_kind",
        )
    plane = crs_of(client.code).to_2d()
    area = operation.area_of_use
    crs = CRS.from_json_dict(
        {
            "type": "ProjectedCRS",
            "name": f"{client.name} / {operation.name}",
            "base_crs": {key: value for key, value in plane.to_json_dict().items() if key != "$schema"},
            "conversion": {key: conversion[key] for key in ("name", "method", "parameters")},
            "coordinate_system": {
                "subtype": "Cartesian",
                "axis": [
                    {"name": "Easting", "abbreviation": "E", "direction": "east", "unit": "metre"},
                    {"name": "Northing", "abbreviation": "N", "direction": "north", "unit": "metre"},
                ],
            },
        }
    )
    bounds = (area.west, area.south, area.east, area.north) if area is not None else None
    text = f"{operation.name} ({code}) applied to {client.name}"
    return projection_of(code, operation.name, text, crs, plane, bounds, str(area.name) if area is not None else "")


def projection_of(
    code: str,
    name: str,
    text: str,
    crs: CRS,
    base: CRS,
    bounds: Bounds | None = None,
    area_name: str = "",
) -> Projection:
    """A projected CRS on its own base frame, ready to run; area of use from the CRS unless given."""
    if bounds is None and crs.area_of_use is not None:
        area = crs.area_of_use
        bounds, area_name = (area.west, area.south, area.east, area.north), str(area.name)
    east, north, notes = _axes(crs)
    plane = base.to_2d()
    return Projection(
        code,
        name,
        "; ".join([text, *notes]),
        # One datum at both ends: PROJ has nothing but the projection to do. Without always_xy both ends keep the
        # declared order of axes, which is known; with it Krovak's southing still comes first.
        Transformer.from_crs(plane, crs, allow_ballpark=False, only_best=True),
        plane.axis_info[0].direction.lower() == "north",
        Proj(crs),
        east,
        north,
        bounds,
        area_name,
    )


def _axes(crs: CRS) -> tuple[tuple[int, float], tuple[int, float], list[str]]:
    """Which of the two numbers is east and which north, each with the factor that makes it metres."""
    axes = crs.axis_info
    directions = [axis.direction.lower() for axis in axes]
    # Polar grids have both axes south (or north): there the names tell, and the figures keep their sign.
    polar = directions[0] == directions[1]
    turned = {"west": -1.0, "south": -1.0}
    factors = [
        (1.0 if polar else turned.get(direction, 1.0)) * float(axis.unit_conversion_factor)
        for axis, direction in zip(axes, directions, strict=True)
    ]
    east = 0 if (axes[0].name.lower().startswith("east") if polar else directions[0] in ("east", "west")) else 1
    notes = []
    if not polar and "west" in directions:
        notes.append(f"axes {' and '.join(directions)}, turned to east and north")
    if axes[0].unit_name != "metre":
        notes.append(f"unit {axes[0].unit_name}, turned to metres")
    return (east, factors[east]), (1 - east, factors[1 - east]), notes


def _refuse_web_mercator(code: str, conversion: dict[str, Any]) -> None:
    if conversion.get("method", {}).get("id", {}).get("code") == _WEB_MERCATOR:
        raise UsageError(
            f"frame.grid: {code} is Pseudo-Mercator, a picture projection with a scale of 1.5 at middle latitudes.",
            "Give a survey grid.",
            code="grid_kind",
        )
