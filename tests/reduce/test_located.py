"""Typed positions on the ground: geocentric and plane ones, there and back; the worst round trip over the globe is hunted."""

from __future__ import annotations

import math
from decimal import Decimal

import pytest
from hypothesis import given, settings, target
from hypothesis import strategies as st

from fieldbook.errors import ReductionError, UsageError
from fieldbook.model.coordinates import FORMS, Geocentric, Plane, text_of
from fieldbook.reduce.constants import GRS80, WGS84
from fieldbook.reduce.frames import frame_info, located, printed, project, unproject
from fieldbook.reduce.geodesy import enu_difference, geocentric, geographic
from fieldbook.settings.coordinates import parse_position

ALICE = (-23.67011016, 133.88552161, 603.2489)


def test_alice_springs_in_every_form() -> None:
    """GDA2020 Technical Manual v1.3, 3.1.1 and Appendix D: -23 40 12.39650, 133 53 07.87779, h 603.2489; X -4052052.7379,
    Y 4212835.9897, Z -2545104.5898; MGA2020 zone 53 386353.2343, 7381852.2986 (of another of the three coordinates of
    that mark: 3 mm). Tolerance 0.3 mm: 5 decimals of a second."""
    manual = "-23 40 12.39650 133 53 07.87779 h 603.2489"
    place = located(parse_position(manual), "EPSG:7843")
    assert geocentric(*place) == pytest.approx([-4052052.7379, 4212835.9897, -2545104.5898], abs=3e-4)
    assert printed(place, "EPSG:7843", "dms", 3) == "23°40′12.39650″ S  133°53′07.87779″ E  h 603.249 m"
    assert printed(place, "EPSG:7843", "grid", 3, grid="EPSG:7853").startswith(
        "EPSG:7853  E 386353.234 m  N 7381852.29"
    )
    for form in FORMS:
        text = printed(place, "EPSG:7843", form, 4, grid="EPSG:7853")
        again = located(parse_position(text), "EPSG:7843")
        assert enu_difference(place, (again[0], again[1], again[2] or 0.0)) == pytest.approx([0, 0, 0], abs=1.1e-4)
        assert printed(again, "EPSG:7843", form, 4, grid="EPSG:7853") == text


@pytest.mark.parametrize(
    ("typed", "frame", "lat", "lon"),
    [
        # GDA2020 Technical Manual v1.3, table C.1: Flinders Peak, MGA2020 zone 55 (1 mm of print)
        ("EPSG:7855 E 273741.297 N 5796489.777", "EPSG:7843", -37.95103342, 144.42486789),
        # Ordnance Survey guide, annex C, needs the frame of the grid itself: refused here, see below
        ("UTM 32 north E 478544.5238 N 5549792.3484", "EPSG:7931", 50.1, 8.7),
        ("EPSG:2048 E -55496.13 N -3752731.37", "EPSG:4941", -33.9, 18.4),
    ],
)
def test_plane_positions(typed: str, frame: str, lat: float, lon: float) -> None:
    found = located(parse_position(typed), frame)
    assert found[:2] == pytest.approx((lat, lon), abs=1e-7)
    assert found[2] is None


def test_plane_positions_that_are_refused() -> None:
    with pytest.raises(UsageError) as refused:
        located(Plane("EPSG:27700", Decimal("651409.903"), Decimal("313177.270")), "EPSG:7931")
    assert refused.value.code == "grid_datum"
    for east, north in (("273741", "1000"), ("9e9", "9e9"), ("-4000000", "5796489")):
        with pytest.raises(ReductionError) as outside:
            located(Plane("EPSG:7855", Decimal(east), Decimal(north)), "EPSG:7843")
        assert outside.value.code in ("outside_area", "grid_no_result")


@pytest.mark.parametrize("xyz", [("1", "2", "3"), ("-13294393", "13821641", "-8350078")])
def test_geocentric_figures_off_the_ground_are_refused(xyz: tuple[str, str, str]) -> None:
    with pytest.raises(UsageError, match="from the geocentre"):
        located(Geocentric(*(Decimal(value) for value in xyz)), "EPSG:7843")


def test_what_cannot_be_printed() -> None:
    with pytest.raises(UsageError, match="height"):
        printed((-23.0, 133.0, None), "EPSG:7843", "geocentric", 3)
    with pytest.raises(UsageError, match="EPSG code"):
        printed(ALICE, "EPSG:7843", "grid", 3)
    with pytest.raises(UsageError, match="no form"):
        printed(ALICE, "EPSG:7843", "packed", 3)


