"""From the ARP to the point the receiver's coordinates refer to, and what of it is not known.

    receiver reports    and applies             taken off here                         budget
    phase centre        nothing                 offset, shift by the pattern           calibration, pattern, frequencies
    phase centre        pattern                 offset                                 calibration, frequencies
    ARP                 offset                  shift by the pattern                   calibration, pattern
    ARP                 offset and pattern      nothing                                calibration (the receiver's own)
    mark                anything                nothing                                calibration, pattern unless applied

Without a calibration there is no pattern: then 2 mm and 5 mm stand for it, as long as the receiver does not apply one.
A pattern is of carrier phases; positions from code alone keep the 2 mm and 5 mm. An unknown orientation turns the
horizontal offset and the azimuths of the pattern into uncertainty.

Residuals of a calibration, per frequency and axis: 0.5 mm in plan and 1 mm in height for the antenna's own, 1 mm and
2 mm for the mean of its type; common practice, no source. A combination enlarges them like the errors of two
independent frequencies (ionosphere-free L1/L2: 2.98 times). The base's own antenna is the base's uncertainty.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, field
from datetime import datetime
from typing import Any

from fieldbook.model.calibration import AntennaCalibration, FrozenCalibration
from fieldbook.model.frequencies import Combination, combination
from fieldbook.model.reduction import Finding
from fieldbook.model.session import Antenna
from fieldbook.model.sky import Picture
from fieldbook.reduce.pattern import PatternShift, pattern_of, shift_over_assumed_sky, shift_over_recorded_sky
from fieldbook.settings.antenna_rules import combined_offset

Vector = tuple[float, float, float]

PATTERN_SIGMA_HORIZONTAL_M = 0.002  # phase centre variations not applied; common practice, no source
PATTERN_SIGMA_UP_M = 0.005
OWN_SIGMA_M = (0.0005, 0.001)  # residual of an antenna's own calibration: plan, height
TYPE_SIGMA_M = (0.001, 0.002)  # of the mean of its type
NO_SOURCE = "common practice, no source"
_ALTERNATIVES = ("L1", "L2", "L5", "L1/L2", "L1/L2 ionosphere-free")
_NOT_OWN = ("COPIED", "CONVERTED")  # METH: taken over from another radome, or from relative values


@dataclass(frozen=True)
class CentreLine:
    """One line of the budget, in east, north, up."""

    source: str
    distribution: str
    u_enu_m: Vector
    note: str


@dataclass
class PhaseCentre:
    """`offset_enu_m` leads from the ARP to the reported point; figures are what JSON and certificate print."""

    offset_enu_m: Vector = (0.0, 0.0, 0.0)
    lines: list[CentreLine] = field(default_factory=list)
    findings: list[Finding] = field(default_factory=list)
    note: str = ""
    figures: dict[str, Any] | None = None


def phase_centre(
    antenna: Antenna, reported_point: str, pictures: Sequence[Picture] | None, *, carrier_phase: bool
) -> PhaseCentre:
    """Offset, budget lines, findings and figures.

    Args:
        antenna: typed offset or calibration, orientation, what the receiver applies.
        reported_point: "phase centre", "ARP" or "mark".
        pictures: satellites used, one picture a minute; None or empty: none were received.
        carrier_phase: whether the governing kind of fix uses carrier phases.
    """
    if antenna.calibration is None:
        return _typed(antenna, reported_point)
    return _calibrated(antenna, antenna.calibration, reported_point, pictures or (), carrier_phase=carrier_phase)


def _turned(north: float, east: float, orientation_deg: float | None) -> tuple[float, float]:
    """East and north of an offset in the antenna's axes; (0, 0) where the orientation is not known."""
    if orientation_deg is None:
        return 0.0, 0.0
    angle = math.radians(orientation_deg)
    return east * math.cos(angle) + north * math.sin(angle), north * math.cos(angle) - east * math.sin(angle)


def _unknown_direction(north: float, east: float, orientation_deg: float | None) -> float:
    # direction unknown, uniform on the circle: each axis has variance r^2/2 about zero
    return math.hypot(north, east) / math.sqrt(2) if orientation_deg is None else 0.0


