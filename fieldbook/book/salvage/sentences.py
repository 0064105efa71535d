"""Received bytes that no hash proves: what the sentences themselves say of their soundness.

A sentence carries a checksum of its own (NMEA 0183: exclusive or of what stands between `$` and `*`). Where the book's
hash is gone, a line whose checksum fails may be damage of the file; it would give no epoch either way, so it is cut out
and counted as lost. A line torn by a hole goes the same way.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator, Sequence
from functools import reduce
from operator import xor

from fieldbook.model.item import Item, ItemKind

_SENTENCE = re.compile(rb"\$([^$*]*)\*([0-9A-Fa-f]{2})", re.S)
_CLOSED = re.compile(rb"\*[0-9A-Fa-f]{2}\r?$")
_ZEROS = bytes(8)


def sound(line: bytes) -> bool:
    """Whether a line may stand: its checksum holds, or it carries none and shows no sign of damage."""
    text = line.rstrip(b"\r\n")
    found = _SENTENCE.fullmatch(text)
    if found is not None:
        return reduce(xor, found.group(1), 0) == int(found.group(2), 16)
    return b"$" not in text and not _CLOSED.search(text) and _ZEROS not in text


def cut(items: Sequence[Item], *, torn_before: bool, torn_behind: bool) -> tuple[list[Item], int]:
    """A stretch of unproven items without the lines that do not hold, and the number of bytes cut out."""
    bad = list(_bad_spans(b"".join(_data(item) for item in items), torn_before, torn_behind))
    place = lost = 0
    kept: list[Item] = []
    for item in items:
        data = _data(item)
        here = [(begin, end) for begin, end in bad if begin < place + len(data) and end > place]
        inside = [(max(begin - place, 0), end - place) for begin, end in here]
        place += len(data)
        if not inside or not data:
            kept.append(item)
            continue
        left = bytearray(data)
        for begin, end in reversed(inside):
            del left[begin:end]
        lost += len(data) - len(left)
        if left:
            kept.append(Item(item.kind, bytes(left), item.monotonic_ms, item.utc_ms))
    return kept, lost


def until_bad(items: Iterable[Item]) -> Iterator[Item]:
    """Items up to the first line that does not hold.

    What a decompressor gives behind a place of damage can be lines it has seen before, whole and sound; but the line
    that it was in the middle of is not.
    """
    rest = b""
    for item in items:
        if item.kind is not ItemKind.BYTES:
            yield item
            continue
        place = -len(rest)
        *whole, rest = (rest + item.data).split(b"\n")
        for line in whole:
            if not sound(line):
                if place > 0:
                    yield Item(item.kind, item.data[:place], item.monotonic_ms, item.utc_ms)
                return
            place += len(line) + 1
        yield item


def _data(item: Item) -> bytes:
    return item.data if item.kind is ItemKind.BYTES else b""


def _bad_spans(joined: bytes, torn_before: bool, torn_behind: bool) -> Iterator[tuple[int, int]]:
    start = 0
    while start < len(joined):
        end = joined.find(b"\n", start) + 1
        if not end:
            if torn_behind:
                yield start, len(joined)
            return
        line = joined[start:end]
        begins = line.rfind(b"$")
        if start == 0 and torn_before and begins != 0:
            yield 0, max(begins, 0) or end
            begins = max(begins, 0)
            start, line = (begins, line[begins:]) if begins else (end, b"")
        if line and not sound(line):
            tail = line[begins:] if begins > 0 else b""
            yield start, start + begins if tail and sound(tail) else end
        start = end
