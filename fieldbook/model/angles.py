"""Degrees to text and back: whole arcs in integers of the last printed digit, so 59.99999 never prints as 60."""

from __future__ import annotations

from decimal import ROUND_HALF_EVEN, Decimal


def dms_parts(degrees: float, decimals: int) -> tuple[int, int, int, str]:
    """Sign, degrees, minutes and seconds text (with `decimals` digits) of an angle in degrees."""
    scale = Decimal(10) ** decimals
    total = (Decimal(repr(float(abs(degrees)))) * 3600 * scale).quantize(Decimal(1), rounding=ROUND_HALF_EVEN)
    whole = int(total)
    second_units = whole % (60 * int(scale))
    minutes_total = whole // (60 * int(scale))
    seconds = Decimal(second_units) / scale
    width = 2 if decimals == 0 else 3 + decimals
    sign = -1 if degrees < 0 and whole > 0 else 1
    return sign, minutes_total // 60, minutes_total % 60, f"{seconds:0{width}.{decimals}f}"


def latitude_text(degrees: float, decimals: int = 5) -> str:
    """`23°40′12.44601″ S`."""
    sign, deg, minute, second = dms_parts(degrees, decimals)
    return f"{deg:02d}°{minute:02d}′{second}″ {'S' if sign < 0 else 'N'}"


def longitude_text(degrees: float, decimals: int = 5) -> str:
    """`148°53′07.84784″ E`."""
    sign, deg, minute, second = dms_parts(degrees, decimals)
    return f"{deg:03d}°{minute:02d}′{second}″ {'W' if sign < 0 else 'E'}"


def signed_dms_text(degrees: float, decimals: int = 1) -> str:
    """`+1°35′03.6″`, for convergences and differences of bearings."""
    sign, deg, minute, second = dms_parts(degrees, decimals)
    return f"{'-' if sign < 0 else '+'}{deg}°{minute:02d}′{second}″"
