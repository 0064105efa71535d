"""Lines between marks against published geodesics and an independent library."""

from __future__ import annotations

import math

import numpy as np
import pytest
from published_tables import dms, table

from fieldbook.occupy.between import grid_line
from fieldbook.reduce.between import distances, radius_in_azimuth_m
from fieldbook.reduce.constants import GRS80, WGS84
from fieldbook.reduce.frames import geodesic, project
from fieldbook.reduce.geodesy import geocentric, meridian_radius_m, prime_vertical_radius_m

FLINDERS = (dms(-37, 57, 3.72030), dms(144, 25, 29.52440))
BUNINYONG = (dms(-37, 39, 10.15610), dms(143, 55, 35.38390))


def stations() -> dict[str, tuple[float, float]]:
    found = {}
    for row in table("gda2020_mga55_traverse.csv"):
        lat, lon = (dms(*(float(row[f"{axis}_{part}"]) for part in "dms")) for axis in ("lat", "lon"))
        found[row["name"]] = (lat, lon)
    return found


def bearing(text: str) -> float:
    return dms(*(float(part) for part in text.split()))


def test_flinders_peak_to_buninyong() -> None:
    """GDA2020 Technical Manual v1.3, table 5.1, page 51: 54972.271 m, 306 52 05.37, reverse 127 10 25.07. Tolerance 0.5 mm
    and 0.005 seconds: the last printed digit."""
    length, forward, reverse = geodesic(GRS80, FLINDERS, BUNINYONG)
    assert length == pytest.approx(54972.271, abs=0.0005)
    assert forward == pytest.approx(dms(306, 52, 5.37), abs=0.005 / 3600)
    assert reverse == pytest.approx(dms(127, 10, 25.07), abs=0.005 / 3600)


@pytest.mark.parametrize("row", list(table("gda2020_mga55_lines.csv")), ids=lambda row: f"{row['from']}-{row['to']}")
def test_lines_of_the_manual(row: dict[str, str]) -> None:
    """The same, figure C.2, pages 74-75: ellipsoidal distance to 0.5 mm, azimuths to 0.006", plane distance to 1.2 mm and
    line scale factor to 3e-8 (coordinates are printed to 1 mm, which is 2.5e-8 of the shortest line)."""
    places = stations()
    one, two = places[row["from"]], places[row["to"]]
    length, forward, reverse = geodesic(GRS80, one, two)
    assert length == pytest.approx(float(row["s"]), abs=0.0005)
    assert forward == pytest.approx(bearing(row["fwd_az"]), abs=0.006 / 3600)
    assert reverse == pytest.approx(bearing(row["rev_az"]), abs=0.006 / 3600)
    planes = [project("EPSG:7843", "EPSG:7855", *place, 0.0, outside_area_accepted=True) for place in (one, two)]
    ends = [(plane.easting_m, plane.northing_m) for plane in planes]
    grid = grid_line("EPSG:7855", "", ends[0], ends[1], length)
    assert grid.distance_m == pytest.approx(float(row["L"]), abs=0.0012)
    assert grid.factor == pytest.approx(float(row["K"]), abs=3e-8)


def test_grid_bearing_of_the_manual() -> None:
    """Figure C.2, Flinders Peak to Buninyong: plane bearings 305 17 01.72 and 125 17 41.86 are those of the geodesic's
    image; less the arc-to-chord +19.47" and -20.67" they are the straight line's, both ways. Tolerance 0.02"."""
    ends = [
        (plane.easting_m, plane.northing_m)
        for plane in (
            project("EPSG:7843", "EPSG:7855", *place, None, outside_area_accepted=True)
            for place in (FLINDERS, BUNINYONG)
        )
    ]
    there, back = grid_line("", "", ends[0], ends[1], None), grid_line("", "", ends[1], ends[0], None)
    assert there.bearing_deg is not None
    assert back.bearing_deg is not None
    assert there.bearing_deg == pytest.approx((back.bearing_deg + 180.0) % 360.0, abs=1e-10)
    assert there.bearing_deg == pytest.approx(dms(305, 17, 1.72) + 19.47 / 3600, abs=0.02 / 3600)
    assert back.bearing_deg == pytest.approx(dms(125, 17, 41.86) - 20.67 / 3600, abs=0.02 / 3600)
    assert there.factor is None


