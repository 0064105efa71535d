"""Ellipsoid, local frames and similarity transformations in plain numpy: no PROJ, so that each checks the other.

A small difference between two positions is always formed through geocentric coordinates and then turned into
east, north, up: that is right at the poles and across the 180th meridian, where differences of latitude and
longitude are not. Positions are (latitude, longitude, height) in degrees and metres; geocentric ones are arrays
of shape (3,) or (n, 3) in metres.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fieldbook.reduce.constants import GRS80, MAS_RAD, Ellipsoid

Array = NDArray[np.float64]
Position = tuple[float, float, float]

# Five rounds of Bowring's formula: from 5000 km under the surface to 10^8 m above it the fifth changes nothing.
_ROUNDS = 5
_LEAST_RADIUS_M = 1.0e6


def wrapped_longitude(lon_deg: float) -> float:
    """The longitude in [-180, 180) degrees; one that is there already comes back to the last bit."""
    if -180.0 <= lon_deg < 180.0:
        return lon_deg
    wrapped = math.fmod(lon_deg + 180.0, 360.0)
    if wrapped < 0.0:
        wrapped += 360.0
    # A tiny negative number plus 360 rounds to 360 itself.
    return -180.0 if wrapped >= 360.0 else wrapped - 180.0


def geocentric(lat_deg: ArrayLike, lon_deg: ArrayLike, h_m: ArrayLike, ellipsoid: Ellipsoid = GRS80) -> Array:
    """X, Y, Z in metres, shape (..., 3).

    IOGP Guidance Note 373-7-2, method EPSG:9602, forward formula.
    """
    lat, lon = np.radians(np.asarray(lat_deg, float)), np.radians(np.asarray(lon_deg, float))
    height = np.asarray(h_m, float)
    nu = ellipsoid.a_m / np.sqrt(1.0 - ellipsoid.e2 * np.sin(lat) ** 2)
    across = (nu + height) * np.cos(lat)
    up = (nu * (1.0 - ellipsoid.e2) + height) * np.sin(lat)
    return np.stack(np.broadcast_arrays(across * np.cos(lon), across * np.sin(lon), up), axis=-1)


def geographic_array(xyz_m: ArrayLike, ellipsoid: Ellipsoid = GRS80) -> Array:
    """Latitude, longitude (degrees, in [-180, 180]) and height (metres) of X, Y, Z; shape (..., 3).

    B. R. Bowring, Transformation from spatial to geographical coordinates, Survey Review 23 (1976), pages 323-327
    (also EPSG:9602, reverse), iterated on the reduced latitude with sines and cosines so that the poles need no
    exception; height by Bowring 1985, h = p cos(lat) + Z sin(lat) - a sqrt(1 - e^2 sin^2(lat)), which does not
    divide by cos(lat). Both from memory (high); the tests hold the pair against the forward formula.

    Raises:
        ValueError: a point within 1000 km of the geocentre, where latitude is not unique, or not finite.
    """
    xyz = np.asarray(xyz_m, float)
    if not np.isfinite(xyz).all() or (np.linalg.norm(xyz, axis=-1) < _LEAST_RADIUS_M).any():
        raise ValueError("geocentric coordinates are not finite or lie near the geocentre")
    x, y, z = xyz[..., 0], xyz[..., 1], xyz[..., 2]
    p = np.hypot(x, y)
    # Reduced latitude as an unnormalised pair (sine, cosine): the start is exact on the ellipsoid.
    sine, cosine = z * ellipsoid.a_m, p * ellipsoid.b_m
    lat_sine, lat_cosine = z, p
    for _ in range(_ROUNDS):
        length = np.hypot(sine, cosine)
        lat_sine = z + ellipsoid.second_e2 * ellipsoid.b_m * (sine / length) ** 3
        lat_cosine = p - ellipsoid.e2 * ellipsoid.a_m * (cosine / length) ** 3
        sine, cosine = lat_sine * (1.0 - ellipsoid.flattening), lat_cosine
    lat = np.arctan2(lat_sine, lat_cosine)
    height = p * np.cos(lat) + z * np.sin(lat) - ellipsoid.a_m * np.sqrt(1.0 - ellipsoid.e2 * np.sin(lat) ** 2)
    return np.stack((np.degrees(lat), np.degrees(np.arctan2(y, x)), height), axis=-1)


def geographic(xyz_m: ArrayLike, ellipsoid: Ellipsoid = GRS80) -> Position:
    """Latitude, longitude in [-180, 180) (degrees) and height (metres) of one point of shape (3,)."""
    lat, lon, height = (float(value) for value in geographic_array(xyz_m, ellipsoid))
    return lat, wrapped_longitude(lon), height


def enu_rotation(lat_deg: float, lon_deg: float) -> Array:
    """The 3 x 3 matrix that turns geocentric differences into east, north, up at a point.

    IOGP Guidance Note 373-7-2, method EPSG:9837 (geocentric/topocentric), matrix R.
    """
    lat, lon = math.radians(lat_deg), math.radians(lon_deg)
    sin_lat, cos_lat, sin_lon, cos_lon = math.sin(lat), math.cos(lat), math.sin(lon), math.cos(lon)
    return np.array(
        [
            [-sin_lon, cos_lon, 0.0],
            [-sin_lat * cos_lon, -sin_lat * sin_lon, cos_lat],
            [cos_lat * cos_lon, cos_lat * sin_lon, sin_lat],
        ]
    )


def enu_of_xyz(difference_m: ArrayLike, lat_deg: float, lon_deg: float) -> Array:
    """Geocentric differences of shape (3,) or (n, 3) as east, north, up in metres at a point."""
    return np.asarray(np.asarray(difference_m, float) @ enu_rotation(lat_deg, lon_deg).T, float)


def xyz_of_enu(offset_m: ArrayLike, lat_deg: float, lon_deg: float) -> Array:
    """East, north, up of shape (3,) or (n, 3) as geocentric differences in metres."""
    return np.asarray(np.asarray(offset_m, float) @ enu_rotation(lat_deg, lon_deg), float)


def covariance_to_enu(covariance_xyz_m2: ArrayLike, lat_deg: float, lon_deg: float) -> Array:
    """A 3 x 3 covariance in X, Y, Z turned into east, north, up: R C R' (GUM supplement 2, 6.2)."""
    rotation = enu_rotation(lat_deg, lon_deg)
    return np.asarray(rotation @ np.asarray(covariance_xyz_m2, float) @ rotation.T, float)


