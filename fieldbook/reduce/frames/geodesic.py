"""The geodesic between two places: PROJ's, which is C. F. F. Karney's and right for any two points of the ellipsoid.

Karney, Algorithms for geodesics, Journal of Geodesy 87 (2013) 43-55, doi 10.1007/s00190-012-0578-z.
"""

from __future__ import annotations

from functools import lru_cache

from pyproj import Geod

from fieldbook.reduce.constants import Ellipsoid


def geodesic(
    ellipsoid: Ellipsoid, first: tuple[float, float], second: tuple[float, float]
) -> tuple[float, float, float]:
    """Length in metres, azimuth at the first place and azimuth at the second towards the first, degrees in [0, 360).

    Places are (latitude, longitude) in degrees. The azimuths of two equal places mean nothing.
    """
    forward, back, length = _of(ellipsoid).inv(first[1], first[0], second[1], second[0])
    return float(length), float(forward) % 360.0, float(back) % 360.0


@lru_cache(maxsize=8)
def _of(ellipsoid: Ellipsoid) -> Geod:
    return Geod(a=ellipsoid.a_m, rf=ellipsoid.inverse_flattening)
