"""Strict readers of single fields: exact integers with the number of decimals as received, or None.

Strategy. Python's own conversions accept too much (`nan`, `1e3`, `1_0`) and lose digits; here the digits are
scaled as integers. What goes beyond the unit kept (1e-8 arc-minute, 1e-5 m) is rounded half to even.
Grammar: NMEA 0183 numbers are ASCII digits with at most one point and one sign. A reader answers None for an
empty field and for a wrong one; who calls it knows which.
"""

from __future__ import annotations

import re
from datetime import date
from functools import lru_cache

DAY_MS = 86_400_000
_DECIMAL = re.compile(r"([+-]?)([0-9]{0,9})(?:\.([0-9]*))?")
_POWER = (1, 10, 100, 1_000, 10_000, 100_000, 1_000_000, 10_000_000, 100_000_000)
_ANGLE_PLACES = 8
_FOOT_E4M = 3048  # international foot, 0.3048 m exactly


def scaled(whole: str, fraction: str, places: int) -> int:
    """`whole.fraction` times 10**places, half to even beyond. Both are ASCII digits, one of them not empty."""
    surplus = len(fraction) - places
    if surplus <= 0:
        return int(whole + fraction) * _POWER[-surplus]
    return half_even(int(whole + fraction), int("1" + "0" * surplus))


def half_even(value: int, divisor: int) -> int:
    """value / divisor for value >= 0, half to even."""
    quotient, rest = divmod(value, divisor)
    if 2 * rest > divisor or (2 * rest == divisor and quotient & 1):
        quotient += 1
    return quotient


@lru_cache(maxsize=1024)  # most fields of a receiver repeat from epoch to epoch
def read_decimal(text: str, places: int) -> tuple[int, int] | None:
    """A signed decimal number, scaled.

    Args:
        text: the field; at most nine digits before the point, so that it fits the book's integers.
        places: decimal places of the result.

    Returns:
        (number times 10**places, decimals as received), or None.
    """
    match = _DECIMAL.fullmatch(text)
    if match is None:
        return None
    sign, whole, fraction = match.groups("")
    if not whole and not fraction:
        return None
    value = scaled(whole, fraction, places)
    return (-value if sign == "-" else value), len(fraction)


def feet_to_metres(value: int) -> int:
    """A length in feet, scaled, as metres at the same scale; half to even."""
    metres = half_even(abs(value) * _FOOT_E4M, 10_000)
    return -metres if value < 0 else metres


def _read_angle(text: str, most_digits: int, most_degrees: int) -> tuple[int, int] | None:
    whole, _, fraction = text.partition(".")
    if not text.isascii() or not whole.isdigit() or len(whole) > most_digits:
        return None
    if fraction and not fraction.isdigit():
        return None
    degrees, minutes = divmod(int(whole), 100)
    if minutes >= 60:
        return None
    decimals = len(fraction)
    minutes += 60 * degrees
    if 0 < decimals <= _ANGLE_PLACES:
        value = minutes * 10**_ANGLE_PLACES + int(fraction) * _POWER[_ANGLE_PLACES - decimals]
    else:
        value = scaled(str(minutes), fraction, _ANGLE_PLACES)
    if value > most_degrees * 60 * 10**_ANGLE_PLACES:
        return None
    return value, decimals


def read_latitude(text: str, hemisphere: str) -> tuple[int, int] | None:
    """(latitude in 1e-8 arc-minute, north positive; decimals of the minutes), or None."""
    if hemisphere not in ("N", "S"):
        return None
    found = _read_angle(text, 4, 90)
    return (-found[0], found[1]) if found and hemisphere == "S" else found


def read_longitude(text: str, hemisphere: str) -> tuple[int, int] | None:
    """(longitude in 1e-8 arc-minute, east positive; decimals of the minutes), or None."""
    if hemisphere not in ("E", "W"):
        return None
    found = _read_angle(text, 5, 180)
    return (-found[0], found[1]) if found and hemisphere == "W" else found


def read_time(text: str) -> int | None:
    """Time of day in ms from `hhmmss.sss`; 86 400 000 and above only in the leap second 23:59:60; or None."""
    whole, _, fraction = text.partition(".")
    if len(whole) != 6 or not text.isascii() or not whole.isdigit() or (fraction and not fraction.isdigit()):
        return None
    hours, minutes, seconds = int(whole[:2]), int(whole[2:4]), int(whole[4:])
    if hours > 23 or minutes > 59 or seconds > 60 or (seconds == 60 and (hours, minutes) != (23, 59)):
        return None
    value = (hours * 60 + minutes) * 60_000 + seconds * 1000 + scaled("0", fraction, 3)
    if value >= DAY_MS and seconds < 60:
        return DAY_MS - 1  # 23:59:59.9996 is not the leap second
    return value


def time_text(time_ms: int) -> str:
    """`hh:mm:ss.sss`; the leap second reads 23:59:60."""
    if time_ms >= DAY_MS:
        return f"23:59:{60 + (time_ms - DAY_MS) / 1000:06.3f}"
    seconds, part = divmod(time_ms, 1000)
    minutes, second = divmod(seconds, 60)
    return f"{minutes // 60:02d}:{minutes % 60:02d}:{second:02d}.{part:03d}"


@lru_cache(maxsize=16)
def read_date(text: str) -> date | None:
    """The date of `ddmmyy`; 80 to 99 are 1980 to 1999, 00 to 79 are 2000 to 2079; or None."""
    if len(text) != 6:
        return None
    year = text[4:]
    return make_date(text[:2], text[2:4], ("19" if year >= "80" else "20") + year)


@lru_cache(maxsize=16)
def make_date(day: str, month: str, year: str) -> date | None:
    """The date of three fields (day, month, four-digit year), or None."""
    joined = day + month + year
    if not joined.isascii() or not joined.isdigit() or len(year) != 4:
        return None
    if not 1 <= len(day) <= 2 or not 1 <= len(month) <= 2:
        return None
    try:
        return date(int(year), int(month), int(day))
    except ValueError:
        return None


def read_count(text: str, most_digits: int = 4) -> int | None:
    """A small number without sign, or None."""
    if not text.isascii() or not text.isdigit() or len(text) > most_digits:
        return None
    return int(text)
