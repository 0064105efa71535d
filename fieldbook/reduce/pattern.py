"""What the phase centre variations of an antenna move a mean position by.

A receiver that knows nothing of the pattern takes the variation of each signal for distance. Its least squares solution
then moves by the dx that fits the variations best with the receiver's clock free:

    variation_i = -e_i . dx + c        e_i: unit vector to the satellite; c: clock, of all or of each system

(observed distance = distance to the mean phase centre + variation: ANTEX 1.4, section 3; a pattern of -a cos z is an
offset of a upwards, which is the check). The mean position moves by the mean of the dx of all instants.

What is not known from positions is how the receiver weighs its signals and which clocks it keeps apart. So four solutions
are made (equal weights and sin^2 of the elevation; one clock and one per system); their middle is used and half their
range is carried as rectangular half-width. That the receiver estimates no delay of the troposphere is assumed: with one
the height would move several times as far. Where no satellites were received, an even sky is taken above masks of 5, 10
and 15 degrees, open or with a quarter of it covered: the middle again, and half the range of all of them taken whole as one sigma, for a real
sky may be none of these.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fieldbook.model.calibration import AntennaCalibration
from fieldbook.model.frequencies import Combination
from fieldbook.model.sky import Picture

Vector = NDArray[np.float64]
FEWEST_PICTURES = 3
_MASKS_DEG = (5, 10, 15)
_QUARTERS_DEG = (0, 90, 180, 270)
_WORST_CONDITION = 1e4  # of the normal equations: beyond, the satellites do not fix a place


@dataclass(frozen=True)
class PatternShift:
    """Shift of the reported position in east, north, up (metres), and its standard uncertainty from what is not known."""

    shift_enu_m: tuple[float, float, float]
    u_enu_m: tuple[float, float, float]
    sky: str  # "recorded" or "assumed"
    pictures: int
    directions: float  # mean number of satellites in a picture
    without_values: int  # directions below the calibration's last zenith angle, left out


@dataclass(frozen=True)
class Pattern:
    """Variations of a combination of signals in metres at zenith angles, and at azimuths where the block has them."""

    zenith_deg: Vector
    azimuth_deg: Vector  # empty: no azimuths
    values_m: Vector  # (zeniths,) or (azimuths, zeniths)

    def at(self, zenith_deg: Vector, azimuth_deg: Vector) -> Vector:
        """Variations by linear interpolation; NaN beyond the last zenith angle."""
        last = self.zenith_deg[-1]
        outside = (zenith_deg < self.zenith_deg[0] - 1e-9) | (zenith_deg > last + 1e-9)
        step = self.zenith_deg[1] - self.zenith_deg[0]
        column = np.clip((zenith_deg - self.zenith_deg[0]) / step, 0.0, len(self.zenith_deg) - 1.0)
        left = np.minimum(column.astype(int), len(self.zenith_deg) - 2)
        part = column - left
        if not self.azimuth_deg.size:
            found = self.values_m[left] * (1 - part) + self.values_m[left + 1] * part
        else:
            row = (azimuth_deg % 360.0) / (self.azimuth_deg[1] - self.azimuth_deg[0])
            low = np.minimum(row.astype(int), len(self.azimuth_deg) - 2)
            share = row - low
            rows = [
                self.values_m[low + up, left] * (1 - part) + self.values_m[low + up, left + 1] * part for up in (0, 1)
            ]
            found = rows[0] * (1 - share) + rows[1] * share
        return np.where(outside, np.nan, found)


def pattern_of(calibration: AntennaCalibration, used: Combination, *, azimuths: bool = True) -> Pattern:
    """The pattern of a combination: its variations, combined like the distances.

    Args:
        azimuths: False takes the mean over azimuth (NOAZI) though the block has azimuths.

    Raises:
        KeyError: the calibration lacks a frequency.
    """
    total: Vector | None = None
    azimuth_deg = np.empty(0)
    for code, factor in zip(used.codes, used.coefficients, strict=True):
        found = calibration.frequency(code)
        if found is None:
            raise KeyError(code)
        turned = azimuths and len(found.azimuths_deg) > 1
        part = factor * np.asarray(found.grid_m if turned else found.noazi_m, dtype=np.float64)
        azimuth_deg = np.asarray(found.azimuths_deg if turned else (), dtype=np.float64)
        total = part if total is None else total + part
    assert total is not None  # noqa: S101 - a combination has a code
    return Pattern(np.asarray(calibration.zenith_deg, dtype=np.float64), azimuth_deg, total)


def shift_over_recorded_sky(
    pattern: Pattern, pictures: Sequence[Picture], orientation_deg: float
) -> PatternShift | None:
    """The shift over the sky as received; None where too few satellites were.

    Args:
        pattern: of the signals used.
        pictures: one per minute.
        orientation_deg: azimuth of the antenna's north mark.
    """
    solutions: list[Vector] = []
    made, seen, lost = 0, 0, 0
    for sine_weights, apart in itertools.product((False, True), (False, True)):
        total, made, seen, lost = np.zeros(3), 0, 0, 0
        for picture in pictures:
            elevation = np.asarray([item.elevation_deg for item in picture], dtype=np.float64)
            azimuth = np.asarray([item.azimuth_deg for item in picture], dtype=np.float64)
            values = pattern.at(90.0 - elevation, azimuth - orientation_deg)
            good = np.isfinite(values)
            lost += int((~good).sum())
            systems = [item.system for item, use in zip(picture, good, strict=True) if use]
            found = _solved(elevation[good], azimuth[good], values[good], systems if apart else None, sine_weights)
            if found is not None:
                total += found
                made += 1
                seen += int(good.sum())
        if made < FEWEST_PICTURES:
            return None
        solutions.append(total / made)
    shift, half = _middle(solutions)
    u = half[0] / math.sqrt(3), half[1] / math.sqrt(3), half[2] / math.sqrt(3)
    return PatternShift(shift, u, "recorded", made, seen / made, lost)


def shift_over_assumed_sky(pattern: Pattern, orientation_deg: float) -> PatternShift:
    """The shift over an even sky, where no satellites were received."""
    solutions = []
    count = 0
    for mask_deg, covered in itertools.product(_MASKS_DEG, (None, *_QUARTERS_DEG)):
        places = list(_even_sky(mask_deg, covered))
        elevation, azimuth = (np.asarray(column, dtype=np.float64) for column in zip(*places, strict=True))
        values = pattern.at(90.0 - elevation, azimuth - orientation_deg)
        good = np.isfinite(values)
        for sine_weights in (False, True):
            found = _solved(elevation[good], azimuth[good], values[good], None, sine_weights)
            if found is not None:
                solutions.append(found)
                count = int(good.sum())
    shift, u = _middle(solutions)
    return PatternShift(shift, u, "assumed", len(solutions), count, 0)


def _even_sky(mask_deg: int, covered_from_deg: int | None) -> Iterator[tuple[float, float]]:
    """Directions evenly spread over the sphere above a mask, without one quarter of the horizon up to 60 degrees."""
    low, high = math.sin(math.radians(mask_deg)), 1.0
    rings = 18
    for ring in range(rings):
        elevation = math.degrees(math.asin(low + (high - low) * (ring + 0.5) / rings))
        for azimuth in range(0, 360, 10):
            hidden = covered_from_deg is not None and (azimuth - covered_from_deg) % 360 < 90
            if not (hidden and elevation < 60):
                yield elevation, azimuth + 5.0 * (ring % 2)


def _solved(
    elevation_deg: Vector, azimuth_deg: Vector, values_m: Vector, systems: list[str] | None, sine_weights: bool
) -> Vector | None:
    """dx (east, north, up) of one instant; None where the satellites do not fix it."""
    sine, cosine = np.sin(np.radians(elevation_deg)), np.cos(np.radians(elevation_deg))
    towards = np.column_stack(
        [cosine * np.sin(np.radians(azimuth_deg)), cosine * np.cos(np.radians(azimuth_deg)), sine]
    )
    names = sorted(set(systems)) if systems else [""]
    clocks = (
        np.asarray([[name == own for name in names] for own in systems], float) if systems else np.ones((len(sine), 1))
    )
    if len(sine) < 3 + len(names):
        return None
    design = np.hstack([-towards, clocks])
    root = sine if sine_weights else np.ones_like(sine)
    weighted = design * root[:, None]
    normal = weighted.T @ weighted
    if np.linalg.cond(normal) > _WORST_CONDITION:
        return None
    found: Vector = np.linalg.solve(normal, weighted.T @ (values_m * root))
    return found[:3]


def _middle(solutions: Sequence[Vector]) -> tuple[tuple[float, float, float], tuple[float, float, float]]:
    """Middle of the range per axis, and half the range."""
    stacked = np.vstack(solutions)
    low, high = stacked.min(axis=0), stacked.max(axis=0)
    middle, half = (low + high) / 2, (high - low) / 2
    return (float(middle[0]), float(middle[1]), float(middle[2])), (float(half[0]), float(half[1]), float(half[2]))
