"""Faults: a killed recorder, a full disk, a held book. What was acknowledged is there, what failed left nothing."""

from __future__ import annotations

import random
import sqlite3
import subprocess
import sys
import time
from pathlib import Path

import pytest
import small_books as small

from fieldbook.book import press, raw
from fieldbook.book.audit import audit_book
from fieldbook.book.press import LARGE_BYTES, Presser
from fieldbook.book.store import Book
from fieldbook.errors import BookError
from fieldbook.model.item import Item, ItemKind

HERE = str(Path(__file__).parent)
RECORDER = f"""
import pathlib, sys
sys.path.insert(0, {HERE!r})
import small_books as small
from fieldbook.book.store import Book
book = Book.open(pathlib.Path(sys.argv[1]), clock=small.clock(), write=True)
number = len(book.epochs(1))
assert list(book.items(1)) == [small.item(k) for k in range(1, number + 1)]
while True:
    number += 1
    book.write_burst(1, [small.item(number)], [small.epoch(number)])
    print(number, flush=True)
    if number % 7 == 0:
        book.seal(1)
    if number % 60 == 0:
        book.pack(1)
"""


def test_a_recorder_killed_at_random_moments_loses_nothing_acknowledged(tmp_path: Path) -> None:
    path = tmp_path / "a.book"
    small.begun(path).close()
    luck = random.Random(8)
    acknowledged = 0
    for _ in range(5):
        recorder = subprocess.Popen([sys.executable, "-c", RECORDER, str(path)], stdout=subprocess.PIPE, text=True)
        assert recorder.stdout is not None
        try:
            acknowledged = int(recorder.stdout.readline())
            time.sleep(luck.uniform(0, 0.15))
        finally:
            recorder.kill()
            rest = recorder.communicate()[0].split("\n")[:-1]
        acknowledged = int(rest[-1]) if rest else acknowledged
        assert audit_book(path) == []
        with Book.open(path, clock=small.clock()) as book:
            stored = list(book.items(1))
            assert len(stored) in (acknowledged, acknowledged + 1)
            assert stored == [small.item(number) for number in range(1, len(stored) + 1)]
            assert len(book.epochs(1)) == len(stored)
    assert acknowledged > 20


def test_a_full_disk_is_said_so_and_the_burst_may_be_tried_again(tmp_path: Path) -> None:
    big = Item(ItemKind.BYTES, bytes(200_000))
    with small.begun(tmp_path / "a.book") as book:
        small.record(book, 1, 1, 3)
        pages = book._connection.execute("PRAGMA page_count").fetchone()[0]
        book._connection.execute(f"PRAGMA max_page_count = {pages + 20}").fetchone()
        with pytest.raises(BookError) as caught:
            book.write_burst(1, [big], [small.epoch(4)])
        assert caught.value.code == "disk_full"
        assert "space" in caught.value.remedy
        assert len(book.epochs(1)) == 3
        book._connection.execute("PRAGMA max_page_count = 1000000").fetchone()
        book.write_burst(1, [big], [small.epoch(4)])
        assert list(book.items(1)) == [*[small.item(number) for number in (1, 2, 3)], big]
    assert audit_book(tmp_path / "a.book") == []


def test_a_book_held_by_another_program_is_busy(tmp_path: Path) -> None:
    path = tmp_path / "a.book"
    with small.begun(path) as book:
        other = sqlite3.connect(path, isolation_level=None)
        other.execute("BEGIN IMMEDIATE")
        book._connection.execute("PRAGMA busy_timeout = 30")
        with pytest.raises(BookError) as caught:
            book.append("remark", {"occupation": 1, "text": "x"}, "R. Kell")
        assert caught.value.code == "busy"
        other.execute("ROLLBACK")
        other.close()
        book.append("remark", {"occupation": 1, "text": "x"}, "R. Kell")


def test_a_reader_cannot_write(tmp_path: Path) -> None:
    path = small.ended(tmp_path / "a.book")
    with Book.open(path, clock=small.clock()) as book:
        with pytest.raises(BookError) as caught:
            book.append("remark", {"occupation": 1, "text": "x"}, "R. Kell")
        assert caught.value.code == "read_only"
        with pytest.raises(sqlite3.OperationalError):
            book._connection.execute("DELETE FROM recorder_state")


