"""Stored chunks and packs back to canonical bytes: every codec a book may hold, every size checked before it is built."""

from __future__ import annotations

import bz2
import zlib

from . import lines

MAX_INFLATED_BYTES = 64 * 1024 * 1024  # of one chunk or pack; no writer makes larger ones
CODEC = "lines"
OLDER_CODEC = "bz2"  # of packs; read, not written any more


def made_by_lines(data: bytes) -> bool:
    """A zlib stream begins with 0x78, a piece of `lines` with its method."""
    return data[:1] in (b"\0", b"\1")


def inflate_chunk(data: bytes, expected: int) -> bytes:
    """The canonical bytes of a chunk.

    Raises:
        ValueError: damaged, not exactly `expected` bytes, or something behind it.
    """
    _check_size(expected)
    if made_by_lines(data):
        return lines.unpressed(data, expected)
    worker = zlib.decompressobj()
    try:
        plain = worker.decompress(data, expected + 1)
    except zlib.error as error:
        raise ValueError(f"its zlib data is damaged ({error})") from error
    if len(plain) != expected or not worker.eof or worker.unused_data:
        raise ValueError(f"its zlib data does not hold exactly {expected} bytes")
    return plain


def inflate_pack(codec: str, data: bytes, expected: int) -> bytes:
    """The canonical bytes of a pack.

    Raises:
        ValueError: unknown codec, damaged data, not exactly `expected` bytes, or something behind it.
    """
    if codec not in (CODEC, OLDER_CODEC):
        raise ValueError(f"its codec is {codec!r:.20}, not '{CODEC}'")
    _check_size(expected)
    return lines.unpressed(data, expected) if codec == CODEC else _inflate_bz2(data, expected)


def _inflate_bz2(data: bytes, expected: int) -> bytes:
    parts: list[bytes] = []
    size = 0
    while data and size <= expected:
        worker = bz2.BZ2Decompressor()
        try:
            part = worker.decompress(data, expected + 1 - size)
        except OSError as error:
            raise ValueError(f"its {OLDER_CODEC} data is damaged ({error})") from error
        parts.append(part)
        size += len(part)
        if not worker.eof:
            break
        data = worker.unused_data
    if size != expected or data:
        raise ValueError(f"its {OLDER_CODEC} data does not hold exactly {expected} bytes")
    return b"".join(parts)


def _check_size(expected: int) -> None:
    if not 0 <= expected <= MAX_INFLATED_BYTES:
        raise ValueError(f"it claims {expected} bytes, more than any writer puts into one piece")
