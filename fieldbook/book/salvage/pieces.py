"""Stored data of chunks and packs that may be damaged -> plain bytes, as far as they can be had."""

from __future__ import annotations

import bz2
import struct
import zlib
from collections import Counter
from collections.abc import Iterator, Sequence

from fieldbook.book import lines
from fieldbook.book.inflate import CODEC, inflate_chunk, made_by_lines
from fieldbook.model.item import NO_TIME, Item, ItemKind, parse_items

from .gather import Stored
from .sentences import sound

ITEM_HEAD = 25  # bytes of a canonical item beside its data
Part = tuple[int, int, bytes | None]  # place in the plain bytes, their number, they themselves or None


def inflated(data: bytes, expected: int) -> bytes | None:
    """The canonical bytes of a chunk; None if it does not give exactly these many."""
    try:
        return inflate_chunk(data, expected)
    except (ValueError, MemoryError, struct.error):
        return None


def surviving(codec: str, stored: Stored, total: int | None) -> Iterator[Part]:
    """(place, size, plain bytes or None) of the pieces of a pack."""
    if codec == CODEC:
        yield from lines.surviving(stored.data, stored.holes, total)
        return
    plain = bytearray()  # of an older book: streams of bz2, each sound or not
    data = stored.data[: stored.good_until()]
    while data:
        worker = bz2.BZ2Decompressor()
        try:
            plain += worker.decompress(data, 64 * 1024 * 1024)
        except (OSError, EOFError):
            break
        if not worker.eof:
            break
        data = worker.unused_data
    if plain:
        yield 0, len(plain), bytes(plain)


def prefix(stored: Stored) -> bytes:
    """What a damaged zlib chunk gives before the place where it cannot go on."""
    data = stored.data[: stored.good_until()]
    if made_by_lines(data):
        first = next(lines.surviving(data, (), None), None)
        return first[2] or b"" if first else b""
    worker, plain = zlib.decompressobj(), bytearray()
    for start in range(0, len(data), 64):
        try:
            plain += worker.decompress(data[start : start + 64], 1 << 20)
        except zlib.error:
            break
        if len(plain) > 64 * 1024 * 1024:
            break
    return bytes(plain)


def lines_left(stored: Stored, start: int) -> Iterator[Item]:
    """Items of the lines that a damaged piece of a pack still gives; `start`: its place in the stored data.

    The checksum of a sentence must hold, and of a kind of sentence nearly all must: else its columns are damaged too.
    Items are the old ones where their heads are among those lines, else without a time.
    """
    end = stored.good_until(start)
    found = [line if line is None else _parted(line) for line in lines.complete_kinds(stored.data[start:end])]
    good, all_of_it = Counter[bytes](), Counter[bytes]()
    for pair in found:
        if pair is not None:
            kind = pair[1][:6]
            all_of_it[kind] += 1
            good[kind] += pair[1][:1] == b"$" and sound(pair[1])
    times: tuple[int | None, int | None] = (None, None)
    data = bytearray()
    for pair in found:
        if pair is not None and pair[0] is not None:
            if data:
                yield Item(ItemKind.BYTES, bytes(data), *times)
                data.clear()
            times = pair[0]
        if pair is not None and sound(pair[1]) and good[pair[1][:6]] > 0.98 * all_of_it[pair[1][:6]]:
            data += pair[1] + b"\r\n"
    if data:
        yield Item(ItemKind.BYTES, bytes(data), *times)


def _parted(line: bytes) -> tuple[tuple[int | None, int | None] | None, bytes]:
    """A line without the head of the item that begins in it, and the times of that head."""
    if line[:1] == b"B" and len(line) > ITEM_HEAD and line[ITEM_HEAD : ITEM_HEAD + 1] == b"$":
        mono, utc = struct.unpack_from(">qq", line, 1)
        return (None if mono == NO_TIME else mono, None if utc == NO_TIME else utc), line[ITEM_HEAD:]
    return None, line


def first_items(plain: bytes) -> Iterator[Item]:
    """Items from the beginning of canonical bytes, as long as they make sense."""
    try:
        yield from parse_items(plain)
    except (ValueError, UnicodeDecodeError):
        return


def places_of(sizes: Sequence[int | None], total: int) -> list[int | None]:
    """Where each chunk begins in its pack: counted from the front, and from the end behind an unknown one."""
    places: list[int | None] = [None] * len(sizes)
    place = 0
    for number, size in enumerate(sizes):
        places[number] = place
        if size is None:
            break
        place += size
    place = total
    for number in range(len(sizes) - 1, -1, -1):
        size = sizes[number]
        if size is None or places[number] is not None:
            break
        place -= size
        places[number] = place
    return places


def between(parts: Sequence[Part], start: int, end: int) -> tuple[bytes, bool]:
    """The plain bytes from a place on as far as they are there without a gap, and whether they reach the end."""
    plain = bytearray()
    for begin, size, data in parts:
        if begin + size <= start or begin >= end:
            continue
        at = start + len(plain)
        if data is None or begin > at:
            break
        plain += data[at - begin : end - begin]
    return bytes(plain), len(plain) == end - start