_ORIENTATION_NOTE = "Orientation of the antenna unknown: horizontal phase centre offset carried as uncertainty."


def _typed(antenna: Antenna, reported_point: str) -> PhaseCentre:
    result = PhaseCentre()
    applies = antenna.receiver_applies
    if reported_point != "phase centre" and applies is None:
        return result  # not stated what the receiver did: nothing is known to be missing
    note = f"phase centre variations not applied; 2 mm and 5 mm: {NO_SOURCE}. "
    plan_m, up_m = PATTERN_SIGMA_HORIZONTAL_M, PATTERN_SIGMA_UP_M
    if applies in ("pattern", "offset and pattern"):
        plan_m, up_m = TYPE_SIGMA_M
        note = f"the receiver applies its own pattern; 1 mm and 2 mm left of a type's mean: {NO_SOURCE}. "
    spread_m = 0.0
    if reported_point == "phase centre":
        north, east = antenna.arp_to_phase_centre_north_m or 0.0, antenna.arp_to_phase_centre_east_m or 0.0
        shift_east, shift_north = _turned(north, east, antenna.orientation_deg)
        result.offset_enu_m = (shift_east, shift_north, antenna.arp_to_phase_centre_up_m or 0.0)
        spread_m = _unknown_direction(north, east, antenna.orientation_deg)
        if antenna.orientation_deg is None:
            result.note = _ORIENTATION_NOTE
    plan_m = math.hypot(plan_m, spread_m)
    result.lines.append(
        CentreLine("phase centre of the antenna", "normal", (plan_m, plan_m, up_m), (note + result.note).strip())
    )
    return result


def _calibrated(
    antenna: Antenna,
    kept: FrozenCalibration,
    reported_point: str,
    pictures: Sequence[Picture],
    *,
    carrier_phase: bool,
) -> PhaseCentre:
    calibration, applies = kept.calibration, antenna.receiver_applies or ""
    used = combination(antenna.offset_frequency or "")
    result = PhaseCentre()
    offset = combined_offset(calibration, used)
    spread_m = 0.0
    total: Vector = (0.0, 0.0, 0.0)
    if reported_point == "phase centre":
        total = (*_turned(offset[0], offset[1], antenna.orientation_deg), offset[2])
        spread_m = _unknown_direction(offset[0], offset[1], antenna.orientation_deg)
        if antenna.orientation_deg is None:
            result.note = _ORIENTATION_NOTE
    result.lines.append(_residual(calibration, used, spread_m, result.note))
    shift = None
    if "pattern" not in applies:
        if carrier_phase and reported_point != "mark":
            shift = _shift(calibration, used, antenna.orientation_deg, pictures)
            total = _sum(total, shift.shift_enu_m)
            result.lines.append(_pattern_line(shift, antenna.orientation_deg))
            if shift.sky == "assumed":
                result.findings.append(_assumed())
        else:
            why = "of carrier phases" if reported_point != "mark" else "not applied to a reported mark"
            result.lines.append(_unapplied(why))
    if used.mixed and reported_point == "phase centre":
        result.lines.append(
            _choice(calibration, used, antenna.orientation_deg, pictures, with_pattern=shift is not None)
        )
    result.offset_enu_m = total
    result.figures = _figures(antenna, kept, used, offset, shift)
    result.findings.append(_said(kept, antenna, used, offset, shift, reported_point))
    if calibration.method.upper().startswith(_NOT_OWN):
        result.findings.append(_taken_over(calibration))
    return result


def _sum(one: Vector, other: Vector) -> Vector:
    return one[0] + other[0], one[1] + other[1], one[2] + other[2]


def _residual(calibration: AntennaCalibration, used: Combination, spread_m: float, note: str) -> CentreLine:
    plan_m, up_m = OWN_SIGMA_M if calibration.individual else TYPE_SIGMA_M
    factor = used.amplification
    which = "its own calibration" if calibration.individual else "mean of its type"
    enlarged = f", {factor:.2f} times for {used.text}" if factor != 1.0 else ""
    text = f"{which}: {1000 * plan_m:.1f} mm and {1000 * up_m:.1f} mm left{enlarged}: {NO_SOURCE}. {note}"
    plan_m = math.hypot(plan_m * factor, spread_m)
    return CentreLine("phase centre of the antenna", "normal", (plan_m, plan_m, up_m * factor), text.strip())


