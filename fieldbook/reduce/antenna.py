"""Height readings to the antenna reference point (ARP), and from the reported point to the mark.

In: readings as typed, the antenna's dimensions, what point the receiver reports. Out: the height of the ARP above the
mark with its standard uncertainty, and the offset from the reported point to the mark in east, north, up, in the
receiver's frame along the ellipsoidal normal. What can go wrong: no reading (then the mark has no height), readings
that do not agree (a finding, with the likely slip named).

Sources: slant to vertical, v = sqrt(s^2 - r^2), plane trigonometry; `ARP height = v - slant_mark_above_arp`; mean and
uncertainty of repeated readings and the limits of 3 mm and 5 mm: common practice, no source; rectangular half-width
d/2 for the range d between occasions, u = d/sqrt(12): JCGM 100:2008, 4.3.7.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from decimal import Decimal

from fieldbook.errors import ReductionError
from fieldbook.model.reduction import AntennaHeight, Finding, ReadingReduced
from fieldbook.model.session import METRES_PER_UNIT, Antenna, HeightReading, Setup
from fieldbook.model.sky import Picture
from fieldbook.reduce.phase_centre import PhaseCentre, phase_centre
from fieldbook.reduce.reading_checks import reading_cautions
from fieldbook.reduce.reading_slips import likely_slip

WITHIN_OCCASION_LIMIT_M = 0.003
BETWEEN_OCCASIONS_LIMIT_M = 0.005
ASSUMED_READING_SIGMA_M = 0.0015
OCCASIONS = ("before", "during", "after")


@dataclass
class AntennaReduction:
    """Heights and offsets of one set-up."""

    height: AntennaHeight
    offset_enu_m: tuple[float, float, float | None]  # add to the reported point to get the mark
    phase_centre: PhaseCentre = field(default_factory=PhaseCentre)
    findings: list[Finding] = field(default_factory=list)
    heights_agree: bool = True
    note: str = ""

    @property
    def phase_centre_u_enu_m(self) -> tuple[float, float, float] | None:
        """Standard uncertainty of everything about the phase centre; None: no part of it is known to be missing."""
        lines = self.phase_centre.lines
        if not lines:
            return None
        east, north, up = (math.hypot(*(line.u_enu_m[axis] for line in lines)) for axis in range(3))
        return east, north, up


def arp_height_m(method: str, value_m: float, antenna: Antenna) -> float:
    """Height of the ARP above the mark from one reading in metres, the tape's offset in it.

    slant     to the notch or rim: sqrt(s^2 - slant_radius^2) - slant_mark_above_arp
    vertical  to the ARP
    mount     vertical to the bottom of the mount, and
    rod       fixed length of a rod whose top carries the mount: plus arp_above_mount

    Raises:
        ReductionError: a reading without the antenna's dimension it needs, or a slant not longer than the radius.
    """
    if method == "vertical":
        return value_m
    if method in ("mount", "rod"):
        if antenna.arp_above_mount_m is None:
            raise ReductionError(
                f"A reading to the {'bottom of the mount' if method == 'mount' else 'top of a rod'} cannot be reduced: "
                "arp_above_mount_m is not stated.",
                "State it in [antenna], 0 where the ARP is the bottom of the mount.",
                code="antenna_dimensions_missing",
            )
        return value_m + antenna.arp_above_mount_m
    radius_m, above_m = antenna.slant_radius_m, antenna.slant_mark_above_arp_m
    if radius_m is None or above_m is None:
        raise ReductionError(
            "A slant reading cannot be reduced: slant_radius_m or slant_mark_above_arp_m is not stated.",
            "State both in [antenna], from the antenna's drawing.",
            code="antenna_dimensions_missing",
        )
    if value_m <= radius_m:
        raise ReductionError(
            f"The slant reading {value_m:.4f} m is not longer than the antenna's radius {radius_m:.4f} m.",
            "Strike the reading and read again; check its unit and the radius (not the diameter).",
            code="slant_too_short",
        )
    return math.sqrt(value_m**2 - radius_m**2) - above_m


def reduce_antenna(
    setup: Setup,
    antenna: Antenna,
    readings: Iterable[HeightReading],
    *,
    difference_explained: bool = False,
    pictures: Sequence[Picture] | None = None,
    carrier_phase: bool = True,
) -> AntennaReduction:
    """All readings of a set-up to one ARP height, and the way from the reported point to the mark.

    Args:
        setup: reported point, receiver_height_m, reading_sigma_m.
        antenna: dimensions, phase centre offset, orientation.
        readings: readings that were not struck, any order.
        difference_explained: a recorded decision explains why readings differ; the finding stays, as info.
        pictures, carrier_phase: what the antenna's pattern is applied to, see `phase_centre`.

    Raises:
        ReductionError: a reading that cannot be reduced at all.
    """
    reduced = [_reading(item, setup, antenna) for item in readings]
    height = _mean_height(setup, reduced)
    result = AntennaReduction(height, (0.0, 0.0, 0.0))
    result.findings += _agreement(reduced, antenna, explained=difference_explained)
    result.heights_agree = not any(item.severity == "stop" for item in result.findings)
    result.findings += reading_cautions(setup, antenna, reduced, arp_height_m)
    if height.reading_sigma_assumed and reduced:
        result.findings.append(
            Finding(
                "reading_sigma_assumed",
                "caution",
                "The uncertainty of a height reading is not stated; 1.5 mm is assumed. State setup.reading_sigma_m.",
                {"assumed_m": ASSUMED_READING_SIGMA_M},
            )
        )
    centre = phase_centre(antenna, setup.reported_point, pictures, carrier_phase=carrier_phase)
    result.phase_centre, result.note = centre, centre.note
    height.phase_centre = centre.figures
    _to_mark(result, setup, antenna)
    result.findings += centre.findings
    return result


def _reading(item: HeightReading, setup: Setup, antenna: Antenna) -> ReadingReduced:
    tape_m = item.value_m + (item.tape_offset_m or 0.0)
    arp_m = arp_height_m(item.method, tape_m, antenna)
    sigma_m = item.sigma_m or setup.reading_sigma_m or ASSUMED_READING_SIGMA_M
    if item.method == "slant":
        vertical_m = math.sqrt(tape_m**2 - (antenna.slant_radius_m or 0.0) ** 2)
        sigma_m *= tape_m / vertical_m  # dv/ds = s/v
    return ReadingReduced(
        method=item.method,
        value=format(item.value, "f"),
        unit=item.unit,
        when=item.when,
        value_m=item.value_m,
        arp_m=arp_m,
        sigma_m=sigma_m,
        at=item.at,
        reader=item.reader,
        time=item.time,
        seq=item.seq,
        tape_offset_m=item.tape_offset_m,
    )


def _mean_height(setup: Setup, reduced: list[ReadingReduced]) -> AntennaHeight:
    means = {
        when: sum(item.arp_m for item in reduced if item.when == when) / count
        for when in OCCASIONS
        if (count := sum(item.when == when for item in reduced))
    }
    height_m = u_m = None
    if means:
        height_m = sum(means.values()) / len(means)
        range_m = max(means.values()) - min(means.values())
        u_read_m = max(item.sigma_m for item in reduced)
        u_m = math.sqrt(u_read_m**2 / len(means) + range_m**2 / 12)
    return AntennaHeight(
        height_arp_m=height_m,
        height_u_m=u_m,
        reported_point=setup.reported_point,
        readings=reduced,
        before_m=means.get("before"),
        during_m=means.get("during"),
        after_m=means.get("after"),
        reading_sigma_assumed=setup.reading_sigma_m is None,
    )


def _agreement(reduced: list[ReadingReduced], antenna: Antenna, *, explained: bool) -> list[Finding]:
    findings = []
    for when in OCCASIONS:
        own = [item for item in reduced if item.when == when]
        if len(own) > 1:
            low, high = min(own, key=lambda r: r.arp_m), max(own, key=lambda r: r.arp_m)
            if high.arp_m - low.arp_m > WITHIN_OCCASION_LIMIT_M:
                findings.append(_differ("heights_differ_within", low, high, antenna, f"readings {when}", explained))
    means = [
        (when, sum(r.arp_m for r in own) / len(own), own[0])
        for when in OCCASIONS
        if (own := [r for r in reduced if r.when == when])
    ]
    if len(means) > 1:
        low_mean, high_mean = min(means, key=lambda m: m[1]), max(means, key=lambda m: m[1])
        difference_m = high_mean[1] - low_mean[1]
        if difference_m > BETWEEN_OCCASIONS_LIMIT_M:
            what = f"readings {low_mean[0]} and {high_mean[0]}"
            findings.append(_differ("heights_differ_between", low_mean[2], high_mean[2], antenna, what, explained))
    return findings


def _differ(
    code: str, low: ReadingReduced, high: ReadingReduced, antenna: Antenna, what: str, explained: bool
) -> Finding:
    difference_m = high.arp_m - low.arp_m
    slip = likely_slip(low, high, arp_height_m, antenna)
    text = f"Height {what} differ by {1000 * difference_m:.1f} mm. "
    text += f"Likely slip: {slip}. " if slip else ""
    text += "Explained by a recorded decision." if explained else "Read again and strike the wrong one, or say why."
    return Finding(code, "info" if explained else "stop", text, {"difference_m": difference_m, "slip": slip})


def _to_mark(result: AntennaReduction, setup: Setup, antenna: Antenna) -> None:
    height = result.height
    if setup.reported_point == "mark":
        result.note = "The receiver reports the mark; height readings are check readings and are not applied."
        _check_receiver_height(result, setup, antenna)
        return
    if height.height_arp_m is None:
        result.findings.append(
            Finding(
                "height_reading_missing",
                "stop",
                "No height of antenna was read: the mark has no height. Read it before the tripod moves.",
            )
        )
    down = None if height.height_arp_m is None else -height.height_arp_m
    east, north, up = result.phase_centre.offset_enu_m
    # 0.0 - x: an offset of nothing is 0.0, not -0.0
    result.offset_enu_m = (0.0 - east, 0.0 - north, None if down is None else down - up)


def _check_receiver_height(result: AntennaReduction, setup: Setup, antenna: Antenna) -> None:
    read_m, keyed_m = result.height.height_arp_m, setup.receiver_height_m
    if read_m is None or keyed_m is None:
        return
    if abs(read_m - keyed_m) > WITHIN_OCCASION_LIMIT_M:
        result.heights_agree = False
        # what was keyed in is a reading too: a slant keyed as vertical is the classic one
        keyed = ReadingReduced(
            "vertical", f"{keyed_m:.4f}", "m", "keyed into the receiver", keyed_m, keyed_m, ASSUMED_READING_SIGMA_M
        )
        slip = likely_slip(result.height.readings[0], keyed, arp_height_m, antenna)
        result.findings.append(
            Finding(
                "receiver_height_differs",
                "stop",
                f"The receiver was told {keyed_m:.4f} m, the readings give {read_m:.4f} m "
                f"({1000 * (read_m - keyed_m):+.1f} mm). {f'Likely slip: {slip}. ' if slip else ''}Nothing was applied. "
                "Read again, or correct receiver_height_m.",
                {"receiver_height_m": keyed_m, "read_m": read_m, **({"slip": slip} if slip else {})},
            )
        )


def in_metres(value: Decimal, unit: str) -> float:
    """A length in metres by the exact factor of its unit ("m", "ft", "ftUS")."""
    return float(value * METRES_PER_UNIT[unit])
