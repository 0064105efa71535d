"""Which blunder of the tape would explain two height readings that do not agree, with the figure that is then right.

The slips are those that field manuals warn of: unit exchanged, a decimetre or a foot misread, inches written as hundredths
of a foot, slant booked as vertical or the other way round, height of the notch or the mount taken for that of the ARP,
diameter used as radius, the tape's offset forgotten or taken with the wrong sign, two digits exchanged. A slip is named only
when putting it right brings the two readings together to 3 mm; the smallest remaining difference wins.
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
_OR_OTHER = ", or the other reading is"
WORDS = {
    "slant": "a slant",
    "vertical": "a vertical reading",
    "mount": "a reading to the bottom of the mount",
    "rod": "a rod's length",
}


@dataclasses.dataclass(frozen=True)
class _Tape:
    """One reading with the antenna it was read to; `arp` is None where a correction gives no height."""

    item: ReadingReduced
    antenna: Antenna
    reduce: ArpHeight

    @property
    def offset_m(self) -> float:
        return self.item.tape_offset_m or 0.0

    @property
    def value(self) -> Decimal:
        return Decimal(self.item.value)

    def arp(
        self,
        value: Decimal | None = None,
        *,
        unit: str | None = None,
        method: str | None = None,
        antenna: Antenna | None = None,
        offset_m: float | None = None,
    ) -> float | None:
        """ARP height with one thing changed."""
        typed = self.value if value is None else value
        metres = float(typed * METRES_PER_UNIT[unit or self.item.unit])
        metres += self.offset_m if offset_m is None else offset_m
        try:
            return self.reduce(method or self.item.method, metres, antenna or self.antenna)
        except ReductionError:  # a correction that gives no height is simply no candidate
            return None


def likely_slip(first: ReadingReduced, second: ReadingReduced, arp_height: ArpHeight, antenna: Antenna) -> str | None:
    """The slip that explains the difference to 3 mm, as words with the ARP height it would give, or None."""
    best: tuple[float, str] | None = None
    for wrong, other in ((first, second), (second, first)):
        tape = _Tape(wrong, antenna, arp_height)
        for text, corrected_m in _corrections(tape, other):
            if corrected_m is None:
                continue
            rest_m = abs(corrected_m - other.arp_m)
            if rest_m <= EXPLAINED_TO_M and (best is None or rest_m < best[0] - 1e-9):
                best = (rest_m, f"{text}; {_then(text, corrected_m, wrong)}")
    return best[1] if best else None


def _then(text: str, corrected_m: float, wrong: ReadingReduced) -> str:
    """The ARP height that the slip leads to; two where the other reading may as well be the wrong one."""
    if text.endswith(_OR_OTHER):
        return f"then the ARP is {corrected_m:.4f} m above the mark, else {wrong.arp_m:.4f} m"
    return f"then the ARP is {corrected_m:.4f} m above the mark"


def _corrections(tape: _Tape, other: ReadingReduced) -> Iterator[tuple[str, float | None]]:
    """Each slip that the reading may hold: its name and the ARP height after putting it right."""
    item = tape.item
    shown = f"{item.value} {item.unit} ({item.method}, {item.when})"
    yield from _units(tape, shown)
    for step, name in ((Decimal("0.1"), "0.1"), (Decimal(1), "1")):
        for sign in (-1, 1):
            corrected = tape.value + sign * step
            if corrected > 0:
                yield f"{shown} is misread by {name} {item.unit}, for {corrected}{_OR_OTHER}", tape.arp(corrected)
    yield from _methods(tape, shown)
    yield from _radii(tape, shown)
    yield from _offsets(tape, other, shown)
    for text in _digit_swaps(item.value):
        yield f"{shown} has two digits exchanged ({text})", tape.arp(Decimal(text))


def _units(tape: _Tape, shown: str) -> Iterator[tuple[str, float | None]]:
    unit = tape.item.unit
    other = "ft" if unit == "m" else "m"  # the two feet differ by 3 micrometres over a tripod: never a slip to be seen
    yield f"{shown} is in {other}, not in {unit}", tape.arp(unit=other)
    whole, point, part = tape.item.value.partition(".")
    if unit != "m" and point and part.isdigit() and 0 < int(part) < 12:
        feet = Decimal(whole) + Decimal(int(part)) / 12
        yield f"{shown} is {whole} ft {int(part)} in, not decimal feet", tape.arp(feet)


def _methods(tape: _Tape, shown: str) -> Iterator[tuple[str, float | None]]:
    method, antenna = tape.item.method, tape.antenna
    for other in WORDS:
        # a rod has no reading that could be taken for another one by its figure alone
        if other != method and "rod" not in (other, method):
            yield f"{shown} is {_reading(other)}", tape.arp(method=other)
    above = antenna.slant_mark_above_arp_m
    if above:
        if method == "vertical":
            value = tape.arp()
            yield (
                f"{shown} is vertical to the plane of the notch, not to the ARP",
                None if value is None else value - above,
            )
        if method == "slant":
            value = tape.arp(antenna=dataclasses.replace(antenna, slant_mark_above_arp_m=-above))
            yield f"{shown}: the notch lies below the ARP, not above, or the other way round", value


def _reading(method: str) -> str:
    return "a slant reading" if method == "slant" else WORDS[method]


def _radii(tape: _Tape, shown: str) -> Iterator[tuple[str, float | None]]:
    radius = tape.antenna.slant_radius_m
    if tape.item.method == "slant" and radius is not None:
        halved = dataclasses.replace(tape.antenna, slant_radius_m=radius / 2)
        yield f"{shown}: the diameter was used as radius, {radius / 2:.4f} m is right", tape.arp(antenna=halved)
        doubled = dataclasses.replace(tape.antenna, slant_radius_m=radius * 2)
        yield f"{shown}: the radius was entered as half of it, {radius * 2:.4f} m is right", tape.arp(antenna=doubled)


def _offsets(tape: _Tape, other: ReadingReduced, shown: str) -> Iterator[tuple[str, float | None]]:
    if tape.offset_m:
        wrong_sign = f"{shown}: the tape offset of {1000 * tape.offset_m:+.1f} mm has the wrong sign"
        yield wrong_sign, tape.arp(offset_m=-tape.offset_m)
    elif other.tape_offset_m and tape.item.method != "rod":
        text = f"{shown}: the tape offset of {1000 * other.tape_offset_m:+.1f} mm was forgotten"
        yield text, tape.arp(offset_m=other.tape_offset_m)


def _digit_swaps(text: str) -> Iterator[str]:
    digits = [index for index, letter in enumerate(text) if letter.isdigit()]
    for left, right in itertools.pairwise(digits):
        if text[left] != text[right]:
            letters = list(text)
            letters[left], letters[right] = letters[right], letters[left]
            yield "".join(letters)