def _shift(
    calibration: AntennaCalibration, used: Combination, orientation_deg: float | None, pictures: Sequence[Picture]
) -> PatternShift:
    pattern = pattern_of(calibration, used, azimuths=orientation_deg is not None)
    turned = orientation_deg or 0.0
    shift = shift_over_recorded_sky(pattern, pictures, turned) or shift_over_assumed_sky(pattern, turned)
    if orientation_deg is not None:
        return shift
    return _with_azimuths(shift, calibration, used, pictures)


def _with_azimuths(
    shift: PatternShift, calibration: AntennaCalibration, used: Combination, pictures: Sequence[Picture]
) -> PatternShift:
    """The azimuths of a pattern whose direction is not known, as uncertainty: rms over eight orientations."""
    pattern = pattern_of(calibration, used)
    if not pattern.azimuth_deg.size:
        return shift
    squares = [0.0, 0.0, 0.0]
    for turned in range(0, 360, 45):
        other = shift_over_recorded_sky(pattern, pictures, turned) if shift.sky == "recorded" else None
        other = other or shift_over_assumed_sky(pattern, turned)
        squares = [
            total + (one - middle) ** 2 / 8
            for total, one, middle in zip(squares, other.shift_enu_m, shift.shift_enu_m, strict=True)
        ]
    east, north, up = (math.hypot(u, math.sqrt(square)) for u, square in zip(shift.u_enu_m, squares, strict=True))
    return PatternShift(
        shift.shift_enu_m, (east, north, up), shift.sky, shift.pictures, shift.directions, shift.without_values
    )


def _pattern_line(shift: PatternShift, orientation_deg: float | None) -> CentreLine:
    east, north, up = (1000 * value for value in shift.shift_enu_m)
    where = (
        f"the satellites used, {shift.pictures} minutes of {shift.directions:.0f}"
        if shift.sky == "recorded"
        else "an even sky, as no satellites were received"
    )
    note = (
        f"moves the position by {east:+.1f}, {north:+.1f}, {up:+.1f} mm over {where}, taken off; range over "
        "possible weights and clocks of the receiver; one that estimates no troposphere is assumed"
    )
    if orientation_deg is None:
        note += "; azimuths of the pattern carried as uncertainty, orientation unknown"
    distribution = "rectangular" if shift.sky == "recorded" else "normal"
    return CentreLine("phase centre of the antenna: pattern", distribution, shift.u_enu_m, note)


def _unapplied(why: str) -> CentreLine:
    u = (PATTERN_SIGMA_HORIZONTAL_M, PATTERN_SIGMA_HORIZONTAL_M, PATTERN_SIGMA_UP_M)
    note = f"phase centre variations are {why}; 2 mm and 5 mm: {NO_SOURCE}"
    return CentreLine("phase centre of the antenna: pattern", "normal", u, note)


def _choice(
    calibration: AntennaCalibration,
    used: Combination,
    orientation_deg: float | None,
    pictures: Sequence[Picture],
    *,
    with_pattern: bool,
) -> CentreLine:
    """Anywhere between the two frequencies: half their difference as rectangular half-width (GUM 4.3.7)."""
    ends: list[Vector] = []
    for code in used.codes:
        alone = combination(code)
        north, east, up = combined_offset(calibration, alone)
        end: Vector = (*_turned(north, east, orientation_deg), up)
        if with_pattern:
            end = _sum(end, _shift(calibration, alone, orientation_deg, pictures).shift_enu_m)
        ends.append(end)
    east, north, up = (abs(one - other) / 2 / math.sqrt(3) for one, other in zip(*ends, strict=True))
    note = f"between {used.codes[0]} and {used.codes[1]}, weights not known: rectangular over the difference"
    return CentreLine("phase centre of the antenna: choice of frequency", "rectangular", (east, north, up), note)


