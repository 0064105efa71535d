"""A few flipped bits of every table of every kind of book; a thousand of each are a benchmark (`bitflips.py`)."""

from __future__ import annotations

import threading
from pathlib import Path

import pytest

from fieldbook.book.store import Book
from fieldbook.book.tail import problem_of_book
from fieldbook.clock import SystemClock
from fieldbook.links.address import parse_link
from fieldbook.occupy.foreground import Wish, observe
from fieldbook.settings.session import load_session

from .bits import FOUND, WITHOUT_EFFECT, Victim, flips
from .forger import forging
from .page_map import CONTENT, PageMap
from .victims import NAMES, holds, made


@pytest.mark.parametrize("name", NAMES)
def test_a_flipped_bit_is_found_or_without_effect(name: str, tmp_path: Path) -> None:
    victim = Victim(made(name, tmp_path / name), tmp_path / "under-attack.book")
    result = flips(victim, anywhere=12, each_table=5, seed=len(name))
    assert result.holes == []
    assert result.of(WITHOUT_EFFECT) > 0 or name == "killed"  # nearly every bit of a -wal counts
    assert result.of(FOUND) > 0
    owners = {region.owner for region in victim.places if region.kind == CONTENT}
    assert owners <= {region.owner for region, _ in result.counts}


def test_the_map_covers_every_byte_and_finds_what_a_cell_holds(tmp_path: Path) -> None:
    book = made("certified", tmp_path)
    found = PageMap(book).by_region()
    at = book.read_bytes().index(b"wind from the west")
    owner = next(region for region, places in found.items() if at in places)
    assert (owner.owner, owner.kind) == ("entry", CONTENT)


def test_every_byte_of_the_last_rows_that_a_heartbeat_covers_is_found(tmp_path: Path) -> None:
    """No entry covers the tail yet: the recorder's own sum over it does."""
    victim = Victim(made("open", tmp_path / "open"), tmp_path / "under-attack.book")
    own = next(
        places for region, places in victim.places.items() if region.owner == "raw_tail" and region.kind == CONTENT
    )
    assert [place for place in own[:: len(own) // 60] if victim.flip(place, 2) != FOUND] == []


def test_rows_cut_off_the_tail_are_found(tmp_path: Path) -> None:
    book = made("open", tmp_path)
    with forging(book) as connection:
        connection.execute("DELETE FROM raw_tail WHERE id > (SELECT max(id) - 3 FROM raw_tail)")
    assert "are missing" in problem_of_book(book)
    good, lines = holds(book)
    assert not good
    assert any("which the recorder had written, are missing" in line for line in lines)


def _frames(wal: bytes) -> tuple[int, int]:
    """(bytes of one frame, frames of the first generation)."""
    step = 24 + int.from_bytes(wal[8:12], "big")
    salts, count = wal[16:24], 0
    while wal[32 + count * step + 8 : 32 + count * step + 16] == salts:
        count += 1
    return step, count


def test_a_damaged_wal_is_found_and_entered_by_the_next_writer(tmp_path: Path) -> None:
    """SQLite itself stops at the first bad frame and says nothing: everything behind it would be gone."""
    book = made("killed", tmp_path)
    assert holds(book)[0]
    wal = Path(f"{book}-wal")
    data = bytearray(wal.read_bytes())
    step, count = _frames(data)
    assert count > 20
    data[32 + step * (count // 2) + 100] ^= 4
    wal.write_bytes(data)
    good, lines = holds(book)
    assert not good
    assert any("commits from there on, which had been written, are not read" in line for line in lines)
    with Book.open(book, clock=SystemClock(), write=True) as opened:
        last = opened.entries()[-1]
    assert (last.kind, last.body["code"]) == ("alarm", "wal_damaged")
    with Book.open(book, clock=SystemClock(), write=True) as opened:
        assert opened.entries()[-1].seq == last.seq


def test_a_wal_with_a_damaged_head_is_found(tmp_path: Path) -> None:
    book = made("killed", tmp_path)
    wal = Path(f"{book}-wal")
    data = bytearray(wal.read_bytes())
    data[17] ^= 1
    wal.write_bytes(data)
    assert any("damaged head" in line for line in holds(book)[1])


@pytest.mark.parametrize("cut", [1, 30, 600, 1048])
def test_a_wal_whose_end_was_torn_off_is_no_damage(tmp_path: Path, cut: int) -> None:
    """What a power cut leaves: the last commit, which nobody had been told of, is not whole."""
    book = made("killed", tmp_path)
    wal = Path(f"{book}-wal")
    data = wal.read_bytes()
    step, count = _frames(data)
    wal.write_bytes(data[: 32 + step * count - cut])
    assert not any("damaged" in line for line in holds(book)[1])


@pytest.mark.parametrize("damaged", [False, True])
def test_a_tail_that_was_damaged_between_two_recorders_is_entered(tmp_path: Path, damaged: bool) -> None:
    """The next recorder seals the tail, and then a hash would vouch for it: so it says what it found, once."""
    book = made("open", tmp_path)
    if damaged:
        with forging(book) as connection:
            connection.execute(
                "UPDATE raw_tail SET data = CAST(data || x'00' AS BLOB) WHERE id = (SELECT max(id) FROM raw_tail)"
            )
    session = load_session(tmp_path / "open" / "session.toml")
    stop = threading.Event()
    wish = Wish(session, parse_link("sim:rtk?seed=7"), 1)
    assert observe(book, wish, SystemClock(), stop).resumed
    with Book.open(book, clock=SystemClock()) as opened:
        found = [entry.body["text"] for entry in opened.entries() if entry.body.get("code") == "tail_damaged"]
    assert [("are not those that the recorder wrote" in text) for text in found] == [True] * damaged
    assert holds(book) == (True, [])
