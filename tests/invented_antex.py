"""An invented ANTEX 1.4 file: invented antennas, invented figures. Columns as the format says, millimetres."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

Variation = Callable[[float, float], float]  # (zenith, azimuth) in degrees -> mm


def labelled(text: str, label: str) -> str:
    return f"{text:60.60}{label}"


@dataclass
class Frequency:
    code: str
    neu_mm: tuple[float, float, float]
    variation: Variation = lambda zenith, azimuth: 0.0


@dataclass
class Block:
    """One antenna; `dazi` 0 writes NOAZI only."""

    antenna: str
    radome: str
    frequencies: Sequence[Frequency]
    serial: str = ""
    dazi: float = 0.0
    zenith: tuple[float, float, float] = (0.0, 90.0, 5.0)
    method: str = "ROBOT"
    valid: tuple[str, str] = ("", "")
    satellite: str = ""
    comments: Sequence[str] = field(default_factory=list)

    def lines(self) -> list[str]:
        first, last, step = self.zenith
        zeniths = [first + index * step for index in range(round((last - first) / step) + 1)]
        kind = f"{self.antenna:16}{self.radome:4}{self.serial:20}{self.satellite:20}"
        rows = [labelled("", "START OF ANTENNA"), labelled(kind, "TYPE / SERIAL NO")]
        rows.append(
            labelled(f"{self.method:20}{'Hollow Oak Lab':20}{3:6d}    {'12-FEB-26':10}", "METH / BY / # / DATE")
        )
        rows.append(labelled(f"  {self.dazi:6.1f}", "DAZI"))
        rows.append(labelled(f"  {first:6.1f}{last:6.1f}{step:6.1f}", "ZEN1 / ZEN2 / DZEN"))
        rows.append(labelled(f"{len(self.frequencies):6d}", "# OF FREQUENCIES"))
        for label, text in zip(("VALID FROM", "VALID UNTIL"), self.valid, strict=True):
            if text:
                rows.append(labelled(text, label))
        rows += [labelled(text, "COMMENT") for text in self.comments]
        for one in self.frequencies:
            rows.append(labelled(f"   {one.code}", "START OF FREQUENCY"))
            rows.append(labelled("".join(f"{value:10.2f}" for value in one.neu_mm), "NORTH / EAST / UP"))
            azimuths = [index * self.dazi for index in range(round(360 / self.dazi) + 1)] if self.dazi else []
            means = [
                sum(one.variation(z, a) for a in azimuths[:-1]) / len(azimuths[:-1])
                if azimuths
                else one.variation(z, 0)
                for z in zeniths
            ]
            rows.append("   NOAZI" + "".join(f"{value:8.2f}" for value in means))
            rows += [
                f"{azimuth:8.1f}" + "".join(f"{one.variation(z, azimuth):8.2f}" for z in zeniths)
                for azimuth in azimuths
            ]
            rows.append(labelled(f"   {one.code}", "END OF FREQUENCY"))
        return [*rows, labelled("", "END OF ANTENNA")]


def antex(blocks: Sequence[Block], *, kind: str = "A", version: str = "1.4", reference: str = "") -> str:
    rows = [
        labelled(f"{version:>8}            M", "ANTEX VERSION / SYST"),
        labelled(f"{kind:20}{reference:20}", "PCV TYPE / REFANT"),
        labelled("all of this is invented", "COMMENT"),
        labelled("", "END OF HEADER"),
    ]
    return "\n".join([*rows, *(line for block in blocks for line in block.lines())]) + "\n"


def dish(depth_mm: float, north_mm: float = 0.0) -> Variation:
    """A pattern that is an offset in disguise: -depth cos z upwards, -north sin z cos a northwards."""

    def variation(zenith: float, azimuth: float) -> float:
        z, a = math.radians(zenith), math.radians(azimuth)
        return -depth_mm * math.cos(z) - north_mm * math.sin(z) * math.cos(a)

    return variation


def wavy(zenith: float, azimuth: float) -> float:
    """A pattern that is no offset: zero at the zenith, some millimetres low down, with a wave round the horizon."""
    z, a = math.radians(zenith), math.radians(azimuth)
    return 6.0 * math.sin(z) ** 2 - 2.5 * math.sin(2 * z) + 1.2 * math.sin(z) ** 3 * math.cos(a - 0.6)


L1 = Frequency("G01", (0.5, -0.3, 87.3), wavy)
L2 = Frequency("G02", (0.2, 0.4, 92.1), lambda z, a: 0.6 * wavy(z, a + 40))
TYPE_MEAN = Block("DEMO-A1", "NONE", (L1, L2), dazi=30.0)
OWN = Block("DEMO-A1", "NONE", (Frequency("G01", (0.9, -0.1, 88.4), wavy), L2), serial="0001")
WITH_DOME = Block("DEMO-A1", "DOME", (L1, L2))
OTHER = Block("DEMO-B2/7", "NONE", (Frequency("G01", (1.0, 2.0, 60.0)),), comments=["invented too"])
SATELLITE = Block(
    "INVENTED ORBITER", "", (Frequency("G01", (10.0, 0.0, 900.0)),), serial="G77", satellite="G999      2027-001A"
)
FILE = antex([SATELLITE, TYPE_MEAN, OWN, WITH_DOME, OTHER])
