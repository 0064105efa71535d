"""East, north and up in metres about one epoch, from the exact integers received.

Strategy: the rigorous topocentric system (GRS 1980; WGS 84 differs from it by 0.1 mm in b), so that the way there and
back is the same whatever the distance. Differences of angles are formed as integers, longitudes across the
antimeridian the short way. Sine and cosine of a difference up to 300 km are power series: only + - x / and square
roots touch the arrays, which every machine rounds alike, element by element, so an epoch's metres do not depend on
the company it was computed in: the live figure equals the batch figure to the last bit. Farther epochs (a wild fix)
go through `math`, one by one. Results are integers of 1e-8 m: their sums are exact in any order.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fieldbook.model.epoch import E8MIN_PER_DEG
from fieldbook.reduce.columns import MISSING, EpochColumns
from fieldbook.reduce.constants import GRS80

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

UNITS_PER_M = 10**8
_RAD_PER_E8MIN = math.pi / 180.0 / E8MIN_PER_DEG
_TURN = 360 * E8MIN_PER_DEG
_SERIES_RAD = 0.05  # 300 km; the first term left out is below 1e-18


@dataclass(frozen=True)
class LocalFrame:
    """Topocentric system about a received position. Height in 1e-5 m; 0 is used while none is known."""

    latitude_e8min: int
    longitude_e8min: int
    height_e5m: int = 0

    @property
    def cos_latitude(self) -> float:
        """For the step of a longitude on the ground."""
        return max(math.cos(self.latitude_e8min * _RAD_PER_E8MIN), 0.0)

    def enu_units(self, latitude_e8min: Ints, longitude_e8min: Ints, height_e5m: Ints) -> tuple[Ints, Ints, Ints]:
        """East, north, up in 1e-8 m, shape (n,) each; up is MISSING where the height is.

        An epoch without height is placed at the origin's height: 1 m of height moves it by 0.2 micrometres a metre.
        """
        known = height_e5m != MISSING
        height = np.where(known, height_e5m, self.height_e5m) * 1e-5
        wrapped = (longitude_e8min - self.longitude_e8min + _TURN // 2) % _TURN - _TURN // 2
        sin_a, cos_a = _sin_cos((latitude_e8min - self.latitude_e8min).astype(np.float64) * _RAD_PER_E8MIN)
        sin_l, cos_l = _sin_cos(wrapped.astype(np.float64) * _RAD_PER_E8MIN)
        s0, c0, radius0, z0 = self._origin()
        sin_lat, cos_lat = s0 * cos_a + c0 * sin_a, c0 * cos_a - s0 * sin_a
        normal = GRS80.a_m / np.sqrt(1.0 - GRS80.e2 * sin_lat * sin_lat)
        radius = (normal + height) * cos_lat
        along, axial = radius * cos_l - radius0, (normal * (1.0 - GRS80.e2) + height) * sin_lat - z0
        east, north, up = radius * sin_l, c0 * axial - s0 * along, s0 * axial + c0 * along
        return _units(east), _units(north), np.where(known, _units(up), MISSING)

    def of_columns(self, columns: EpochColumns, rows: Ints | slice = slice(None)) -> tuple[Ints, Ints, Ints]:
        """`enu_units` of some rows of the columns, all with a position."""
        return self.enu_units(columns.latitude_e8min[rows], columns.longitude_e8min[rows], columns.height_e5m[rows])

    def geodetic(self, east_m: float, north_m: float, up_m: float | None) -> tuple[float, float, float | None]:
        """Latitude, longitude in degrees (longitude in [-180, 180)) and height in metres; up None gives height None.

        Raises nothing; exact to a nanometre within 1000 km (iterated to the last bit).
        """
        s0, c0, radius0, z0 = self._origin()
        up = 0.0 if up_m is None else up_m
        along, axial = c0 * up - s0 * north_m, s0 * up + c0 * north_m
        radius, z = math.hypot(radius0 + along, east_m), z0 + axial
        longitude = math.degrees(math.atan2(east_m, radius0 + along))
        lat = math.atan2(z, radius * (1.0 - GRS80.e2))
        for _ in range(12):
            sine = math.sin(lat)
            normal = GRS80.a_m / math.sqrt(1.0 - GRS80.e2 * sine * sine)
            better = math.atan2(z + GRS80.e2 * normal * sine, radius)
            lat, moved = better, abs(better - lat)
            if moved < 1e-16:
                break
        sine, cosine = math.sin(lat), math.cos(lat)
        root = math.sqrt(1.0 - GRS80.e2 * sine * sine)
        height = radius * cosine + z * sine - GRS80.a_m * root  # stable at every latitude
        lon = (self.longitude_e8min / E8MIN_PER_DEG + longitude + 180.0) % 360.0 - 180.0
        return math.degrees(lat), lon, None if up_m is None else height

    def _origin(self) -> tuple[float, float, float, float]:
        lat = self.latitude_e8min * _RAD_PER_E8MIN
        s0, c0 = math.sin(lat), math.cos(lat)
        normal, height = GRS80.a_m / math.sqrt(1.0 - GRS80.e2 * s0 * s0), self.height_e5m * 1e-5
        return s0, c0, (normal + height) * c0, (normal * (1.0 - GRS80.e2) + height) * s0


def _units(metres: Floats) -> Ints:
    return np.rint(metres * UNITS_PER_M).astype(np.int64)


def _sin_cos(angle: Floats) -> tuple[Floats, Floats]:
    near = np.where(np.abs(angle) <= _SERIES_RAD, angle, 0.0)
    square = near * near
    sine = near * (1 - square / 6 * (1 - square / 20 * (1 - square / 42 * (1 - square / 72))))
    cosine = 1 - square / 2 * (1 - square / 12 * (1 - square / 30 * (1 - square / 56 * (1 - square / 90))))
    for row in np.flatnonzero(np.abs(angle) > _SERIES_RAD):
        sine[row], cosine[row] = math.sin(angle[row]), math.cos(angle[row])
    return sine, cosine