def covariance_to_xyz(covariance_enu_m2: ArrayLike, lat_deg: float, lon_deg: float) -> Array:
    """A 3 x 3 covariance in east, north, up turned into X, Y, Z: R' C R."""
    rotation = enu_rotation(lat_deg, lon_deg)
    return np.asarray(rotation.T @ np.asarray(covariance_enu_m2, float) @ rotation, float)


def enu_difference(
    start: Position, end: Position, ellipsoid: Ellipsoid = GRS80, end_ellipsoid: Ellipsoid | None = None
) -> Array:
    """East, north, up in metres from start to end, at start. Right at the poles and the 180th meridian.

    `end_ellipsoid` is for an end in another frame with another ellipsoid.
    """
    difference = geocentric(*end, end_ellipsoid or ellipsoid) - geocentric(*start, ellipsoid)
    return enu_of_xyz(difference, start[0], start[1])


def enu_differences(start: Position, ends: ArrayLike, ellipsoid: Ellipsoid = GRS80) -> Array:
    """East, north, up in metres of many positions, shape (n, 3) of latitude, longitude, height, from start."""
    many = np.asarray(ends, float)
    difference = geocentric(many[..., 0], many[..., 1], many[..., 2], ellipsoid) - geocentric(*start, ellipsoid)
    return enu_of_xyz(difference, start[0], start[1])


def moved_by_enu(start: Position, offset_m: ArrayLike, ellipsoid: Ellipsoid = GRS80) -> Position:
    """The position at an east, north, up offset in metres from start: a straight line, no approximation."""
    xyz = geocentric(*start, ellipsoid) + xyz_of_enu(offset_m, start[0], start[1])
    return geographic(xyz, ellipsoid)


def moved_along_normal(start: Position, up_m: float) -> Position:
    """The position moved along the ellipsoidal normal: the height changes, nothing else (by definition)."""
    return start[0], start[1], start[2] + up_m