def test_a_damaged_chunk_is_not_packed_away(tmp_path: Path) -> None:
    path = small.ended(tmp_path / "a.book")
    small.tamper(path, "UPDATE raw_chunk SET data = x'00' WHERE occupation = 2 AND chunk = 1")
    with Book.open(path, clock=small.clock(), write=True) as book:
        with pytest.raises(BookError, match="Occupation 2") as caught:
            book.pack(2)
        assert caught.value.code == "damaged"
        with pytest.raises(BookError, match="damaged"):
            list(book.items(2))
        assert raw.unpacked(book._connection, 2) == {1, 2}
        assert len(list(book.items(1))) == 51


def test_compression_that_does_not_read_back_lets_nothing_go(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "a.book"
    with small.begun(path) as book:
        small.record(book, 1, 1, 25)
        with monkeypatch.context() as patch:
            patch.setattr(press.lines, "unpressed", lambda data, expected: b"other")
            with pytest.raises(BookError, match="read back"):
                book.pack(1)
        assert len(list(book.items(1))) == 25
    assert audit_book(path) == []


def test_a_crash_between_end_and_pack_leaves_a_sound_book(tmp_path: Path) -> None:
    path = small.ended(tmp_path / "a.book", pack=False)
    assert audit_book(path) == []
    with Book.open(path, clock=small.clock(), write=True) as book:
        assert (book.pack(1), book.pack(1), book.pack(2)) == (3, 0, 2)
    assert audit_book(path) == []


def test_the_presser_takes_large_chunks_and_bounds_its_memory() -> None:
    presser = Presser()
    try:
        presser.offer("small", b"small")
        assert presser.take("small") is None
        for number in range(40):
            presser.offer(str(number), bytes(LARGE_BYTES))
        streams = [presser.take(str(number)) for number in range(40)]
        assert streams[0] is not None
        assert raw.inflate_pack(raw.CODEC, streams[0], LARGE_BYTES) == bytes(LARGE_BYTES)
    finally:
        presser.close()


@pytest.mark.parametrize("size", [0, 1, 100_000])
def test_a_pack_of_several_streams_reads_back(size: int) -> None:
    plain = bytes(size) + b"end"
    data = press.press(plain) + press.press(plain)
    assert raw.inflate_pack(raw.CODEC, data, 2 * len(plain)) == plain * 2
    for wrong in (len(plain), 2 * len(plain) - 1, 2 * len(plain) + 1):
        with pytest.raises(ValueError, match="exactly"):
            raw.inflate_pack(raw.CODEC, data, wrong)
    with pytest.raises(ValueError, match="codec"):
        raw.inflate_pack("zip", data, 2 * len(plain))
    with pytest.raises(ValueError, match="more than any writer"):
        raw.inflate_pack(raw.CODEC, data, 2**40)


def test_a_large_piece_goes_into_chunks_at_once_also_at_a_second_try(tmp_path: Path) -> None:
    path = tmp_path / "a.book"
    large = [Item(ItemKind.BYTES, random.Random(number).randbytes(64 * 1024)) for number in range(20)]
    with small.begun(path) as book:
        small.record(book, 1, 1, 3)
        pages = book._connection.execute("PRAGMA page_count").fetchone()[0]
        book._connection.execute(f"PRAGMA max_page_count = {pages + 300}").fetchone()
        with pytest.raises(BookError, match="full"):
            book.write_burst(1, large, [small.epoch(4)])
        book._connection.execute("PRAGMA max_page_count = 1000000").fetchone()
        book.write_burst(1, large[:12], [small.epoch(4)])  # another piece than the one that failed
        assert raw.last_tail_id(book._connection) == 0
        small.record(book, 1, 5, 6)
        wanted = [*[small.item(number) for number in (1, 2, 3)], *large[:12], small.item(5), small.item(6)]
        assert list(book.items(1)) == wanted
        book.pack(1)
        assert list(book.items(1)) == wanted
        assert [epoch.number for epoch in book.epochs(1)] == [1, 2, 3, 4, 5, 6]
    assert audit_book(path) == []


def test_a_book_closed_twice_or_while_damaged_does_not_raise(tmp_path: Path) -> None:
    path = small.ended(tmp_path / "a.book")
    book = Book.open(path, clock=small.clock(), write=True)
    path.write_bytes(path.read_bytes()[:6000])  # a dying stick
    book.close()
    book.close()