# --- the worst round trip ---------------------------------------------------------------------------------------

LIMIT_M = 1e-5
heights = st.floats(-11_000, 100_000)
awkward_lat = st.sampled_from([90.0, -90.0, math.nextafter(90, 0), 0.0, 5e-324, 1e-13, 45.0])
awkward_lon = st.sampled_from([-180.0, math.nextafter(180, 0), math.nextafter(-180, 0), 0.0, 90.0, -90.0])
latitudes = st.floats(-90, 90) | awkward_lat
longitudes = st.floats(-180, 180) | awkward_lon


@settings(max_examples=1000, deadline=None)
@given(latitudes, longitudes, heights, st.sampled_from([GRS80, WGS84]))
def test_geographic_and_geocentric(lat: float, lon: float, height: float, ellipsoid) -> None:
    """Poles and the 180th meridian included: under 0.01 mm."""
    there = geocentric(lat, lon, height, ellipsoid)
    back = geographic(there, ellipsoid)
    off = math.dist(geocentric(*back, ellipsoid), there)
    target(off)
    assert off < LIMIT_M
    assert abs(back[2] - height) < LIMIT_M
    assert -180.0 <= back[1] < 180.0


GRIDS = [
    ("EPSG:7843", "EPSG:7855"),  # transverse Mercator, east north
    ("EPSG:4959", "EPSG:2193"),  # north east
    ("EPSG:4941", "EPSG:2048"),  # west south
    ("EPSG:6319", "EPSG:6588"),  # Lambert conic, US survey feet
    ("EPSG:10605", "EPSG:32661"),  # polar stereographic
    ("EPSG:10605", "EPSG:5042"),
    ("EPSG:9989", "EPSG:16001"),  # UTM at the 180th meridian
    ("EPSG:9989", "EPSG:16060"),
    ("EPSG:9989", "EPSG:16132"),
    ("EPSG:4937", "EPSG:25833"),
    ("EPSG:4933", "EPSG:2056"),  # another datum: refused
]


@settings(max_examples=1000, deadline=None)
@given(st.sampled_from(GRIDS[:-1]), st.floats(0, 1), st.floats(0, 1))
def test_grid_inside_its_area(pair: tuple[str, str], across: float, along: float) -> None:
    """Every kind of axes and unit, the area of use from edge to edge: under 0.01 mm."""
    frame, grid = pair
    west, south, east, north = AREAS.setdefault(pair, area_of(frame, grid))
    if east < west:
        east += 360.0
    lat, lon = south + along * (north - south), west + across * (east - west)
    lon = (lon + 180.0) % 360.0 - 180.0
    plane = project(frame, grid, lat, lon, None, outside_area_accepted=True)
    back = unproject(frame, grid, plane.easting_m, plane.northing_m) if inside_by_a_hair(lat, lon, pair) else (lat, lon)
    off = float(math.hypot(*enu_difference((lat, lon, 0.0), (*back, 0.0), frame_info(frame).ellipsoid)[:2]))
    target(off)
    assert off < LIMIT_M


AREAS: dict[tuple[str, str], tuple[float, float, float, float]] = {}


def area_of(frame: str, grid: str) -> tuple[float, float, float, float]:
    from fieldbook.reduce.frames.projection import _grid

    bounds = _grid(frame, grid).bounds
    assert bounds is not None
    return bounds


def inside_by_a_hair(lat: float, lon: float, pair: tuple[str, str]) -> bool:
    """On the very edge the way back may end a hair outside."""
    west, south, east, north = AREAS[pair]
    gap = min(abs((lon - edge + 180) % 360 - 180) for edge in (west, east))
    whole = (west, east) == (-180.0, 180.0)
    return min(lat - south, north - lat) > 1e-9 and (whole or gap > 1e-9)


@settings(max_examples=300, deadline=None)
@given(st.floats(-44, -9), st.floats(144.0, 150.0), st.sampled_from(FORMS))
def test_any_form_and_back(lat: float, lon: float, form: str) -> None:
    """Printed to 0.1 mm, read, printed: the same text."""
    text = printed((lat, lon, 12.3456), "EPSG:7843", form, 4, grid="EPSG:7855", outside_area_accepted=True)
    read = parse_position(text)
    assert text_of(read) == text
    if form != "grid" or (-43.7 < lat < -10.1 and 144.1 < lon < 149.9):
        again = located(read, "EPSG:7843")
        assert printed(again, "EPSG:7843", form, 4, grid="EPSG:7855", outside_area_accepted=True) == text
