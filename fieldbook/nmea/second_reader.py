"""The independent second reader: positions decoded once more through pynmea2, to compare with the epochs.

Strategy. It shares no code with the framer and the field readers: its own line splitting (from a `$` to `*hh`),
pynmea2's parser and checksum, and `decimal` for the numbers, since pynmea2's own properties go through floats
and answer 0.0 for an empty field. Its rounding is decimal's, half to even. A sentence it cannot read is left
out; the comparison then says that a used epoch has no second reading.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator
from decimal import ROUND_HALF_EVEN, Context, Decimal, InvalidOperation, localcontext
from typing import Any, NamedTuple

_LONGEST = 256
_CANDIDATE = re.compile(rb"\$([A-Z]{2}(?:GGA|GNS),[ -#%-)+-~]*\*[0-9A-Fa-f]{2})")
_FOOT_M = Decimal("0.3048")
_QUALITY = {"A": 1, "D": 2, "E": 6, "F": 5, "M": 7, "N": 0, "P": 3, "R": 4, "S": 8}
_BEST_FIRST = "RFPDAEMSN"
_DIGITS = frozenset("+-.0123456789")  # NMEA knows no exponent, no `_` and no `nan`; Decimal does
_MOST_BEFORE_POINT = 9  # more is no length and no angle
_EXACT = Context(prec=2 * _LONGEST)  # no field is longer, so nothing is rounded but where it is meant


class SecondReading(NamedTuple):
    """One GGA or GNS as pynmea2 splits it; angles in 1e-8 arc-minute, lengths in 1e-5 m, None = not given."""

    time_text: str
    latitude_e8min: int | None
    longitude_e8min: int | None
    altitude_e5m: int | None
    separation_e5m: int | None
    quality: int | None
    source: str
    talker: str


def second_readings(received: Iterable[bytes]) -> Iterator[SecondReading]:
    """Every GGA and GNS in the received bytes whose checksum holds, in order.

    Args:
        received: the received bytes of an occupation in pieces of any size.
    """
    import pynmea2

    for text in _candidates(received):
        try:
            message = pynmea2.parse(text, check=True)
        except pynmea2.ParseError:
            continue
        with localcontext(_EXACT):
            reading = _reading(message)
        if reading is not None:
            yield reading


def _candidates(received: Iterable[bytes]) -> Iterator[str]:
    rest = b""
    for piece in received:
        rest += piece
        end = 0
        for match in _CANDIDATE.finditer(rest):
            end = match.end()
            if end - match.start() <= _LONGEST:
                yield "$" + match.group(1).decode("ascii")
        rest = rest[max(end, len(rest) - _LONGEST) :]


def _reading(message: Any) -> SecondReading | None:
    kind = getattr(message, "sentence_type", "")
    data = [str(value) for value in message.data] + [""] * 14
    if kind == "GGA":
        quality = int(data[5]) if data[5].isascii() and data[5].isdigit() else (0 if not data[5] else None)
        altitude, separation = _length(data[8], data[9]), _length(data[10], data[11])
    elif kind == "GNS":
        best = next((letter for letter in _BEST_FIRST if letter in data[5]), None)
        quality = 0 if not data[5] else None if best is None else _QUALITY[best]
        altitude, separation = _length(data[8], "M"), _length(data[9], "M")
    else:
        return None
    return SecondReading(
        time_text=data[0],
        latitude_e8min=_angle(data[1], data[2], "N", "S"),
        longitude_e8min=_angle(data[3], data[4], "E", "W"),
        altitude_e5m=altitude,
        separation_e5m=separation,
        quality=quality,
        source=kind,
        talker=message.talker,
    )


def _number(text: str) -> Decimal | None:
    if not _DIGITS.issuperset(text):
        return None
    try:
        value = Decimal(text)
    except InvalidOperation:
        return None
    return value if value.adjusted() < _MOST_BEFORE_POINT else None


def _scaled(value: Decimal, places: int) -> int:
    return int(value.scaleb(places).to_integral_value(rounding=ROUND_HALF_EVEN))


def _angle(text: str, half: str, positive: str, negative: str) -> int | None:
    value = _number(text)
    if value is None or half not in (positive, negative):
        return None
    degrees = int(value // 100)
    minutes = _scaled(degrees * 60 + (value - 100 * degrees), 8)
    return -minutes if half == negative else minutes


def _length(text: str, unit: str) -> int | None:
    value = _number(text)
    if value is None or unit not in ("M", "F", "f"):
        return None
    # the first reader rounds before it converts feet, so this one does too
    rounded = _scaled(value, 5)
    return rounded if unit == "M" else _scaled(Decimal(rounded) * _FOOT_M, 0)
