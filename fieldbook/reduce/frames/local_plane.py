"""A transverse Mercator plane of our own about a place: for local grids, on any ellipsoid, no datum in it."""

from __future__ import annotations

import math
from functools import lru_cache

from pyproj import Proj

from fieldbook.errors import ReductionError
from fieldbook.reduce.constants import Ellipsoid


def on_local_plane(
    ellipsoid: Ellipsoid, lat0_deg: float, lon0_deg: float, scale0: float, lat_deg: float, lon_deg: float
) -> tuple[float, float, float, float]:
    """x east and y north in metres about (lat0, lon0), convergence in degrees (azimuth = bearing + it), scale factor.

    Raises:
        ReductionError: too far from the origin for a finite result.
    """
    plane = _plane(ellipsoid, lat0_deg, lon0_deg, scale0)
    x, y = plane(lon_deg, lat_deg)
    if not (math.isfinite(x) and math.isfinite(y)):
        raise ReductionError(
            f"({lat_deg:.4f}, {lon_deg:.4f}) cannot be put on a local plane about ({lat0_deg:.4f}, {lon0_deg:.4f}).",
            "A local grid belongs to its own neighbourhood.",
            code="local_grid_far",
        )
    factors = plane.get_factors(lon_deg, lat_deg)
    return float(x), float(y), float(factors.meridian_convergence), float(factors.meridional_scale)


@lru_cache(maxsize=32)
def _plane(ellipsoid: Ellipsoid, lat0_deg: float, lon0_deg: float, scale0: float) -> Proj:
    return Proj(
        proj="tmerc",
        lat_0=lat0_deg,
        lon_0=lon0_deg,
        k_0=scale0,
        x_0=0.0,
        y_0=0.0,
        a=ellipsoid.a_m,
        rf=ellipsoid.inverse_flattening,
    )
