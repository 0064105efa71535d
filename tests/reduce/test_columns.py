"""Columns keep what was received; local metres against an independent geodesy library."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pyproj import Transformer

from fieldbook.model.epoch import E8MIN_PER_DEG, Epoch
from fieldbook.reduce.columns import CODE_NUMBER, MISSING, EpochColumns
from fieldbook.reduce.local_frame import UNITS_PER_M, LocalFrame


def test_columns_keep_integers_and_none() -> None:
    epochs = [
        Epoch(1, "GGA", "GN", 0, 86_399_900, None, -123456789012, 864_000_000_001, 8, 8, 1234567, 3, -4500000, 1, 4,
              station="0042", datum="999"),
        Epoch(2, "RMC", "GP", 1, 100, "no_fix"),
        Epoch(3, "GNS", "GN"),
    ]  # fmt: skip
    columns = EpochColumns.from_epochs(epochs)
    assert columns.instant_ms.tolist() == [86_399_900, 86_400_100, MISSING]
    assert columns.latitude_e8min.tolist() == [-123456789012, MISSING, MISSING]
    assert columns.height_e5m.tolist() == [1234567 - 4500000, MISSING, MISSING]
    assert columns.code.tolist() == [0, CODE_NUMBER["no_fix"], 0]
    assert columns.source.tolist() == [0, 2, 1]
    assert [columns.stations[0], columns.datums[0]] == ["0042", "999"]
    assert columns.station.tolist() == [0, MISSING, MISSING]
    assert np.isnan(columns.instant_s[2])


@settings(max_examples=30, deadline=None)
@given(st.lists(st.integers(0, 60), min_size=1, max_size=8))
def test_appending_in_chunks_equals_one_list(sizes: list[int]) -> None:
    epochs = [Epoch(i, "GGA", "GN", 0, i * 1000, station=str(i % 3)) for i in range(sum(sizes))]
    whole, grown, start = EpochColumns.from_epochs(epochs), EpochColumns(), 0
    for size in sizes:
        grown.append(epochs[start : start + size])
        start += size
    assert len(grown) == len(whole)
    for name in ("number", "instant_ms", "station", "height_e5m"):
        assert np.array_equal(getattr(grown, name), getattr(whole, name))


def _e8(degrees: float) -> int:
    return round(degrees * E8MIN_PER_DEG)


PLACES = [
    (0.0, 0.0),
    (-37.6, 144.9),
    (50.1, 8.6),
    (69.9, 179.99995),
    (-17.0, -179.99995),
    (89.9999, 30.0),
    (-90.0, 0.0),
]


@pytest.mark.parametrize(("lat", "lon"), PLACES)
@pytest.mark.parametrize("reach_m", [10.0, 1_000.0, 50_000.0, 3_000_000.0])
def test_local_metres_against_proj(lat: float, lon: float, reach_m: float) -> None:
    """PROJ 9.5.1 `cart` and `topocentric` on GRS 80 through pyproj; required: 1e-5 m within 1 km; held: 1e-7 m."""
    rng = np.random.default_rng(5)
    frame = LocalFrame(_e8(lat), _e8(lon), 123_456_78)
    degrees = reach_m / 111_000.0
    lats = np.clip(lat + rng.uniform(-degrees, degrees, 60), -90, 90)
    lons = lon + rng.uniform(-degrees, degrees, 60)
    lats8 = np.array([_e8(item) for item in lats])
    lons8 = np.array([_e8((item + 180) % 360 - 180) for item in lons])
    heights = rng.integers(-10_000_00, 900_000_00, 60)
    pipeline = (
        "+proj=pipeline +step +proj=unitconvert +xy_in=deg +xy_out=rad +step +proj=cart +ellps=GRS80 "
        f"+step +proj=topocentric +ellps=GRS80 +lon_0={frame.longitude_e8min / E8MIN_PER_DEG:.17g} "
        f"+lat_0={frame.latitude_e8min / E8MIN_PER_DEG:.17g} +h_0={frame.height_e5m / 1e5}"
    )
    expected = Transformer.from_pipeline(pipeline).transform(
        lons8 / E8MIN_PER_DEG, lats8 / E8MIN_PER_DEG, heights / 1e5
    )
    found = frame.enu_units(lats8, lons8, heights)
    tolerance = 1e-7 if reach_m <= 1000 else 1e-7 + 2e-15 * reach_m
    for mine, theirs in zip(found, expected, strict=True):
        assert np.abs(mine / UNITS_PER_M - theirs).max() < tolerance


@settings(max_examples=200, deadline=None)
@given(
    st.floats(-90, 90), st.floats(-180, 180), st.floats(-100, 9000),
    st.floats(-20_000, 20_000), st.floats(-20_000, 20_000), st.floats(-500, 500),
)  # fmt: skip
def test_there_and_back(lat: float, lon: float, h: float, east: float, north: float, up: float) -> None:
    """Within 2e-5 m: on the way back degrees are rounded to 1e-8 arc-minute (half a unit 0.9e-5 m)."""
    frame = LocalFrame(_e8(lat), _e8(lon), round(h * 1e5))
    lat2, lon2, h2 = frame.geodetic(east, north, up)
    assert h2 is not None
    assert -90 <= lat2 <= 90
    assert -180 <= lon2 < 180
    back = frame.enu_units(np.array([_e8(lat2)]), np.array([_e8(lon2)]), np.array([round(h2 * 1e5)]))
    for mine, wanted in zip(back, (east, north, up), strict=True):
        assert mine[0] / UNITS_PER_M == pytest.approx(wanted, abs=2e-5)


def test_metres_of_an_epoch_do_not_depend_on_its_company() -> None:
    rng = np.random.default_rng(9)
    frame = LocalFrame(_e8(-37.6), _e8(144.9), 4_000_000)
    lats = frame.latitude_e8min + rng.integers(-(10**9), 10**9, 301)
    lons = frame.longitude_e8min + rng.integers(-(10**9), 10**9, 301)
    heights = rng.integers(0, 10**7, 301)
    whole = frame.enu_units(lats, lons, heights)
    for size in (1, 2, 3, 7, 16, 150):
        parts = [
            frame.enu_units(lats[i : i + size], lons[i : i + size], heights[i : i + size]) for i in range(0, 301, size)
        ]
        for axis in range(3):
            assert np.array_equal(whole[axis], np.concatenate([part[axis] for part in parts]))


def test_without_height_only_up_is_missing() -> None:
    frame = LocalFrame(_e8(50), _e8(8))
    east, north, up = frame.enu_units(np.array([_e8(50) + 100]), np.array([_e8(8)]), np.array([MISSING]))
    assert (int(east[0]), int(up[0])) == (0, MISSING)
    assert north[0] / UNITS_PER_M == pytest.approx(100 * 1.8535e-5, rel=1e-3)
    assert frame.geodetic(0.0, 0.0, None) == (pytest.approx(50.0, abs=1e-12), pytest.approx(8.0, abs=1e-12), None)
