"""What a receiver sends, in words, for the links page: sentence types, their names, fields and rates.

Strategy. Titles of the common types stand here; the other names and all field names are pynmea2's, which knows
the types of the standard and several makers'. Its import waits until somebody looks at the page. The bytes go through the product's own framer, so that the page and the
recorder agree on what is a sentence.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Any

from fieldbook.nmea.framing import Damaged, Framer

_NOT_KNOWN = "not known by name"
# titles as in NMEA 0183, where pynmea2's class has none; from memory
_TITLES = {
    "DTM": "Datum reference",
    "GBS": "GNSS satellite fault detection",
    "GGA": "Global positioning system fix data",
    "GLL": "Geographic position, latitude and longitude",
    "GNS": "GNSS fix data",
    "GRS": "GNSS range residuals",
    "GSA": "GNSS DOP and active satellites",
    "GST": "GNSS pseudorange error statistics",
    "GSV": "GNSS satellites in view",
    "RMC": "Recommended minimum specific GNSS data",
    "THS": "True heading and status",
    "VTG": "Course over ground and ground speed",
    "ZDA": "Time and date",
}
_WORDS = re.compile(r"\s+")


@dataclass(frozen=True, slots=True)
class SentenceRow:
    """One sentence type of a link."""

    sentence: str  # GNGGA
    name: str
    count: int
    rate_hz: float | None  # None when nothing was timed
    example: str


def describe(data: bytes, seconds: float) -> list[SentenceRow]:
    """What came on a link, most frequent first.

    Args:
        data: the bytes collected.
        seconds: for how long; 0 or less gives no rates.
    """
    framer = Framer()
    counts: dict[str, int] = {}
    examples: dict[str, str] = {}
    for frame in framer.feed(data):
        if isinstance(frame, Damaged) or not frame.checksum:
            continue
        address = frame.address
        counts[address] = counts.get(address, 0) + 1
        examples.setdefault(address, frame.raw.decode("ascii"))
    return [
        SentenceRow(
            sentence=address,
            name=sentence_name(address),
            count=count,
            rate_hz=count / seconds if seconds > 0 else None,
            example=examples[address],
        )
        for address, count in sorted(counts.items(), key=lambda item: (-item[1], item[0]))
    ]


def sentence_name(address: str) -> str:
    """The human name of a sentence by its address: `GNZDA` is 'Time and date'."""
    if address[:1] != "P" and address[2:] in _TITLES:
        return _TITLES[address[2:]]
    kind = _type_of(address)
    if kind is None:
        return _NOT_KNOWN
    text = (kind.__doc__ or "").strip()
    first = text.splitlines()[0] if text else ""
    return _WORDS.sub(" ", first).strip() or kind.__name__


def field_names(address: str) -> list[str]:
    """The names of the fields of a sentence, in order; empty when the type is not known."""
    kind = _type_of(address)
    return [] if kind is None else [str(field[0]) for field in getattr(kind, "fields", ())]


def _type_of(address: str) -> Any:
    import pynmea2

    if address[:1] == "P":
        return pynmea2.ProprietarySentence.sentence_types.get(address[1:4])
    return pynmea2.TalkerSentence.sentence_types.get(address[2:])
