"""Which signals a position was computed from, as the phase centre sees them: frequencies and their combinations.

    "L1"                      one frequency; L1, L2, L5 are GPS names for G01, G02, G05
    "E05"                     one frequency by its ANTEX code: system letter and number
    "L1/L2"                   phases of both, each for itself (an RTK receiver that does not form a combination):
                              the offset lies between the two, and where is not known
    "L1/L2 ionosphere-free"   f1^2/(f1^2 - f2^2) and -f2^2/(f1^2 - f2^2): 2.5457 and -1.5457 for GPS L1 and L2

Frequencies: interface documents of the systems (GPS IS-GPS-200, Galileo OS SIS ICD, BeiDou ICDs, GLONASS ICD: middle of
the FDMA band), from memory, high.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

NAMES = {"L1": "G01", "L2": "G02", "L5": "G05"}
IONOSPHERE_FREE = "ionosphere-free"
MHZ = {
    "G01": 1575.42, "G02": 1227.60, "G05": 1176.45,
    "R01": 1602.0, "R02": 1246.0, "R03": 1202.025,
    "E01": 1575.42, "E05": 1176.45, "E06": 1278.75, "E07": 1207.14, "E08": 1191.795,
    "C01": 1575.42, "C02": 1561.098, "C05": 1176.45, "C06": 1268.52, "C07": 1207.14, "C08": 1191.795,
    "J01": 1575.42, "J02": 1227.60, "J05": 1176.45, "J06": 1278.75,
    "I05": 1176.45, "I09": 2492.028,
    "S01": 1575.42, "S05": 1176.45,
}  # fmt: skip


@dataclass(frozen=True)
class Combination:
    """Codes with their coefficients. `mixed`: the weights are not known, the coefficients are equal shares."""

    text: str
    codes: tuple[str, ...]
    coefficients: tuple[float, ...]
    mixed: bool = False

    @property
    def amplification(self) -> float:
        """How many times larger than one frequency's the error of the combination is, errors of the two independent."""
        return 1.0 if self.mixed else math.hypot(*self.coefficients)


def combination(text: str) -> Combination:
    """The combination that an `offset_frequency` names.

    Raises:
        ValueError: not a name this module knows; the text says what it takes.
    """
    words = text.split()
    free = len(words) == 2 and words[1].lower() == IONOSPHERE_FREE
    parts = words[0].split("/") if words and (len(words) == 1 or free) else []
    codes = tuple(NAMES.get(part.upper(), part.upper()) for part in parts)
    known = 0 < len(codes) <= 2 and len(set(codes)) == len(codes) and all(code in MHZ for code in codes)
    if not known or (free and len(codes) != 2):
        raise ValueError(
            f'"{text}" names no signals; write "L1", "L2", "L1/L2", "L1/L2 {IONOSPHERE_FREE}", or ANTEX codes such as '
            f'"E05" or "G01/G05 {IONOSPHERE_FREE}"'
        )
    if not free:
        return Combination(text, codes, (1.0 / len(codes),) * len(codes), mixed=len(codes) > 1)
    first, second = (MHZ[code] ** 2 for code in codes)
    if first == second:
        raise ValueError(f'"{text}": two signals of one frequency have no ionosphere-free combination')
    return Combination(text, codes, (first / (first - second), -second / (first - second)))
