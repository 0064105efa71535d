"""There and back between frames, over the globe or over their areas of use: under 0.1 mm, hunted for the worst."""

from __future__ import annotations

import math

import pytest
from hypothesis import given, settings, target
from hypothesis import strategies as st

from fieldbook.model.session import FrameChoice
from fieldbook.reduce.frames import frame_info, transform_to_client
from fieldbook.reduce.geodesy import geocentric

LIMIT_M = 1e-4
GLOBAL = (
    "EPSG:9989",
    "EPSG:7912",
    "EPSG:7911",
    "EPSG:7909",
    "EPSG:10177",
    "EPSG:9379",
    "EPSG:10605",
    "EPSG:9754",
    "EPSG:7665",
)
REGIONAL = [  # receiver, client, south, north, west, east: inside both areas of use
    ("EPSG:9989", "EPSG:7843", -43.0, -12.0, 114.0, 153.0),
    ("EPSG:7912", "EPSG:4939", -43.0, -12.0, 114.0, 153.0),
    ("EPSG:4939", "EPSG:7843", -43.0, -12.0, 114.0, 153.0),
    ("EPSG:9989", "EPSG:7931", 37.0, 69.0, -8.0, 28.0),
    ("EPSG:7912", "EPSG:10570", 37.0, 69.0, -8.0, 28.0),
    ("EPSG:7931", "EPSG:10570", 37.0, 69.0, -8.0, 28.0),
    ("EPSG:10605", "EPSG:6319", 30.0, 48.0, -122.0, -75.0),
    ("EPSG:9989", "EPSG:10413", 50.0, 68.0, -135.0, -60.0),
    ("EPSG:9989", "EPSG:9332", 18.0, 30.0, 38.0, 52.0),
]
epochs = st.floats(1990.0, 2040.0)
heights = st.floats(-400.0, 9000.0)
latitudes = st.floats(-90, 90) | st.sampled_from([90.0, -90.0, 0.0, math.nextafter(90, 0)])
longitudes = st.floats(-180, 180) | st.sampled_from([180.0, -180.0, math.nextafter(180, 0), 0.0])


def off_after(one: str, two: str, place: tuple[float, float, float], epoch: float) -> float:
    """Metres between a place and itself after the way there and back."""

    def carried(source: str, goal: str, at: tuple[float, float, float]) -> tuple[float, float, float]:
        wanted = ["observation" if frame_info(code).dynamic else None for code in (source, goal)]
        choice = FrameChoice(source, goal, receiver_epoch=wanted[0], client_epoch=wanted[1])
        client, _ = transform_to_client(choice, *at, epoch)
        assert client is not None
        assert client.h_m is not None
        assert -180.0 <= client.lon_deg < 180.0
        return client.lat_deg, client.lon_deg, client.h_m

    back = carried(two, one, carried(one, two, place))
    ellipsoid = frame_info(one).ellipsoid
    return math.dist(geocentric(*place, ellipsoid), geocentric(*back, ellipsoid))


@settings(max_examples=200, deadline=None)
@given(st.sampled_from(GLOBAL), st.sampled_from(GLOBAL), latitudes, longitudes, heights, epochs)
def test_global_frames_over_the_globe(one: str, two: str, lat: float, lon: float, height: float, epoch: float) -> None:
    off = off_after(one, two, (lat, lon, height), epoch)
    target(off)
    assert off < LIMIT_M


@pytest.mark.parametrize("row", REGIONAL, ids=lambda row: f"{row[0]}-{row[1]}")
def test_regional_frames_over_their_area(row: tuple[str, str, float, float, float, float]) -> None:
    one, two, south, north, west, east = row

    @settings(max_examples=25, deadline=None)
    @given(st.floats(south, north), st.floats(west, east), heights, epochs)
    def hunt(lat: float, lon: float, height: float, epoch: float) -> None:
        off = off_after(one, two, (lat, lon, height), epoch)
        target(off)
        assert off < LIMIT_M

    hunt()
