"""What a typed position means on the ground, and a position printed in a typed form: the way there and back.

Reading is `settings.coordinates`, printing `model.coordinates`; both are exact. Between them only two things are
computed: geocentric coordinates on the frame's ellipsoid, and a grid's projection.
"""

from __future__ import annotations

from decimal import Decimal

from fieldbook.errors import UsageError
from fieldbook.model.coordinates import (
    ANGULAR_FORMS,
    FORMS,
    Angular,
    Geocentric,
    Typed,
    angular_text,
    decimals_of_angle,
    geocentric_text,
    grid_text,
)
from fieldbook.model.rounding import rounded
from fieldbook.reduce.frames.projection import project, unproject
from fieldbook.reduce.frames.registry import frame_info
from fieldbook.reduce.geodesy import geocentric, geographic


def located(typed: Typed, frame: str) -> tuple[float, float, float | None]:
    """Latitude, longitude (degrees) and ellipsoidal height (metres, None = not stated) in a frame.

    Raises:
        UsageError: geocentric figures that are not near the earth's surface; a grid of another datum (`check_grid`).
        ReductionError: a plane position the grid cannot answer for.
    """
    if isinstance(typed, Angular):
        return float(typed.lat_deg), float(typed.lon_deg), None if typed.h_m is None else float(typed.h_m)
    if isinstance(typed, Geocentric):
        ellipsoid = frame_info(frame).ellipsoid
        xyz = [float(value) for value in (typed.x_m, typed.y_m, typed.z_m)]
        radius = sum(value * value for value in xyz) ** 0.5
        if not 6.2e6 < radius < 6.5e6:
            raise UsageError(
                f"X, Y, Z lie {radius / 1000:.0f} km from the geocentre; the ground is 6357 to 6387 km from it.",
                "Look at the figures and their unit: metres.",
                code="no_position",
            )
        return geographic(xyz, ellipsoid)
    lat, lon = unproject(frame, typed.grid, float(typed.easting_m), float(typed.northing_m))
    return lat, lon, None if typed.h_m is None else float(typed.h_m)


def printed(
    place: tuple[float, float, float | None],
    frame: str,
    form: str,
    metre_decimals: int,
    *,
    grid: str | None = None,
    outside_area_accepted: bool = False,
) -> str:
    """A position in one of `FORMS`, every part with the digits that `metre_decimals` of a metre deserve.

    Reading the text and printing it again gives the same text.

    Raises:
        UsageError: an unknown form, `grid` without its code, or geocentric without a height.
        ReductionError: the grid cannot be had here (`project`).
    """
    lat, lon, h_m = place
    if form in ANGULAR_FORMS:
        return angular_text(lat, lon, form, decimals_of_angle(metre_decimals, form)) + _height(h_m, metre_decimals)
    if form == "geocentric":
        if h_m is None:
            raise UsageError(
                "X, Y, Z need the ellipsoidal height, which is not known.", "Print another form.", code="no_height"
            )
        xyz = geocentric(lat, lon, h_m, frame_info(frame).ellipsoid)
        x, y, z = (Decimal(rounded(float(value), metre_decimals)) for value in xyz)
        return geocentric_text(x, y, z)
    if form != "grid":
        raise UsageError(f"There is no form {form} of coordinates.", f"Name one of {', '.join(FORMS)}.")
    if grid is None:
        raise UsageError("A grid needs its EPSG code.", "Add e.g. EPSG:7855, or EPSG:16032 for UTM zone 32 north.")
    plane = project(frame, grid, lat, lon, h_m, outside_area_accepted=outside_area_accepted)
    east, north = (Decimal(rounded(value, metre_decimals)) for value in (plane.easting_m, plane.northing_m))
    return grid_text(plane.crs, east, north) + _height(h_m, metre_decimals)


def _height(h_m: float | None, metre_decimals: int) -> str:
    return "" if h_m is None else f"  h {rounded(h_m, metre_decimals)} m"
