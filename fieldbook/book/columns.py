"""Columns of integers, small and exact: differences of the best order, as few bytes as they need, in byte planes.

A receiver's columns are constant, regular (a time every second) or noisy in a few of their many digits. Per column:

1. None is kept as a mask of one byte a value; what follows holds the others.
2. Differences of order 0, 1 or 2, whichever packs smallest on a sample; a regular time has nothing left in order 1.
3. (difference - base) / scale: the greatest common step is taken out (a position with 7 decimals moves in steps of
   ten units), the base puts the median in the middle of a byte, so that usual values share their upper bytes.
4. As many bytes as the largest needs, none for a constant; all lowest bytes first, then the next (planes), which a
   general compressor then packs close to what their spread allows.

The description of a column is a list of integers, `[nones, order, width, base, scale, seed...]`; the bodies stand behind
one another. Nothing here trusts what it reads: every size is checked against the number of values asked for.
"""

from __future__ import annotations

import math
import sys
import zlib
from array import array
from collections.abc import Sequence
from itertools import accumulate
from operator import sub

Column = Sequence[int | None]
Head = list[int]

NO_NONE, SOME_NONE, ALL_NONE = 0, 1, 2
MOST_ORDER = 2
SAMPLE = 600  # values on which the order is chosen
MOST_BITS = 63  # of a value's size: what an INTEGER of SQLite holds
_TYPES = {1: "B", 2: "H", 3: "I", 4: "I", 5: "Q", 6: "Q", 7: "Q", 8: "Q"}
_HEAD_LIMIT = 2**80  # larger numbers in a head make no values of 64 bits


def encode_column(values: Column) -> tuple[Head, bytes]:
    """A column's description and its bytes.

    Raises:
        ValueError: a value does not fit in 64 bits.
    """
    if None not in values:
        return _encode(values, NO_NONE, b"")  # type: ignore[arg-type]
    present = [value for value in values if value is not None]
    if not present:
        return [ALL_NONE, 0, 0, 0, 1], b""
    return _encode(present, SOME_NONE, bytes(value is None for value in values))


def _encode(values: Sequence[int], nones: int, mask: bytes) -> tuple[Head, bytes]:
    if not values:
        return [nones, 0, 0, 0, 1], mask
    low, high = min(values), max(values)
    if low < -(2**MOST_BITS) or high >= 2**MOST_BITS:
        raise ValueError("a value does not fit in 64 bits")
    if low == high:
        return [nones, 0, 0, low, 1], mask
    for order in (_best_order(values[:SAMPLE]), 0):
        found = _planes(values, order)
        if found is not None:
            width, base, scale, body = found
            return [nones, order, width, base, scale, *_seeds(values, order)], mask + body
    raise ValueError("a value does not fit in 64 bits")


def _best_order(sample: Sequence[int]) -> int:
    costs = []
    for order in range(min(MOST_ORDER + 1, len(sample))):
        found = _planes(sample, order)
        if found is None:
            break
        costs.append(len(zlib.compress(found[3], 1)))
        if found[0] == 0:
            break  # nothing left: no higher order is better
    return costs.index(min(costs))


def _differences(values: Sequence[int], order: int) -> Sequence[int]:
    for _ in range(order):
        values = list(map(sub, values[1:], values))
    return values


def _seeds(values: Sequence[int], order: int) -> list[int]:
    return [_differences(values[: level + 1], level)[0] for level in range(order)]


def _planes(values: Sequence[int], order: int) -> tuple[int, int, int, bytes] | None:
    """(width, base, scale, planes) of the differences; None if they need more than 8 bytes."""
    left = _differences(values, order)
    first = left[0]
    scale = math.gcd(*map(sub, left, [first] * len(left)))
    if scale == 0:
        return 0, first, 1, b""
    low, high = min(left), max(left)
    base = low
    if (high - low) // scale >= 256:
        middle = sorted(left[:SAMPLE])[len(left[:SAMPLE]) // 2] - 128 * scale
        below = max(0, -((low - middle) // (256 * scale)))
        base = middle - 256 * scale * below
        if (high - base) // scale >= 2**64:
            base = low
    largest = (high - base) // scale
    width = (largest.bit_length() + 7) // 8
    if width > 8:
        return None
    return width, base, scale, _split([(value - base) // scale for value in left], width)


def _split(values: list[int], width: int) -> bytes:
    if width == 1:
        return bytes(values)
    code = _TYPES[width]
    whole = array(code, values)
    if sys.byteorder == "big":
        whole.byteswap()
    data = whole.tobytes()
    return b"".join(data[plane :: whole.itemsize] for plane in range(width))


def _joined(body: bytes, count: int, width: int) -> Sequence[int]:
    if width == 1:
        return body
    whole = array(_TYPES[width])
    data = bytearray(count * whole.itemsize)
    for plane in range(width):
        data[plane :: whole.itemsize] = body[plane * count : (plane + 1) * count]
    whole.frombytes(data)
    if sys.byteorder == "big":
        whole.byteswap()
    return whole


def decode_column(head: object, body: memoryview, count: int) -> tuple[Column, int]:
    """`count` values of a column, and how many bytes of the body they took.

    Raises:
        ValueError: the description makes no sense, the body is too short, or a value does not fit in 64 bits.
    """
    nones, order, width, base, scale, seeds = _checked(head)
    mask = b""
    if nones == ALL_NONE:
        return [None] * count, 0
    if nones == SOME_NONE:
        mask = bytes(body[:count])
        if len(mask) != count or mask.translate(None, b"\0\1"):
            raise ValueError("a mask of a column is damaged")
    present = count - mask.count(1)
    if order and order >= present:
        raise ValueError("a column has more differences than values")
    stored = max(0, present - order)
    end = len(mask) + width * stored
    if end > len(body):
        raise ValueError("a column is cut off")
    values = _values(bytes(body[len(mask) : end]), stored, (width, base, scale), seeds)
    if not mask:
        return values, end
    each = iter(values)
    return [None if none else next(each) for none in mask], end


def _checked(head: object) -> tuple[int, int, int, int, int, list[int]]:
    if not isinstance(head, list) or len(head) < 5 or not all(type(number) is int for number in head):
        raise ValueError("a column has no description")
    nones, order, width, base, scale, *seeds = head
    if not (nones in (NO_NONE, SOME_NONE, ALL_NONE) and 0 <= order <= MOST_ORDER and 0 <= width <= 8):
        raise ValueError("a column's description makes no sense")
    if len(seeds) != order or any(abs(number) > _HEAD_LIMIT for number in (base, scale, *seeds)):
        raise ValueError("a column's description makes no sense")
    return nones, order, width, base, scale, seeds


def _values(body: bytes, stored: int, form: tuple[int, int, int], seeds: list[int]) -> Sequence[int]:
    width, base, scale = form
    if width == 0:
        values: Sequence[int] = [base] * stored
    elif scale == 1 and base == 0:
        values = list(_joined(body, stored, width))
    elif scale == 1:
        values = [base + value for value in _joined(body, stored, width)]
    else:
        values = [base + scale * value for value in _joined(body, stored, width)]
    for seed in reversed(seeds):
        values = list(accumulate(values, initial=seed))
    sure = not seeds and abs(base) + (abs(scale) << 8 * width) < 2**MOST_BITS
    if values and not sure and (max(values) >= 2**MOST_BITS or min(values) < -(2**MOST_BITS)):
        raise ValueError("a value does not fit in 64 bits")
    return values
