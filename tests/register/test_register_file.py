"""The file of a register: append-only, chained, refused when it is not ours, never half written."""

from __future__ import annotations

import sqlite3
from contextlib import closing
from pathlib import Path

import pytest

from fieldbook.book.migrations import schema_of
from fieldbook.clock import FakeClock
from fieldbook.errors import BookError, UsageError
from fieldbook.model.entry import GENESIS
from fieldbook.register import connect, migrations
from fieldbook.register.audit import audit_register
from fieldbook.register.store import Register

CLOCK = FakeClock(1000, 1_804_122_600_000)
OFFICE = "O. Desk"


@pytest.fixture
def register(tmp_path: Path) -> Path:
    path = tmp_path / "office.register"
    with Register.create(path, clock=CLOCK, by=OFFICE) as made:
        made.append("frame", {"frame": "EPSG:7843", "epoch": None, "reason": "the client's"}, OFFICE)
        with made.transaction():
            made.keep(b"not named by any entry")
    return path


def test_the_chain_begins_at_the_genesis_and_every_entry_fits(register: Path) -> None:
    with Register.open(register, clock=CLOCK) as opened:
        entries = opened.entries()
    assert [entry.kind for entry in entries] == ["register", "frame"]
    assert entries[0].previous_hash == GENESIS
    assert entries[1].previous_hash == entries[0].hash
    assert all(entry.hash == entry.expected_hash() for entry in entries)


@pytest.mark.parametrize(
    "statement",
    [
        "UPDATE entry SET body = '{}' WHERE seq = 2",
        "DELETE FROM entry WHERE seq = 2",
        "INSERT OR REPLACE INTO entry SELECT * FROM entry WHERE seq = 2",
        "INSERT INTO entry SELECT seq + 2, utc, kind, body, by, hash, hash FROM entry WHERE seq = 2",
        "UPDATE content SET data = x'00'",
        "DELETE FROM content",
        "INSERT OR REPLACE INTO content SELECT sha256, 0, 'plain', x'' FROM content",
    ],
)
def test_nothing_is_changed_or_erased(register: Path, statement: str) -> None:
    with closing(sqlite3.connect(register, isolation_level=None)) as plain:
        plain.execute("PRAGMA recursive_triggers=ON")
        with pytest.raises(sqlite3.IntegrityError):
            plain.execute(statement)


def _without_triggers(path: Path, statement: str) -> None:
    with closing(sqlite3.connect(path, isolation_level=None)) as plain:
        triggers = plain.execute("SELECT name, sql FROM sqlite_master WHERE type = 'trigger'").fetchall()
        for name, _ in triggers:
            plain.execute(f"DROP TRIGGER {name}")
        plain.execute(statement)
        for _, text in triggers:
            plain.execute(text)


@pytest.mark.parametrize(
    ("statement", "said"),
    [
        ("UPDATE entry SET by = 'Somebody' WHERE seq = 2", "entry 2 (frame) was changed"),
        ("UPDATE entry SET body = replace(body, '7843', '4283') WHERE seq = 2", "entry 2 (frame) was changed"),
        ("DELETE FROM entry WHERE seq = 1", "entry 1 is missing before entry 2"),
        ("UPDATE content SET data = x'00'", "was changed"),
    ],
)
def test_the_audit_finds_what_a_forger_changed(register: Path, statement: str, said: str) -> None:
    _without_triggers(register, statement)
    assert any(said in item.text and not item.holds for item in audit_register(register))


def test_evidence_that_no_entry_names_does_not_hold(register: Path) -> None:
    (line,) = [item for item in audit_register(register) if not item.holds]
    assert "named by no entry" in line.text


def test_a_changed_schema_is_refused_and_found(register: Path) -> None:
    with closing(sqlite3.connect(register, isolation_level=None)) as plain:
        plain.execute("DROP TRIGGER entry_no_delete")
    with pytest.raises(BookError) as refused:
        Register.open(register, clock=CLOCK)
    assert refused.value.code == "schema"
    assert not any(item.holds for item in audit_register(register))


def test_a_newer_register_is_refused(register: Path) -> None:
    with closing(sqlite3.connect(register, isolation_level=None)) as plain:
        plain.execute(f"PRAGMA user_version = {migrations.version() + 1}")
    with pytest.raises(BookError, match="newer Fieldbook"):
        Register.open(register, clock=CLOCK)


def test_a_book_is_no_register_and_a_register_no_book(register: Path, short_book: Path) -> None:
    from fieldbook.book.store import Book

    with pytest.raises(BookError) as refused:
        Register.open(short_book, clock=CLOCK)
    assert refused.value.code == "no_register"
    with pytest.raises(BookError) as refused:
        Book.open(register, clock=CLOCK)
    assert refused.value.code == "not_a_book"
    assert Register.recognises(register)
    assert not Register.recognises(short_book)


def _one_good_and_one_bad(register: Register) -> None:
    with register.transaction():
        register.append("name", {"mark": 1, "name": "A", "reason": "r"}, OFFICE)
        assert register.state().head_seq == 3
        register.append("name", {"mark": 1, "name": "A", "reason": " "}, OFFICE)


def test_a_refused_transaction_leaves_nothing(register: Path) -> None:
    with Register.open(register, clock=CLOCK, write=True) as opened:
        before = opened.state().head_hash
        with pytest.raises(UsageError):
            _one_good_and_one_bad(opened)
        assert opened.state().head_hash == before


def test_strikes_can_be_struck_and_only_decisions_are(register: Path) -> None:
    with Register.open(register, clock=CLOCK, write=True) as opened:
        assert opened.state().frame() == ("EPSG:7843", None)
        opened.append("strike", {"seq": 2, "reason": "too early"}, OFFICE)
        assert opened.state().frame() is None
        opened.append("strike", {"seq": 3, "reason": "it was right"}, OFFICE)
        assert opened.state().frame() == ("EPSG:7843", None)
        for seq in (1, 99):
            with pytest.raises(UsageError):
                opened.append("strike", {"seq": seq, "reason": "no"}, OFFICE)
        with pytest.raises(UsageError, match="already"):
            opened.append("strike", {"seq": 3, "reason": "again"}, OFFICE)


def test_content_inflates_to_its_stated_size_only(register: Path) -> None:
    import zlib

    from fieldbook.register.store import unpacked

    bomb = zlib.compress(b"\0" * 1_000_000)
    assert unpacked(10, "zlib", bomb) is None
    assert unpacked(1_000_000, "zlib", bomb) == b"\0" * 1_000_000
    assert unpacked(1_000_000, "zlib", bomb[:-4]) is None
    assert unpacked(3, "lzma", b"abc") is None


def test_the_expected_schema_is_that_of_a_new_file(register: Path) -> None:
    with closing(connect.open_reader(register)) as connection:
        assert schema_of(connection) == connect.expected_schema(migrations.version())