def _figures(
    antenna: Antenna, kept: FrozenCalibration, used: Combination, offset: Vector, shift: PatternShift | None
) -> dict[str, Any]:
    calibration = kept.calibration
    return {
        "file": kept.file,
        "file_sha256": kept.sha256,
        "type": calibration.model,
        "serial": calibration.serial or None,
        "individual": calibration.individual,
        "method": calibration.method or None,
        "date": calibration.date or None,
        "frequency": used.text,
        "receiver_applies": antenna.receiver_applies,
        "offset_neu_m": list(offset),
        "alternatives_neu_m": alternatives(calibration),
        "pattern": None
        if shift is None
        else {
            "shift_enu_m": list(shift.shift_enu_m),
            "u_enu_m": list(shift.u_enu_m),
            "sky": shift.sky,
            "pictures": shift.pictures,
            "satellites": shift.directions,
            "without_values": shift.without_values,
        },
    }


def alternatives(calibration: AntennaCalibration) -> dict[str, list[float]]:
    """Offset (north, east, up, metres) of every usual choice that the calibration can serve."""
    found: dict[str, list[float]] = {}
    for text in _ALTERNATIVES:
        choice = combination(text)
        if all(calibration.frequency(code) is not None for code in choice.codes):
            found[text] = list(combined_offset(calibration, choice))
    return found


def _said(
    kept: FrozenCalibration,
    antenna: Antenna,
    used: Combination,
    offset: Vector,
    shift: PatternShift | None,
    reported_point: str,
) -> Finding:
    calibration = kept.calibration
    whose = f"of this antenna, serial {calibration.serial}" if calibration.individual else "mean of the type"
    if not calibration.individual and antenna.serial:
        whose += f"; none of serial {antenna.serial} in the file"
    text = f"Calibration of {calibration.model} ({whose}) from {kept.file}. "
    if reported_point == "phase centre":
        others = [
            f"{name} {1000 * (values[2] - offset[2]):+.1f} mm"
            for name, values in alternatives(calibration).items()
            if name != used.text and abs(values[2] - offset[2]) >= 5e-5
        ]
        text += f"Offset for {used.text}: up {1000 * offset[2]:.1f} mm"
        text += f" (another choice: {', '.join(others)}). " if others else ". "
    else:
        text += "No offset taken off: the receiver applied it. "
    if shift is not None:
        east, north, up = (1000 * value for value in shift.shift_enu_m)
        text += f"Pattern over the {shift.sky} sky: {east:+.1f}, {north:+.1f}, {up:+.1f} mm east, north, up taken off."
    elif "pattern" in (antenna.receiver_applies or ""):
        text += "No pattern taken off: the receiver applied it."
    else:
        text += "Pattern not taken off; carried as uncertainty."
    return Finding("antenna_calibration", "info", text.strip())


def _assumed() -> Finding:
    return Finding(
        "pattern_sky_assumed",
        "caution",
        "The receiver sent too few GSV sentences to tell where its satellites stood; the pattern of the antenna was taken "
        "over an even sky and its uncertainty is larger. Let it send GSV and GSA.",
    )


def _taken_over(calibration: AntennaCalibration) -> Finding:
    return Finding(
        "calibration_taken_over",
        "caution",
        f"The calibration of {calibration.model} was not measured: its method reads {calibration.method}.",
        {"method": calibration.method},
    )


def outside_validity(kept: FrozenCalibration | None, observed: datetime) -> list[Finding]:
    """A stop, where the block says it does not hold at the time of observation (UTC)."""
    if kept is None:
        return []
    since, until = kept.calibration.valid_from, kept.calibration.valid_until
    when = observed.strftime("%Y-%m-%dT%H:%M:%S")
    if (since is None or since <= when) and (until is None or when <= until):
        return []
    text = (
        f"The calibration of {kept.calibration.model} holds from {since or 'ever'} until {until or 'further notice'}, the "
        f"occupation was on {when[:10]}. Take the block of that day (antenna.antex_entry)."
    )
    return [Finding("calibration_not_valid", "stop", text, {"valid_from": since, "valid_until": until})]
