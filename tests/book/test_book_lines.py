"""Columns of received lines: exact for any bytes, bounded for any data."""

from __future__ import annotations

import bz2
import lzma
import random
import struct
import zlib
from pathlib import Path

import pytest
import small_books as small

from fieldbook.book import lines, raw
from fieldbook.book.audit import audit_book
from fieldbook.book.store import Book
from fieldbook.errors import BookError
from fieldbook.model.item import Item, ItemKind

_LOG = b"".join(
    f"$GNGGA,{second:06d}.00,1234.{second * 7919 % 10**7:07d},S,02345.{second:07d},W,4,{second % 20}*{second % 256:02X}\r\n"
    f"$GNGSA,A,3,01,04,07,10,13,16,,,,,,,1.3,0.7,1.1,1*32\r\n".encode("ascii")
    for second in range(3000)
)
_MIXED = random.Random(5).randbytes(400) + b"\r\n"


@pytest.mark.parametrize(
    "plain",
    [
        b"",
        b"a",
        b"\r",
        b"\n",
        b"\r\n",
        b"\r\n" * 50,
        _LOG,
        _LOG[:-1],
        _LOG[1:-2],
        _LOG.replace(b"\r\n", b"\n"),
        _LOG.replace(b"\r\n", b"\r\r\n\n"),
        _LOG[:5000] + bytes(9000) + _LOG[:5000],
        _MIXED * 9 + _LOG[:999] + _MIXED,
        random.Random(1).randbytes(lines.PIECE_BYTES + 1),
        bytes(2 * lines.PIECE_BYTES),
        b"\r\n".join(bytes([kind // 256, kind % 256, 3]) * 2 for kind in range(600) for _ in range(8)),  # 600 kinds
        b"\r\n".join(b"%06d" % (number % 255) + b"x" for number in range(255 * 8)),  # exactly 255
    ],
)
def test_any_bytes_read_back(plain: bytes) -> None:
    data, quick = lines.pressed(plain), lines.pressed(plain, lines.QUICK)
    assert lines.unpressed(data, len(plain)) == plain
    assert lines.unpressed(quick, len(plain)) == plain
    assert lines.unpressed(data + quick, 2 * len(plain)) == plain * 2


def test_random_mixtures_of_lines_read_back() -> None:
    chance = random.Random(3)
    for _ in range(2000):
        plain = bytes(chance.choice(b"\r\n\r\na$,\xff\0") for _ in range(chance.randrange(300)))
        assert lines.unpressed(lines.pressed(plain), len(plain)) == plain


def test_a_log_is_smaller_than_with_bz2() -> None:
    assert len(lines.pressed(_LOG)) < len(bz2.compress(_LOG))


@pytest.mark.parametrize("method", [lines.SMALL, lines.QUICK])
def test_a_changed_byte_is_an_error_or_other_bytes_never_a_crash(method: int) -> None:
    plain = _LOG[:20_000]
    data = bytearray(lines.pressed(plain, method))
    for place in range(len(data)):
        damaged = bytes(data[:place]) + bytes([data[place] ^ 0x15]) + bytes(data[place + 1 :])
        try:
            found = lines.unpressed(damaged, len(plain))
        except ValueError:
            continue
        assert len(found) == len(plain)
    for cut in range(len(data)):
        with pytest.raises(ValueError, match=r"."):
            lines.unpressed(bytes(data[:cut]), len(plain))


def _forged(folded: bytes, makes: int, method: int = lines.SMALL) -> bytes:
    small = lzma.compress(folded, lzma.FORMAT_RAW, filters=lines._FILTERS)
    stored = zlib.compress(folded) if method == lines.QUICK else small
    return struct.pack(">BII", method, len(stored), makes) + stored


@pytest.mark.parametrize(
    ("folded", "makes"),
    [
        (b"", 5),
        (bytes.fromhex("000000000d0d"), 120),  # half a width
        (struct.pack(">IB", 10**9, 0), 5),  # lines that are not there
        (struct.pack(">IBH", 4, 1, 65_535) + bytes(4), 5),  # a width no writer makes
        (struct.pack(">IBH", 4, 1, 400) + bytes(4) + bytes(800), 100),  # makes 1606 bytes
        (struct.pack(">IBH", 4, 1, 2) + b"\7" * 4 + bytes(2) + b"ab", 14),  # a kind that is not there
        (struct.pack(">IBH", 2, 1, 2) + bytes(2) + b"\1\1ab" + b"cd", 6),  # a column is missing
        (struct.pack(">IBH", 2, 1, 2) + bytes(2) + b"\0\0ab" + b"cd", 6),  # more than it says
        (struct.pack(">IB", 2, 0) + b"\xff\xff" + b"abcd", 4),  # two lines said, one there
        (bytes(100_000_000), 5),  # inflates to more than any piece
    ],
    ids=range(10),  # never the bytes themselves: the last would be a name of 400 MB
)
def test_a_forged_piece_is_refused(folded: bytes, makes: int) -> None:
    for method in (lines.SMALL, lines.QUICK, 2):
        with pytest.raises(ValueError, match=r"."):
            lines.unpressed(_forged(folded, makes, method), makes)


def test_a_piece_may_not_claim_more_than_any_writer_makes() -> None:
    claim = lines.PIECE_BYTES + 1
    with pytest.raises(ValueError, match="exactly"):
        lines.unpressed(_forged(struct.pack(">IB", 1, 0) + b"\xff" + bytes(claim), claim), claim)


def test_packs_of_older_books_are_still_read() -> None:
    data = bz2.compress(_LOG) + bz2.compress(b"end")
    assert raw.inflate_pack("bz2", data, len(_LOG) + 3) == _LOG + b"end"
    for wrong in (len(_LOG), len(_LOG) + 2, len(_LOG) + 4):
        with pytest.raises(ValueError, match="exactly"):
            raw.inflate_pack("bz2", data, wrong)
    with pytest.raises(ValueError, match="damaged"):
        raw.inflate_pack("bz2", b"x" + data, len(_LOG))


def test_large_chunks_are_stored_as_they_are_packed_also_by_another_process(tmp_path: Path) -> None:
    path, copy = tmp_path / "a.book", tmp_path / "b.book"
    plain = _LOG * 5
    items = [Item(ItemKind.BYTES, plain[start : start + 65_536]) for start in range(0, len(plain), 65_536)]
    with small.begun(path) as book:
        book.prepare(items)
        book.write_burst(1, items)
    assert audit_book(path) == []
    copy.write_bytes(path.read_bytes())
    small.tamper(
        copy, "UPDATE raw_chunk SET data = CAST(substr(data, 1, length(data) - 1) || x'a5' AS BLOB) WHERE chunk = 1"
    )
    assert audit_book(copy) != []
    with Book.open(copy, clock=small.clock(), write=True) as book, pytest.raises(BookError):
        book.pack(1)
    with Book.open(path, clock=small.clock(), write=True) as book:
        assert book.pack(1) > 1
        assert b"".join(book.received(1)) == plain
    assert audit_book(path) == []
