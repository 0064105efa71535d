"""Damage and tampering told apart where they can be, on books damaged and tampered with for real."""

from __future__ import annotations

import random
import sqlite3
from collections.abc import Callable
from contextlib import closing
from pathlib import Path

import pytest
import small_books as small

from fieldbook.book.causes import causes
from fieldbook.book.sound import sound_entries
from fieldbook.book.store import Book
from fieldbook.model.entry import entry_hash


@pytest.fixture
def path(tmp_path: Path) -> Path:
    """A closed book with remarks."""
    place = tmp_path / "a.book"
    with small.begun(place) as book:
        for number in range(20):
            book.append("remark", {"occupation": 1, "text": f"remark {number}"}, "R. Kell")
    return place


def without_triggers(path: Path, change: Callable[[sqlite3.Connection], object]) -> None:
    with closing(sqlite3.connect(path, isolation_level=None)) as connection:
        triggers = connection.execute("SELECT name, sql FROM sqlite_master WHERE type = 'trigger'").fetchall()
        for name, _ in triggers:
            connection.execute(f"DROP TRIGGER {name}")
        change(connection)
        for _, sql in triggers:
            connection.execute(sql)


def test_a_sound_book_has_no_cause(path: Path) -> None:
    assert causes(path) == []
    entries, total = sound_entries(path)
    with Book.open(path, clock=small.clock()) as book:
        assert (entries, total) == (book.entries(), len(entries))


@pytest.mark.parametrize("column", ["utc", "kind", "body", "observer", "previous_hash", "hash"])
def test_one_flipped_bit_is_damage(path: Path, column: str) -> None:
    chance = random.Random(column)

    def flip(connection: sqlite3.Connection) -> None:
        text = connection.execute(f"SELECT {column} FROM entry WHERE seq = 9").fetchone()[0]
        data = bytearray(text.encode())
        data[chance.randrange(len(data))] ^= 1 << chance.randrange(6)
        connection.execute(f"UPDATE entry SET {column} = CAST(? AS TEXT) WHERE seq = 9", (bytes(data),))

    without_triggers(path, flip)
    assert causes(path) == [
        f"damage: one flipped bit in '{column}' of entry 9 is all that differs, as by a fault of disk or memory"
    ]
    assert len(sound_entries(path)[0]) == 8


def test_an_edit_that_leaves_the_hash_could_be_either(path: Path) -> None:
    body = '{"occupation":1,"text":"another text"}'
    without_triggers(path, lambda found: found.execute("UPDATE entry SET body = ? WHERE seq = 9", (body,)))
    assert causes(path)[0].startswith("damage or tampering: more than one bit of entry 9 was changed")


def test_a_hash_made_anew_is_tampering(path: Path) -> None:
    def edit(connection: sqlite3.Connection) -> None:
        row = connection.execute("SELECT utc, kind, observer, previous_hash FROM entry WHERE seq = 9").fetchone()
        utc, kind, observer, previous = row
        body = '{"occupation":1,"text":"another text"}'
        own = entry_hash(9, utc, kind, body, observer, previous)
        connection.execute("UPDATE entry SET body = ?, hash = ? WHERE seq = 9", (body, own))

    without_triggers(path, edit)
    assert causes(path)[0].startswith("tampering: the hash of entry 10 fits it, but names another entry before it")
    entries, total = sound_entries(path)
    assert (len(entries), total) == (9, 23)


def test_entries_taken_out_are_tampering(path: Path) -> None:
    without_triggers(path, lambda found: found.execute("DELETE FROM entry WHERE seq = 9"))
    assert causes(path)[0].startswith("tampering: entry 9 is gone and those around it stand")


def test_changed_triggers_are_tampering(path: Path) -> None:
    with closing(sqlite3.connect(path, isolation_level=None)) as connection:
        connection.execute("DROP TRIGGER entry_no_update")
    assert causes(path)[0].startswith("tampering: tables or triggers")


def test_a_flipped_bit_in_the_schema_is_damage(path: Path) -> None:
    data = bytearray(path.read_bytes())
    place = data.index(b"nothing is ever changed")
    data[place] ^= 1
    path.write_bytes(bytes(data))
    assert causes(path) == [
        "damage: one flipped bit in the schema is all that differs, as by a fault of disk or memory"
    ]


def test_broken_pages_are_damage(path: Path) -> None:
    data = bytearray(path.read_bytes())
    data[len(data) // 2 :] = random.Random(2).randbytes(len(data) - len(data) // 2)
    path.write_bytes(bytes(data))
    assert causes(path)[0].startswith("damage: ")


def test_what_is_no_book_is_not_explained(tmp_path: Path) -> None:
    other = tmp_path / "x"
    other.write_bytes(b"no book")
    assert causes(other) == []
    assert causes(tmp_path / "missing") == []
