"""Every stored value of an ended book is covered: each is changed once, and the change is found."""

from __future__ import annotations

import random
import shutil
import sqlite3
from contextlib import suppress
from pathlib import Path
from typing import Any

import pytest
import small_books as small

from fieldbook.book import migrations
from fieldbook.book.audit import audit_book
from fieldbook.book.store import Book
from fieldbook.errors import BookError

CHAINED = ("entry", "raw_chunk", "raw_pack", "_sqlite_migrations")
TABLES = (*CHAINED, "epoch", "epoch_form", "epoch_pack", "raw_tail", "recorder_state")


@pytest.fixture(scope="module")
def sound(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return small.ended(tmp_path_factory.mktemp("sound") / "a.book")


@pytest.fixture
def copy(sound: Path, tmp_path: Path) -> Path:
    return Path(shutil.copy(sound, tmp_path / "a.book"))  # nobody has it open


def _columns(path: Path, table: str) -> list[str]:
    connection = sqlite3.connect(path)
    try:
        return [row[1] for row in connection.execute(f"PRAGMA table_info({table})")]
    finally:
        connection.close()


def _rows(path: Path, table: str) -> list[tuple[Any, ...]]:
    connection = sqlite3.connect(path)
    try:
        return connection.execute(f"SELECT * FROM {table}").fetchall()
    finally:
        connection.close()


def _changed(value: Any) -> list[Any]:
    """Other values of the same type: one a little different, one quite."""
    if value is None:
        return [1]
    if isinstance(value, int):
        return [value + 1, value + 1_000_000]
    if isinstance(value, str):
        return [value[:-1] + chr(ord(value[-1]) ^ 1) if value else "x", value + " "]
    middle = len(value) // 2
    return [
        value[:middle] + bytes([value[middle] ^ 1]) + value[middle + 1 :],
        value[:-1] + bytes([value[-1] ^ 1]),
        value + b"\0",
        value[:-1],
        b"",
    ]


def test_a_sound_book_has_no_findings(sound: Path) -> None:
    assert audit_book(sound) == []
    assert set(TABLES) == {
        row[0]
        for row in _sqlite(sound, "SELECT name FROM sqlite_master WHERE type = 'table'")
        if row[0] != "sqlite_sequence"
    }
    assert all(_rows(sound, table) for table in TABLES if table != "raw_tail")


def _sqlite(path: Path, question: str) -> list[Any]:
    connection = sqlite3.connect(path)
    try:
        return connection.execute(question).fetchall()
    finally:
        connection.close()


@pytest.mark.parametrize("table", [*CHAINED, "epoch_pack"])
def test_a_change_of_any_value_is_found(sound: Path, tmp_path: Path, table: str) -> None:
    """Every column of the first, a middle and the last row; values changed little and much."""
    rows, columns = _rows(sound, table), _columns(sound, table)
    keys = {"entry": ["seq"], "_sqlite_migrations": ["id"]}.get(table, columns[:2])
    tried = 0
    for index in sorted({0, len(rows) // 2, len(rows) - 1}):
        row = rows[index]
        for column, value in zip(columns, row, strict=True):
            for other in _changed(value):
                path = Path(shutil.copy(sound, tmp_path / "b.book"))
                where = " AND ".join(f"{key} = ?" for key in keys)
                chosen = tuple(row[columns.index(key)] for key in keys)
                try:
                    small.tamper(path, f"UPDATE {table} SET {column} = ? WHERE {where}", (other, *chosen))
                except sqlite3.IntegrityError:
                    continue  # another row has that key
                tried += 1
                assert audit_book(path), f"{table}.{column} = {other!r} in row {index} was not found"
    assert tried >= 2 * len(columns)


@pytest.mark.parametrize("table", ["epoch", "epoch_form"])
def test_a_change_of_any_epoch_value_shows_in_the_audit_or_in_the_epochs(
    sound: Path, tmp_path: Path, table: str
) -> None:
    """The values of epochs are compared with a rebuild by the caller; here: none hides from `Book.epochs`."""
    with Book.open(sound, clock=small.clock()) as book:
        good = {number: book.epochs(number) for number in (1, 2)}
    rows, columns = _rows(sound, table), _columns(sound, table)
    row = rows[len(rows) // 3]
    for column, value in zip(columns, row, strict=True):
        for other in _changed(value):
            path = Path(shutil.copy(sound, tmp_path / "b.book"))
            where = f"{columns[0]} = ? AND {columns[1]} = ?"
            try:
                small.tamper(path, f"UPDATE {table} SET {column} = ? WHERE {where}", (other, *row[:2]))
            except sqlite3.IntegrityError:
                continue
            if audit_book(path):
                continue
            with Book.open(path, clock=small.clock()) as book:
                assert {number: book.epochs(number) for number in (1, 2)} != good, f"{column} = {other!r}"


@pytest.mark.parametrize(
    ("statement", "where"),
    [
        ("PRAGMA application_id = 7", "file"),
        ("PRAGMA user_version = 0", "schema"),
        ("PRAGMA user_version = 1", "schema"),
        ("PRAGMA user_version = 3", "schema"),
        ("DROP TRIGGER entry_no_delete", "schema"),
        ("CREATE VIEW v AS SELECT 1", "schema"),
        ("CREATE INDEX i ON entry (kind)", "schema"),
        ("ALTER TABLE epoch ADD COLUMN more INTEGER", "schema"),
        ("DELETE FROM epoch WHERE number = 25", "epoch"),
        ("DELETE FROM epoch_pack", "epoch"),
        ("DELETE FROM epoch WHERE occupation = 2", "epoch"),
        ("INSERT INTO epoch (occupation, number, form) VALUES (9, 1, 1)", "epoch"),
        ("INSERT INTO epoch_form (occupation, form, source, talker, flags) VALUES (1, 9, 'GGA', 'GN', 0)", "epoch"),
        ("INSERT INTO raw_tail (id, occupation, kind, data) VALUES (900, 1, 'B', x'00')", "raw"),
        ("INSERT INTO raw_tail (id, occupation, kind, data) VALUES (900, 9, 'B', x'00')", "raw"),
        ("INSERT INTO raw_tail (id, occupation, kind, data) VALUES (900, 3, 'Q', x'00')", "raw"),
        ("INSERT INTO raw_pack VALUES (2, 1, 1, 'bz2', x'00')", "raw"),
        ("INSERT INTO raw_pack VALUES (1, 8, 9, 'bz2', x'00')", "raw"),
        ("INSERT INTO raw_chunk VALUES (1, 8, 1, 1, 1, 1, 'x', x'00')", "raw"),
        ("INSERT INTO _sqlite_migrations VALUES (3, 'fieldbook', 'm003', 'now')", "migrations"),
        ("INSERT INTO _sqlite_migrations VALUES (3, 'other', 'm003', 'now')", "migrations"),
    ],
)
def test_what_does_not_belong_is_found(copy: Path, statement: str, where: str) -> None:
    connection = sqlite3.connect(copy, isolation_level=None)
    connection.execute(statement)
    connection.close()
    if statement == "PRAGMA application_id = 7":
        where = "schema"
    assert where in {finding.where for finding in audit_book(copy)}


@pytest.mark.parametrize("table", CHAINED)
def test_a_missing_row_is_found(copy: Path, table: str) -> None:
    """The last entry may be cut off unnoticed (a chain has no end mark), so the first is taken."""
    small.tamper(copy, f"DELETE FROM {table} WHERE rowid = (SELECT min(rowid) FROM {table})")
    assert audit_book(copy)


def test_the_first_changed_entry_is_named(copy: Path) -> None:
    small.tamper(copy, "UPDATE entry SET observer = 'S. Marl' WHERE seq = 4")
    findings = audit_book(copy)
    assert {finding.since_seq for finding in findings} == {4}
    assert "was changed" in findings[0].text


@pytest.mark.parametrize(
    "body",
    [
        "{}",
        "[]",
        "7",
        '{"occupation":1.5}',
        '{"occupation":NaN}',
        '{"occupation": 1}',
        '{"occupation":[]}',
        '{"occupation":{},"epochs":[],"received_bytes":"\\u001b[2J"}',
        '{"b":1,"a":2}',
        '{"occupation":' + "[" * 100_000,
        '{"occupation":' + "9" * 5000 + "}",
        '{"chunk":1,"first_id":-1,"occupation":1}',
        "\x1b[2J",
    ],
)
@pytest.mark.parametrize("kind", ["raw", "end", "occupation", "book", "recorder", "origin"])
def test_hostile_bodies_become_findings_and_book_errors(copy: Path, kind: str, body: str) -> None:
    """The whole chain is forged behind it, so that the body itself has to be judged."""
    from fieldbook.model.entry import GENESIS, entry_hash

    rows = _rows(copy, "entry")
    target = next(row[0] for row in rows if row[2] == kind)
    connection = sqlite3.connect(copy, isolation_level=None)
    triggers = connection.execute("SELECT name, sql FROM sqlite_master WHERE type = 'trigger'").fetchall()
    for name, _ in triggers:
        connection.execute(f"DROP TRIGGER {name}")
    previous = GENESIS
    for seq, utc, own_kind, old, observer, _, _ in rows:
        text = body if seq == target else old
        own = entry_hash(seq, utc, own_kind, text, observer, previous)
        statement = "UPDATE entry SET body = ?, previous_hash = ?, hash = ? WHERE seq = ?"
        connection.execute(statement, (text, previous, own, seq))
        previous = own
    for _, text in triggers:
        connection.execute(text)
    connection.close()
    findings = audit_book(copy)
    assert findings
    assert all(finding.text.isprintable() for finding in findings)
    with Book.open(copy, clock=small.clock()) as book:
        for use in (book.state, lambda: list(book.items(1)), lambda: book.epochs(1), book.entries):
            with suppress(BookError):  # nothing else
                use()


def test_a_zip_bomb_is_not_inflated(copy: Path) -> None:
    import bz2
    import zlib

    small.tamper(
        copy, "UPDATE raw_chunk SET data = ? WHERE occupation = 2 AND chunk = 1", (zlib.compress(bytes(10**8)),)
    )
    small.tamper(copy, "UPDATE raw_pack SET data = ? WHERE occupation = 1", (bz2.compress(bytes(10**8)),))
    assert {finding.where for finding in audit_book(copy)} == {"raw"}


def test_random_damage_never_raises_and_what_goes_unseen_is_without_effect(sound: Path, tmp_path: Path) -> None:
    """Flipped bits anywhere in the file, seeded: found, or entries and received bytes are as they were.

    Damaged epochs are found by the rebuild, which the caller of the audit makes from the received bytes."""
    good = _everything(sound)
    data = sound.read_bytes()
    path = tmp_path / "b.book"
    luck = random.Random(20270304)
    unseen = 0
    for _ in range(150):
        place = luck.randrange(len(data))
        path.write_bytes(data[:place] + bytes([data[place] ^ 1 << luck.randrange(8)]) + data[place + 1 :])
        if not audit_book(path):
            unseen += 1
            assert _everything(path) == good, f"byte {place}"
    assert unseen < 120  # most of a small book is empty pages


def _everything(path: Path) -> list[Any]:
    with Book.open(path, clock=small.clock()) as book:
        return [
            book.entries(),
            *[list(book.items(number)) for number in (1, 2)],
        ]


@pytest.mark.parametrize("length", [1, 99, 1023, 1024, 5000, 20_000])
def test_a_truncated_book_is_found(sound: Path, tmp_path: Path, length: int) -> None:
    path = tmp_path / "b.book"
    path.write_bytes(sound.read_bytes()[:length])
    assert audit_book(path)


def test_a_running_recorder_makes_no_findings(tmp_path: Path) -> None:
    path = tmp_path / "a.book"
    with small.begun(path) as book:
        book.append("recorder", {"occupation": 1, "state": "running", "program": "0"}, "R. Kell")
        small.record(book, 1, 1, 33)
        assert audit_book(path) == []


def test_a_copy_without_its_wal_is_said_to_be_one(tmp_path: Path) -> None:
    path, taken = tmp_path / "a.book", tmp_path / "stick.book"
    with small.begun(path) as book:
        book.append("recorder", {"occupation": 1, "state": "running", "program": "0"}, "R. Kell")
        book._connection.execute("PRAGMA wal_checkpoint(PASSIVE)").fetchall()
        small.record(book, 1, 1, 5)
        taken.write_bytes(path.read_bytes())  # a user's copy; done by no code of the product
        with Book.open(path, clock=small.clock()) as reader:
            assert not reader.copied_without_wal
    assert "without its -wal" in " ".join(finding.text for finding in audit_book(taken))
    for _ in range(2):  # the first look leaves an empty -wal beside it
        with Book.open(taken, clock=small.clock()) as reader:
            assert reader.copied_without_wal
    with Book.open(path, clock=small.clock()) as reader:
        assert not reader.copied_without_wal  # left open by its recorder, but whole


def test_the_schema_expected_is_that_of_a_new_book(sound: Path) -> None:
    connection = sqlite3.connect(sound)
    assert migrations.schema_of(connection) == migrations.expected_schema(migrations.version())
    connection.close()