def meridian_radius_m(lat_deg: float, ellipsoid: Ellipsoid = GRS80) -> float:
    """M, radius of curvature in the meridian. Guidance Note 373-7-2, section 2 (rho)."""
    sine = math.sin(math.radians(lat_deg))
    return float(ellipsoid.a_m * (1.0 - ellipsoid.e2) / (1.0 - ellipsoid.e2 * sine * sine) ** 1.5)


def prime_vertical_radius_m(lat_deg: float, ellipsoid: Ellipsoid = GRS80) -> float:
    """N, radius of curvature in the prime vertical. Guidance Note 373-7-2, section 2 (nu)."""
    sine = math.sin(math.radians(lat_deg))
    return ellipsoid.a_m / math.sqrt(1.0 - ellipsoid.e2 * sine * sine)


def mean_radius_m(lat_deg: float, ellipsoid: Ellipsoid = GRS80) -> float:
    """R = sqrt(M N), the Gaussian mean radius."""
    return math.sqrt(meridian_radius_m(lat_deg, ellipsoid) * prime_vertical_radius_m(lat_deg, ellipsoid))


def elevation_factor(lat_deg: float, h_m: float, ellipsoid: Ellipsoid = GRS80) -> float:
    """R / (R + h): ellipsoidal distance over ground distance at ellipsoidal height h (common practice)."""
    radius = mean_radius_m(lat_deg, ellipsoid)
    return radius / (radius + h_m)


@dataclass(frozen=True)
class Helmert:
    """A linear similarity transformation, its rates and its reference epoch.

    Translations in metres, rotations in milliarc-seconds, scale in parts per billion, rates per year.
    `convention`: "position vector" (EPSG:1033, 1053; IERS, EUREF) or "coordinate frame" (EPSG:1032, 1056; NGS,
    Geoscience Australia): the same figures with the other sign of the rotations.
    """

    translation_m: Position
    rotation_mas: Position
    scale_ppb: float
    convention: Literal["position vector", "coordinate frame"]
    translation_rate_m: Position = (0.0, 0.0, 0.0)
    rotation_rate_mas: Position = (0.0, 0.0, 0.0)
    scale_rate_ppb: float = 0.0
    reference_epoch: float | None = None

    def parameters_at(self, epoch: float | None) -> tuple[Array, Array, float]:
        """Translation (m), rotation (rad, position vector) and scale (1) at a decimal year.

        Raises:
            ValueError: rates are given but the epoch is not; a Helmert without its epoch is silently wrong.
        """
        translation, rotation = np.array(self.translation_m), np.array(self.rotation_mas)
        scale = self.scale_ppb
        if self.reference_epoch is not None:
            if epoch is None:
                raise ValueError("a time-dependent transformation needs the epoch of the coordinates")
            years = epoch - self.reference_epoch
            translation = translation + years * np.array(self.translation_rate_m)
            rotation = rotation + years * np.array(self.rotation_rate_mas)
            scale = scale + years * self.scale_rate_ppb
        sign = 1.0 if self.convention == "position vector" else -1.0
        return translation, sign * rotation * MAS_RAD, scale * 1e-9


def apply_helmert(xyz_m: ArrayLike, helmert: Helmert, epoch: float | None = None, *, inverse: bool = False) -> Array:
    """X, Y, Z of shape (3,) transformed by X' = T + (1 + s) (X + r x X): small angles, exact inverse.

    Guidance Note 373-7-2, methods EPSG:1033 and 1032, with rates 1053 and 1056.
    """
    translation, rotation, scale = helmert.parameters_at(epoch)
    matrix = (1.0 + scale) * (np.eye(3) + cross_matrix(rotation))
    xyz = np.asarray(xyz_m, float)
    if inverse:
        return np.asarray(np.linalg.solve(matrix, xyz - translation), float)
    return np.asarray(translation + matrix @ xyz, float)


def cross_matrix(vector: ArrayLike) -> Array:
    """The matrix W with W x = vector x x."""
    x, y, z = np.asarray(vector, float)
    return np.array([[0.0, -z, y], [z, 0.0, -x], [-y, x, 0.0]])


def plate_velocity_m(xyz_m: ArrayLike, rates_mas: Position) -> Array:
    """Velocity omega x X of a plate in metres per year; rates in milliarc-seconds per year, position-vector sign."""
    return np.asarray(cross_matrix(np.array(rates_mas) * MAS_RAD) @ np.asarray(xyz_m, float), float)
