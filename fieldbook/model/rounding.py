"""Rounding, the last step: value and uncertainty together (GUM 7.2.6: about two significant digits of U)."""

from __future__ import annotations

import math
from decimal import ROUND_HALF_EVEN, Decimal


def decimals_for(uncertainty: float | None, *, least: int = 0, most: int = 5) -> int:
    """Decimals at which two significant digits of an uncertainty stand (0.0123 -> 3, 2.4 -> 1).

    None or a useless uncertainty gives `least`.
    """
    if uncertainty is None or not math.isfinite(uncertainty) or uncertainty <= 0:
        return least
    first_digit = math.floor(math.log10(uncertainty))
    return max(least, min(most, 1 - first_digit))


def rounded_up(uncertainty: float, decimals: int) -> str:
    """An uncertainty, rounded up at the given decimals: a stated 95 % never shrinks by printing."""
    step = Decimal(1).scaleb(-decimals)
    exact = Decimal(repr(float(uncertainty)))
    near = exact.quantize(step, rounding=ROUND_HALF_EVEN)
    if near < exact and (exact - near) > step * Decimal("0.05"):
        near += step
    return format(near, "f")


def rounded(value: float, decimals: int) -> str:
    """A value at the given decimals, half to even on its shortest decimal form; never '-0.0'."""
    step = Decimal(1).scaleb(-decimals)
    near = Decimal(repr(float(value))).quantize(step, rounding=ROUND_HALF_EVEN)
    return format(abs(near) if near == 0 else near, "f")
