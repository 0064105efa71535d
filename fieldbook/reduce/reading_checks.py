"""What one height reading says against itself, before there is a second one to compare it with.

Every finding here is a caution: a reading may be right and unusual. Limits, all common practice, no source: an ARP over
3 m needs a ladder, one under 0.5 m is a pillar or a slip of the unit, a rim more than 0.25 m from the axis is rather a
diameter (large ground planes have 0.19 to 0.24 m).
"""

from __future__ import annotations

import dataclasses
from collections.abc import Sequence
from contextlib import suppress

from fieldbook.errors import ReductionError
from fieldbook.model.reduction import Finding, ReadingReduced
from fieldbook.model.session import METRES_PER_UNIT, Antenna, Setup
from fieldbook.reduce.reading_slips import ArpHeight

HIGHEST_ARP_M = 3.0
LOWEST_ARP_M = 0.5
USUAL_ARP_M = (0.8, 2.6)  # where a unit exchanged for the other must bring it to be named
LARGEST_RADIUS_M = 0.25
ROD_AGREES_M = 0.003


def reading_cautions(
    setup: Setup, antenna: Antenna, reduced: Sequence[ReadingReduced], arp_height: ArpHeight
) -> list[Finding]:
    """Cautions about readings, the rim's radius and a rod's length, each with the figure that would be right.

    Args:
        setup: support and pole length.
        antenna: dimensions.
        reduced: the readings.
        arp_height: (method, metres, antenna) -> ARP height; may raise ReductionError.
    """
    findings = [found for item in reduced if (found := _implausible(item, setup, antenna, arp_height))]
    if any(item.method == "slant" for item in reduced):
        findings += _radius(reduced, antenna, arp_height)
    findings += _rod(setup, reduced)
    return findings


def _implausible(item: ReadingReduced, setup: Setup, antenna: Antenna, arp_height: ArpHeight) -> Finding | None:
    low = item.arp_m < LOWEST_ARP_M and setup.support not in ("pillar", None)
    if not low and item.arp_m <= HIGHEST_ARP_M:
        return None
    size = "low" if low else "high"
    text = f"The reading {item.value} {item.unit} ({item.method}, {item.when}) puts the ARP {item.arp_m:.3f} m above the mark"
    text += f", {size} for a {setup.support}. " if low else ", out of reach. "
    slip = None
    unit = "ft" if item.unit == "m" else "m"
    metres = item.value_m * float(METRES_PER_UNIT[unit] / METRES_PER_UNIT[item.unit])
    with suppress(ReductionError):  # what gives no height in the other unit was not read in it
        other_m = arp_height(item.method, metres + (item.tape_offset_m or 0.0), antenna)
        if USUAL_ARP_M[0] <= other_m <= USUAL_ARP_M[1]:
            slip = unit
            text += f"Read in {unit} it would be {other_m:.4f} m. "
    text += "Look at the tape again."
    return Finding("height_implausible", "caution", text, {"arp_m": item.arp_m, "unit": slip})


def _radius(reduced: Sequence[ReadingReduced], antenna: Antenna, arp_height: ArpHeight) -> list[Finding]:
    radius = antenna.slant_radius_m
    if radius is None or radius <= LARGEST_RADIUS_M:
        return []
    item = next(item for item in reduced if item.method == "slant")
    halved = dataclasses.replace(antenna, slant_radius_m=radius / 2)
    metres = item.value_m + (item.tape_offset_m or 0.0)
    change_m = arp_height("slant", metres, halved) - item.arp_m
    text = (
        f"The rim's radius is stated as {radius:.4f} m; if that is the diameter, the ARP is {1000 * change_m:.1f} mm higher. "
        "Look at the antenna's drawing: the radius runs from the axis to the notch."
    )
    return [Finding("radius_implausible", "caution", text, {"radius_m": radius, "change_m": change_m})]


def _rod(setup: Setup, reduced: Sequence[ReadingReduced]) -> list[Finding]:
    length_m = setup.pole_length_m
    if length_m is None:
        return []
    findings = []
    for item in reduced:
        if item.method == "rod" and abs(item.value_m - length_m) > ROD_AGREES_M:
            text = (
                f"The rod is read as {item.value_m:.4f} m and setup.pole_length_m is {length_m:.4f} m, "
                f"{1000 * (item.value_m - length_m):+.1f} mm apart. Which section was it set to?"
            )
            findings.append(
                Finding("rod_differs", "caution", text, {"read_m": item.value_m, "pole_length_m": length_m})
            )
    return findings
