"""Tables of NMEA 0183 as data: systems, sentence types, quality of mode letters.

Sources: system IDs of GSA and numbering of satellites as in NMEA 0183 version 4.11; mode letters A D E M S N as
in version 2.3, F P R as in version 3 and later. Number ranges beyond the standard's own: common practice, from
memory.
"""

from __future__ import annotations

SYSTEM_OF_TALKER = {
    "GP": "GPS",
    "GL": "GLONASS",
    "GA": "Galileo",
    "GB": "BeiDou",
    "BD": "BeiDou",
    "GQ": "QZSS",
    "QZ": "QZSS",
    "PQ": "QZSS",
    "GI": "NavIC",
}
SYSTEM_OF_ID = {"1": "GPS", "2": "GLONASS", "3": "Galileo", "4": "BeiDou", "5": "QZSS", "6": "NavIC"}

# first and last number, system, what to add to get the number within the system
NUMBER_RANGES = (
    (1, 32, "GPS", 0),
    (33, 64, "SBAS", 87),
    (65, 96, "GLONASS", 0),
    (120, 158, "SBAS", 0),
    (193, 202, "QZSS", 0),
    (301, 336, "Galileo", -300),
    (401, 463, "BeiDou", -400),
)

QUALITY_OF_MODE = {"A": 1, "D": 2, "E": 6, "F": 5, "M": 7, "N": 0, "P": 3, "R": 4, "S": 8}
MODES_BEST_FIRST = "RFPDAEMSN"

WGS84_DATUMS = ("W84", "P90")

# types of the standard that say nothing this program uses
KNOWN_UNUSED = frozenset(
    ["ALM", "APB", "GGK", "GLC", "HDG", "HDT", "MSS", "RMB", "ROT", "RTE", "THS", "TXT", "VTG", "WPL", "XTE"]
)


def best_mode_quality(modes: str) -> int | None:
    """GGA quality of the best letter in a string of mode letters; None when no letter is known."""
    for letter in MODES_BEST_FIRST:
        if letter in modes:
            return QUALITY_OF_MODE[letter]
    return None


def satellite_identity(system: str | None, number: int) -> tuple[str, int]:
    """(system, number) of a satellite: the system its talker or system ID names, else by range of number."""
    if system is not None and system != "GPS":
        return system, number
    for first, last, name, shift in NUMBER_RANGES:
        if first <= number <= last:
            return name, number + shift
    return system or "GPS", number
