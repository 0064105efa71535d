"""Which blunder of the tape would explain two height readings that do not agree.

The slips are those that field manuals warn of: unit exchanged, a decimetre or a foot misread, slant booked as vertical
or the other way round, diameter used as radius, two digits exchanged. A slip is named only when putting it right
brings the two readings together to 3 mm, and the smallest remaining difference wins.
"""

from __future__ import annotations

import dataclasses
import itertools
from collections.abc import Callable, Iterator
from decimal import Decimal

from fieldbook.errors import ReductionError
from fieldbook.model.reduction import ReadingReduced
from fieldbook.model.session import METRES_PER_UNIT, Antenna

EXPLAINED_TO_M = 0.003
ArpHeight = Callable[[str, float, Antenna], float]


def likely_slip(first: ReadingReduced, second: ReadingReduced, arp_height: ArpHeight, antenna: Antenna) -> str | None:
    """The slip that explains the difference to 3 mm, as words, or None."""
    best: tuple[float, str] | None = None
    for wrong, other in ((first, second), (second, first)):
        for text, corrected_m in _corrections(wrong, arp_height, antenna):
            rest_m = abs(corrected_m - other.arp_m)
            if rest_m <= EXPLAINED_TO_M and (best is None or rest_m < best[0] - 1e-9):
                best = (rest_m, text)
    return best[1] if best else None


def _corrections(item: ReadingReduced, arp_height: ArpHeight, antenna: Antenna) -> Iterator[tuple[str, float]]:
    """Each slip that the reading may hold: its name and the ARP height after putting it right."""
    shown = f"{item.value} {item.unit} ({item.method}, {item.when})"

    def arp(value_m: float, method: str = item.method, drawing: Antenna = antenna) -> float | None:
        try:
            return arp_height(method, value_m, drawing)
        except ReductionError:  # a correction that gives no height is simply no candidate
            return None

    value = Decimal(item.value)
    candidates: list[tuple[str, float | None]] = []
    for unit, factor in METRES_PER_UNIT.items():
        if unit != item.unit:
            candidates.append((f"{shown} is in {unit}, not in {item.unit}", arp(float(value * factor))))
    for step, name in ((Decimal("0.1"), "0.1"), (Decimal(1), "1")):
        for sign in (-1, 1):
            corrected = value + sign * step
            factor = METRES_PER_UNIT[item.unit]
            candidates.append((f"{shown} is misread by {name} {item.unit}", arp(float(corrected * factor))))
    if antenna.slant_radius_m is not None and antenna.slant_mark_above_arp_m is not None:
        other = "vertical" if item.method == "slant" else "slant"
        candidates.append((f"{shown} is a {other} reading", arp(item.value_m, other)))
    if item.method == "slant" and antenna.slant_radius_m is not None:
        halved = dataclasses.replace(antenna, slant_radius_m=antenna.slant_radius_m / 2)
        candidates.append((f"{shown}: the diameter was used as radius", arp(item.value_m, drawing=halved)))
        doubled = dataclasses.replace(antenna, slant_radius_m=antenna.slant_radius_m * 2)
        candidates.append((f"{shown}: the radius was entered as half of it", arp(item.value_m, drawing=doubled)))
    for text in _digit_swaps(item.value):
        metres = float(Decimal(text) * METRES_PER_UNIT[item.unit])
        candidates.append((f"{shown} has two digits exchanged ({text})", arp(metres)))
    yield from ((text, value_m) for text, value_m in candidates if value_m is not None)


def _digit_swaps(text: str) -> Iterator[str]:
    digits = [index for index, letter in enumerate(text) if letter.isdigit()]
    for left, right in itertools.pairwise(digits):
        if text[left] != text[right]:
            letters = list(text)
            letters[left], letters[right] = letters[right], letters[left]
            yield "".join(letters)
