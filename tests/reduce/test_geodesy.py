"""Small properties of the geodesy module: wrapping, offsets across seams, moves along the normal."""

from __future__ import annotations

import math

import numpy as np
import pytest

from fieldbook.reduce.constants import WGS84
from fieldbook.reduce.geodesy import (
    enu_difference,
    enu_differences,
    enu_rotation,
    geocentric,
    geographic,
    geographic_array,
    moved_along_normal,
    moved_by_enu,
    wrapped_longitude,
    xyz_of_enu,
)


@pytest.mark.parametrize(
    ("given", "wanted"),
    [
        (180.0, -180.0),
        (-180.0, -180.0),
        (190.0, -170.0),
        (-190.0, 170.0),
        (540.0, -180.0),
        (359.9995, -0.0005),
        (0.0, 0.0),
    ],
)
def test_longitude_is_wrapped(given: float, wanted: float) -> None:
    assert wrapped_longitude(given) == pytest.approx(wanted, abs=1e-12)


def test_tiny_step_below_the_seam_stays_inside() -> None:
    assert -180.0 <= wrapped_longitude(-180.0 - 1e-14) < 180.0


@pytest.mark.parametrize(
    "place", [(-23.67, 133.885, 600.0), (89.99999, 12.0, 5.0), (-41.0, 179.9999999, 10.0), (0.0, -180.0, 0.0)]
)
def test_offset_and_difference_undo_each_other(place: tuple[float, float, float]) -> None:
    """To 0.01 micrometre, at the pole and over the 180th meridian too."""
    for offset in ([3.0, -4.0, 2.0], [1200.0, 900.0, -50.0], [0.0, 0.0, 0.0]):
        there = moved_by_enu(place, offset)
        assert enu_difference(place, there) == pytest.approx(offset, abs=1e-8)


def test_many_differences_equal_single_ones() -> None:
    start = (50.1, 8.7, 150.0)
    ends = [(50.1001, 8.7002, 151.0), (50.0999, 8.6998, 149.0)]
    many = enu_differences(start, ends)
    assert many.shape == (2, 3)
    for row, end in zip(many, ends, strict=True):
        assert row == pytest.approx(enu_difference(start, end), abs=1e-12)


def test_normal_changes_the_height_only() -> None:
    place = (-23.67, 133.885, 600.0)
    lower = moved_along_normal(place, -1.5)
    assert lower == (-23.67, 133.885, 598.5)
    assert enu_difference(place, lower) == pytest.approx([0.0, 0.0, -1.5], abs=1e-9)


def test_rotation_is_orthogonal_and_points_up() -> None:
    rotation = enu_rotation(-23.67, 133.885)
    assert rotation @ rotation.T == pytest.approx(np.eye(3), abs=1e-15)
    up = xyz_of_enu([0.0, 0.0, 1.0], -23.67, 133.885)
    step = geocentric(-23.67, 133.885, 601.0) - geocentric(-23.67, 133.885, 600.0)
    assert up == pytest.approx(step, abs=1e-8)


def test_difference_between_two_ellipsoids() -> None:
    """Same latitude, longitude and height on WGS 84 and GRS 1980: 0.1 mm apart along the axis, as b differs."""
    place = (60.0, 10.0, 0.0)
    difference = enu_difference(place, place, end_ellipsoid=WGS84)
    assert 0.05e-3 < abs(difference[2]) < 0.11e-3


def test_no_latitude_at_the_geocentre() -> None:
    for point in ([0.0, 0.0, 0.0], [math.nan, 0.0, 6378137.0]):
        with pytest.raises(ValueError, match="geocentr"):
            geographic(point)


def test_arrays_keep_their_shape() -> None:
    xyz = geocentric(np.array([10.0, 20.0]), np.array([30.0, -40.0]), np.array([1.0, 2.0]))
    assert xyz.shape == (2, 3)
    assert geographic_array(xyz)[:, 2] == pytest.approx([1.0, 2.0], abs=1e-8)