def test_geodesics_against_pygeodesy() -> None:
    """pygeodesy 26 ellipsoidalExact (its own elliptic integrals) over the globe, poles, 180th meridian and nearly opposite
    points included. Tolerance 0.001 mm in length; azimuths to 1e-9 degree where the length determines them."""
    exact = pytest.importorskip("pygeodesy.ellipsoidalExact").LatLon
    rng = np.random.default_rng(20270304)
    pairs = [
        (tuple(rng.uniform((-90, -180), (90, 180))), tuple(rng.uniform((-90, -180), (90, 180)))) for _ in range(40)
    ]
    pairs += [((90.0, 0.0), (45.0, 10.0)), ((10.0, 179.999), (10.0, -179.999)), ((30.0, 0.0), (-29.9, 179.8))]
    pairs += [((-37.0, 144.0), (-37.0 + d, 144.0 + d)) for d in (1e-7, 1e-5, 1e-3)]
    for one, two in pairs:
        length, forward, _ = geodesic(WGS84, one, two)
        other = exact(*one).distanceTo3(exact(*two))
        assert length == pytest.approx(other.distance, abs=1e-6)
        if 1.0 < length < 1.9e7 and abs(one[0]) < 89.9:
            assert (forward - other.initial + 180.0) % 360.0 - 180.0 == pytest.approx(0.0, abs=1e-7)


def test_distances_of_one_line_fit_together() -> None:
    """No source, but closed formulas: slope^2 - dh^2 = chord^2 (1 + h1/R)(1 + h2/R) for a sphere of radius R, so for short
    lines with Euler's R (1 mm over 5 km at 2000 m); the chord is shorter than the geodesic by s^3 / 24 R^2."""
    for azimuth in (0.0, 30.0, 90.0, 135.0):
        one = (-37.0, 144.0, 2000.0)
        two = (
            one[0] + 0.045 * math.cos(math.radians(azimuth)),
            one[1] + 0.056 * math.sin(math.radians(azimuth)),
            2350.0,
        )
        length, forward, _ = geodesic(GRS80, one[:2], two[:2])
        found = distances(one, two, GRS80, length, forward)
        radius = radius_in_azimuth_m((one[0] + two[0]) / 2, forward, GRS80)
        assert found.slope_m is not None
        assert found.ground_m is not None
        level = found.slope_m**2 - 350.0**2
        assert math.sqrt(level / (1 + one[2] / radius) / (1 + two[2] / radius)) == pytest.approx(
            found.chord_m, abs=1e-3
        )
        assert length - found.chord_m == pytest.approx(length**3 / 24 / radius**2, abs=1e-5)
        assert found.ground_m == pytest.approx(length * (1 + 2175.0 / radius), abs=1e-6)
        assert found.slope_m == pytest.approx(float(np.linalg.norm(geocentric(*two) - geocentric(*one))), abs=1e-9)


def test_radii_of_the_two_main_directions() -> None:
    """Euler's formula ends in M and N."""
    assert radius_in_azimuth_m(-37.0, 0.0, GRS80) == pytest.approx(meridian_radius_m(-37.0), rel=1e-15)
    assert radius_in_azimuth_m(-37.0, 90.0, GRS80) == pytest.approx(prime_vertical_radius_m(-37.0), rel=1e-15)


def test_without_heights_only_the_ellipsoid_is_left() -> None:
    found = distances((-37.0, 144.0, None), (-37.1, 144.0, 5.0), GRS80, 11097.0, 180.0)
    assert (found.slope_m, found.ground_m, found.mean_height_m) == (None, None, None)
    assert found.chord_m > 11000
