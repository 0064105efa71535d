"""Distances between two marks from their coordinates, and their uncertainty from the covariance of the difference.

The geodesic comes from the gateway; the rest is plain geometry:

    chord     straight line between the feet on the ellipsoid, from geocentric coordinates at height 0
    slope     straight line mark to mark, from geocentric coordinates
    ground    geodesic at the mean height: s (1 + h/R), R the radius of curvature in the line's azimuth (Euler's formula);
              the factors printed with a mark use R = sqrt(MN), which at 1000 m of height differs by 0.5 ppm at most

Uncertainty: the axes at both marks are taken as parallel (100 km apart they are so to a degree), then a distance is the
difference along the line, an azimuth the difference across it over the distance (GUM 5.1.2). Each is one component of
the bivariate t of `region`, hence t with nu - 1 degrees of freedom and the scale nu/(nu - 1).
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from fieldbook.reduce.budget import Combined
from fieldbook.reduce.constants import Ellipsoid
from fieldbook.reduce.geodesy import Position, geocentric, meridian_radius_m, prime_vertical_radius_m
from fieldbook.reduce.region import LEAST_DOF, coverage_factor_95

ARCSEC_PER_RAD = math.degrees(1.0) * 3600.0
SHORTEST_M = 0.001  # two marks nearer than this have no direction


@dataclass(frozen=True)
class Distances:
    """Metres; None where a height is not known."""

    chord_m: float
    slope_m: float | None
    ground_m: float | None
    mean_height_m: float | None


@dataclass(frozen=True)
class Halfwidths:
    """95 % half-widths. slope_u_m: one standard uncertainty of the slope distance."""

    distance_m: float
    azimuth_arcsec: float | None
    slope_m: float | None
    slope_u_m: float | None
    height_m: float | None


def distances(
    first: tuple[float, float, float | None],
    second: tuple[float, float, float | None],
    ellipsoid: Ellipsoid,
    geodesic_m: float,
    azimuth_deg: float,
) -> Distances:
    """Chord, slope and ground distance of two places (latitude, longitude in degrees, height in metres or None)."""
    feet = [geocentric(place[0], place[1], 0.0, ellipsoid) for place in (first, second)]
    chord = float(np.linalg.norm(feet[1] - feet[0]))
    if first[2] is None or second[2] is None:
        return Distances(chord, None, None, None)
    ends: tuple[Position, Position] = (first[0], first[1], first[2]), (second[0], second[1], second[2])
    slope = float(np.linalg.norm(geocentric(*ends[1], ellipsoid) - geocentric(*ends[0], ellipsoid)))
    height = (first[2] + second[2]) / 2
    radius = radius_in_azimuth_m((first[0] + second[0]) / 2, azimuth_deg, ellipsoid)
    return Distances(chord, slope, geodesic_m * (1.0 + height / radius), height)


def radius_in_azimuth_m(lat_deg: float, azimuth_deg: float, ellipsoid: Ellipsoid) -> float:
    """Radius of curvature of the normal section in an azimuth: 1/R = cos^2(a)/M + sin^2(a)/N (Euler)."""
    cosine, sine = math.cos(math.radians(azimuth_deg)), math.sin(math.radians(azimuth_deg))
    return 1.0 / (
        cosine**2 / meridian_radius_m(lat_deg, ellipsoid) + sine**2 / prime_vertical_radius_m(lat_deg, ellipsoid)
    )


def halfwidths(
    difference: Combined,
    azimuth_deg: float | None,
    geodesic_m: float,
    slope_m: float | None,
    height_difference_m: float | None,
) -> Halfwidths:
    """95 % half-widths of the line from the combined uncertainty of the difference of its ends (second minus first).

    azimuth_deg None: the marks coincide; the larger axis stands for the distance.
    """
    covariance = np.asarray(difference.cov_en_m2)
    nu = difference.region.dof
    k, scale = coverage_factor_95(None), 1.0
    if nu is not None:
        nu = max(nu, LEAST_DOF)
        k, scale = coverage_factor_95(nu - 1.0), math.sqrt(nu / (nu - 1.0))
    height_95 = difference.vertical95_m
    if azimuth_deg is None:
        major = math.sqrt(float(np.linalg.eigvalsh(covariance)[-1]))
        return Halfwidths(k * scale * major, None, None, None, height_95)
    sine, cosine = math.sin(math.radians(azimuth_deg)), math.cos(math.radians(azimuth_deg))
    along = math.sqrt(max(float(np.array([sine, cosine]) @ covariance @ np.array([sine, cosine])), 0.0))
    across = math.sqrt(max(float(np.array([cosine, -sine]) @ covariance @ np.array([cosine, -sine])), 0.0))
    azimuth_95 = k * scale * across / geodesic_m * ARCSEC_PER_RAD
    slope_u, slope_95 = None, None
    u_up = difference.u_enu_m[2]
    if slope_m and height_difference_m is not None and u_up is not None and height_95 is not None:
        up = height_difference_m / slope_m
        level = math.sqrt(max(1.0 - up * up, 0.0))
        slope_u = math.hypot(level * scale * along, up * u_up)
        slope_95 = math.hypot(level * k * scale * along, up * height_95)
    return Halfwidths(k * scale * along, azimuth_95, slope_95, slope_u, height_95)
