"""Create, append, record, seal, pack and read a book."""

from __future__ import annotations

import os
import sqlite3
import subprocess
import sys
import threading
from pathlib import Path

import pytest
import small_books as small

from fieldbook.book import connect, migrations, raw
from fieldbook.book.audit import audit_book
from fieldbook.book.store import Book
from fieldbook.errors import BookError, UsageError
from fieldbook.model.item import Item, ItemKind
from fieldbook.model.recorder import RecorderState


def test_a_new_book_is_one_file_with_its_first_entries(tmp_path: Path) -> None:
    path = tmp_path / "job #1?.book"
    with Book.create(path, clock=small.clock(), observer="R. Kell", session_tree=small.tree()) as book:
        first, second = book.entries()
        assert (first.seq, first.kind, first.utc) == (1, "book", "2027-03-04T01:10:00.000Z")
        assert [row[:2] for row in first.body["migrations"]] == [
            ["fieldbook", "m001_book"],
            ["fieldbook", "m002_epoch_pack"],
        ]
        assert (second.kind, second.previous_hash) == ("session", first.hash)
        assert [entry.expected_hash() for entry in (first, second)] == [first.hash, second.hash]
    assert small.names(tmp_path) == [path.name]
    assert audit_book(path) == []


def test_a_book_is_never_overwritten(tmp_path: Path) -> None:
    path = tmp_path / "a.book"
    small.begun(path).close()
    with pytest.raises(UsageError, match="exists already"):
        Book.create(path, clock=small.clock(), observer="R. Kell")
    assert small.names(tmp_path) == ["a.book"]


@pytest.mark.parametrize(
    ("kind", "body", "observer", "words"),
    [
        ("poem", {}, "R. Kell", "no kind of entry"),
        ("remark", {"occupation": None}, "R. Kell", "'text'"),
        ("remark", {"occupation": None, "text": 1.5}, "R. Kell", "cannot be stored"),
        ("remark", {"occupation": True, "text": "x"}, "R. Kell", "'occupation'"),
        ("remark", {"occupation": None, "text": "x"}, "  ", "no observer"),
        ("remark", {"occupation": None, "text": "\udcff"}, "R. Kell", "no text"),
        ("remark", {"occupation": None, "text": "x" * 9_000_000}, "R. Kell", "Shorten"),
        ("decision", {"occupation": 1, "reason": "x"}, "R. Kell", "decides nothing"),
        ("decision", {"occupation": 1, "reason": "x", "initialisation": 2}, "R. Kell", "'used'"),
        ("strike", {"seq": 99, "reason": "x"}, "R. Kell", "no entry 99"),
        ("strike", {"seq": 10**30, "reason": "x"}, "R. Kell", "no entry"),
        ("strike", {"seq": 1, "reason": "x"}, "R. Kell", "cannot be struck"),
        ("strike", {"seq": 3, "reason": "x"}, "R. Kell", "open occupation"),
    ],
)
def test_what_cannot_be_stored_is_refused_and_nothing_is_written(tmp_path, kind, body, observer, words) -> None:
    with small.begun(tmp_path / "a.book") as book:
        before = book.entries()
        with pytest.raises(UsageError) as caught:
            book.append(kind, body, observer)
        assert words in str(caught.value)
        assert caught.value.remedy
        assert book.entries() == before


def test_texts_are_stored_in_nfc_and_hash_alike(tmp_path: Path) -> None:
    with small.begun(tmp_path / "a.book") as book:
        entry = book.append("remark", {"occupation": 1, "text": "Ho\u0308he"}, "R. Ko\u0308ll")
        assert entry.body["text"] == "H\u00f6he"
        assert book.entries(3) == [entry]
        assert entry.observer == "R. K\u00f6ll"


def test_received_bytes_come_back_across_packs_chunks_and_tail(tmp_path: Path) -> None:
    with small.begun(tmp_path / "a.book") as book:
        small.record(book, 1, 1, 50)
        assert book.pack(1) == 3
        small.record(book, 1, 51, 75)
        written = [small.item(number) for number in range(1, 76)]
        assert list(book.items(1)) == written
        assert list(book.items(1, after_id=33)) == written[33:]
        assert list(book.items(1, after_id=70)) == written[70:]
        assert book.received_digest(1) == small.received(1, 75)
        assert book.epochs(1) == [small.epoch(number) for number in range(1, 76)]
        assert [epoch.number for epoch in book.epochs(1, after=73)] == [74, 75]
        state = book.recorder_state()
        assert state is not None
        assert state.epochs == 75
    assert small.names(tmp_path) == ["a.book"]


def test_items_without_times_and_events_come_back_exactly(tmp_path: Path) -> None:
    items = [
        Item(ItemKind.OPENED, "tcp://häng:1".encode(), -5, None),
        Item(ItemKind.BYTES, bytes(range(256)) * 300, None, None),
        Item(ItemKind.BYTES, b"", 2**62, -(2**62)),
        Item(ItemKind.DROPPED, b"17", 1, 2),
        Item(ItemKind.END, b"end of file"),
    ]
    with small.begun(tmp_path / "a.book") as book:
        book.write_burst(1, items)
        assert list(book.items(1)) == items
        book.seal(1)
        assert list(book.items(1)) == items
        book.pack(1)
        assert list(book.items(1)) == items
        assert b"".join(book.received(1)) == items[1].data


def test_large_pieces_are_sealed_on_the_way_and_packed_beside(tmp_path: Path) -> None:
    pieces = [os.urandom(1000) * 65 for _ in range(60)]
    with small.begun(tmp_path / "a.book") as book:
        for piece in pieces:
            book.write_burst(1, [Item(ItemKind.BYTES, piece)])
        chunks = [entry.body for entry in book.entries() if entry.kind == "raw"]
        assert len(chunks) >= 5
        assert all(body["bytes"] < raw.CHUNK_BYTES + 70_000 for body in chunks)
        book.pack(1)
        assert list(book.received(1)) == pieces
    assert (tmp_path / "a.book").stat().st_size < 600_000
    assert audit_book(tmp_path / "a.book") == []


def test_ids_run_on_after_the_tail_was_sealed_and_the_book_reopened(tmp_path: Path) -> None:
    path = small.ended(tmp_path / "a.book")
    with Book.open(path, clock=small.clock(), write=True) as book:
        book.append("occupation", small.occupation_body(3), "R. Kell")
        small.record(book, 3, 1, 20)
        bodies = [entry.body for entry in book.entries() if entry.kind == "raw"]
    ids = [number for body in bodies for number in range(body["first_id"], body["last_id"] + 1)]
    assert ids == sorted(set(ids))
    assert [(body["occupation"], body["chunk"]) for body in bodies] == [
        (1, 1), (1, 2), (1, 3), (2, 1), (2, 2), (3, 1),
    ]  # fmt: skip


def test_an_end_entry_leaves_no_tail(tmp_path: Path) -> None:
    path = tmp_path / "a.book"
    with small.begun(path) as book:
        small.record(book, 1, 1, 5)
        size, sha256 = small.received(1, 5)
        body = {
            "occupation": 1, "by": "operator", "epochs": 5, "received_bytes": size, "received_sha256": sha256,
        }  # fmt: skip
        book.append("end", body, "R. Kell")
    assert audit_book(path) == []


def test_a_burst_that_fails_writes_nothing_and_may_be_tried_again(tmp_path: Path) -> None:
    with small.begun(tmp_path / "a.book") as book:
        small.record(book, 1, 1, 3)
        with pytest.raises(BookError) as caught:  # epoch 3 is there already
            book.write_burst(1, [small.item(4)], [small.epoch(3)], RecorderState(1))
        assert caught.value.code == "append_only"
        small.record(book, 1, 4, 4)
        assert list(book.items(1)) == [small.item(number) for number in (1, 2, 3, 4)]
        assert len(book.epochs(1)) == 4


def test_nothing_is_recorded_into_an_occupation_that_nobody_began(tmp_path: Path) -> None:
    with small.begun(tmp_path / "a.book") as book:
        with pytest.raises(UsageError, match="no occupation 7"):
            book.write_burst(7, [small.item(1)])
        assert list(book.items(7)) == []


def test_replaced_epochs_are_those_of_the_rebuild(tmp_path: Path) -> None:
    path = small.ended(tmp_path / "a.book")
    rows = [small.epoch(number) for number in range(1, 51)]
    rows[3].talker = "GP"
    with Book.open(path, clock=small.clock(), write=True) as book:
        book.replace_epochs(1, rows)
        assert book.epochs(1) == rows
        assert len(book.epochs(2)) == 25
    assert audit_book(path) == []


def test_the_tables_refuse_every_change(tmp_path: Path) -> None:
    path = small.ended(tmp_path / "a.book")
    connection = sqlite3.connect(path, isolation_level=None)
    columns = {
        name: [row[1] for row in connection.execute(f"PRAGMA table_info({name})")]
        for (name,) in connection.execute("SELECT name FROM sqlite_master WHERE type = 'table'").fetchall()
        if name != "recorder_state"
    }
    try:
        for table, names in columns.items():
            if connection.execute(f"SELECT count(*) FROM {table}").fetchone()[0] == 0:
                continue
            for name in names:
                with pytest.raises(sqlite3.IntegrityError):
                    connection.execute(f"UPDATE {table} SET {name} = {name}")
            if table in ("epoch", "epoch_form"):
                continue  # a cache: may be made again
            if table != "epoch_pack":  # a cache too
                with pytest.raises(sqlite3.IntegrityError):
                    connection.execute(f"DELETE FROM {table}")
            for recursive in ("ON", "OFF"):
                connection.execute(f"PRAGMA recursive_triggers = {recursive}")
                with pytest.raises(sqlite3.IntegrityError):
                    connection.execute(f"INSERT OR REPLACE INTO {table} SELECT * FROM {table} LIMIT 1")
    finally:
        connection.close()


def test_a_tail_row_and_a_chunk_leave_only_when_covered(tmp_path: Path) -> None:
    path = tmp_path / "a.book"
    with small.begun(path) as book:
        small.record(book, 1, 1, 25)
        for table in ("raw_tail", "raw_chunk"):
            with pytest.raises(BookError) as caught, book.transaction():
                book._connection.execute(f"DELETE FROM {table}")
            assert caught.value.code == "append_only"


def test_screen_and_recorder_append_at_the_same_time(tmp_path: Path) -> None:
    path = tmp_path / "a.book"
    small.begun(path).close()
    errors: list[BaseException] = []

    def write(name: str) -> None:
        try:
            with Book.open(path, clock=small.clock(), write=True) as book:
                for number in range(40):
                    book.append("remark", {"occupation": 1, "text": f"{name} {number}"}, name)
        except BaseException as error:
            errors.append(error)

    threads = [threading.Thread(target=write, args=(name,)) for name in ("recorder", "screen", "command")]
    for thread in threads:
        thread.start()
    with Book.open(path, clock=small.clock()) as reader:
        seen = [reader.data_version()]
        while any(thread.is_alive() for thread in threads):
            [entry.seq for entry in reader.entries()]
            seen.append(reader.data_version())
        assert len(set(seen)) > 1
        assert len(reader.entries()) == 3 + 120
    assert errors == []
    assert audit_book(path) == []


def test_a_reader_follows_while_a_recorder_seals_and_packs(tmp_path: Path) -> None:
    path = tmp_path / "a.book"
    with small.begun(path) as book, Book.open(path, clock=small.clock()) as reader:
        small.record(book, 1, 1, 30)
        reading = reader.items(1)
        got = [next(reading) for _ in range(25)]
        small.record(book, 1, 31, 70)
        book.pack(1)
        small.record(book, 1, 71, 75)
        got += list(reading)
        assert got == [small.item(number) for number in range(1, 76)]


def test_the_last_writer_leaves_one_plain_file(tmp_path: Path) -> None:
    path = tmp_path / "a.book"
    book = small.begun(path)
    reader = Book.open(path, clock=small.clock())
    assert reader.state().head_seq == 3
    assert not book.close_clean()  # somebody reads
    with Book.open(path, clock=small.clock(), write=True) as again:
        again.append("remark", {"occupation": 1, "text": "x"}, "R. Kell")
    reader.close()
    assert Book.open(path, clock=small.clock(), write=True).close_clean()
    assert small.names(tmp_path) == ["a.book"]
    assert connect.connections_here(path) == 0


def test_a_book_belongs_to_its_thread(tmp_path: Path) -> None:
    failures: list[Exception] = []
    with small.begun(tmp_path / "a.book") as book:

        def use() -> None:
            try:
                book.entries()
            except Exception as error:
                failures.append(error)

        thread = threading.Thread(target=use)
        thread.start()
        thread.join()
    assert len(failures) == 1


@pytest.mark.parametrize(
    ("name", "make", "code"),
    [
        ("missing", lambda path: None, "missing"),
        ("folder", lambda path: path.mkdir(), "not_a_book"),
        ("empty", lambda path: path.touch(), "not_a_book"),
        ("text", lambda path: path.write_bytes(b"$GNGGA\r\n" * 600), "not_a_book"),
        ("short", lambda path: path.write_bytes(b"SQLite format 3\0"), "not_a_book"),
        ("other", lambda path: _sqlite(path, "CREATE TABLE t (a)"), "not_a_book"),
        (
            "bare",
            lambda path: _sqlite(path, f"PRAGMA application_id={migrations.APPLICATION_ID}", "CREATE TABLE t (a)"),
            "schema",
        ),
    ],
)
@pytest.mark.parametrize("write", [False, True])
def test_what_is_no_book_is_said_so(tmp_path: Path, name: str, make, code: str, write: bool) -> None:
    path = tmp_path / name
    make(path)
    before = path.read_bytes() if path.is_file() else None
    with pytest.raises(BookError) as caught:
        Book.open(path, clock=small.clock(), write=write)
    assert (caught.value.code, caught.value.exit_code) == (code, 4)
    assert caught.value.remedy
    assert audit_book(path)
    assert Book.recognises(path) is (code == "schema")
    assert (path.read_bytes() if path.is_file() else None) == before
    assert connect.connections_here(path) == 0


def _sqlite(path: Path, *statements: str) -> None:
    connection = sqlite3.connect(path)
    for statement in statements:
        connection.execute(statement)
    connection.commit()
    connection.close()


def test_a_damaged_book_is_still_recognised_as_one(tmp_path: Path) -> None:
    path = small.ended(tmp_path / "a.book")
    assert Book.recognises(path)
    path.write_bytes(path.read_bytes()[:5000])
    assert Book.recognises(path)
    assert audit_book(path)


@pytest.mark.parametrize("write", [False, True])
def test_a_newer_book_is_refused_untouched(tmp_path: Path, write: bool) -> None:
    path = small.ended(tmp_path / "a.book")
    _sqlite(path, "PRAGMA user_version = 99")
    before = path.read_bytes()
    with pytest.raises(BookError, match="newer") as caught:
        Book.open(path, clock=small.clock(), write=write)
    assert caught.value.code == "newer"
    assert "later" in caught.value.remedy
    assert path.read_bytes() == before


def test_a_book_with_a_foreign_trigger_is_refused(tmp_path: Path) -> None:
    path = small.ended(tmp_path / "a.book")
    _sqlite(path, "CREATE TRIGGER x AFTER INSERT ON entry BEGIN DELETE FROM recorder_state; END")
    with pytest.raises(BookError) as caught:
        Book.open(path, clock=small.clock())
    assert caught.value.code == "schema"
    assert [finding.where for finding in audit_book(path)] == ["schema"]


def test_an_older_book_is_brought_up_to_date_by_a_writer(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = small.ended(tmp_path / "a.book")
    newer = ("m003_more", ("CREATE TABLE more (a INTEGER PRIMARY KEY) STRICT",))
    monkeypatch.setattr(migrations, "MIGRATIONS", [*migrations.MIGRATIONS, newer])
    assert audit_book(path) == []
    with pytest.raises(BookError) as caught:
        Book.open(path, clock=small.clock())
    assert caught.value.code == "older"
    with Book.open(path, clock=small.clock(), write=True) as book:
        last = book.entries()[-1]
        assert last.kind == "migrated"
        assert [row[:2] for row in last.body["migrations"]] == [["fieldbook", "m003_more"]]
        assert len(book.epochs(1)) == 50
    assert audit_book(path) == []
    small.tamper(path, "UPDATE _sqlite_migrations SET applied_at = 'x' WHERE name = 'm003_more'")
    assert [finding.where for finding in audit_book(path)] == ["migrations"]


def test_a_failing_migration_leaves_the_book_as_it_was(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = small.ended(tmp_path / "a.book")
    broken = ("m003_broken", ("CREATE TABLE more (a INTEGER) STRICT", "CREATE TABLE entry (a)"))
    with monkeypatch.context() as patch:
        patch.setattr(migrations, "MIGRATIONS", [*migrations.MIGRATIONS, broken])
        with pytest.raises(BookError):
            Book.open(path, clock=small.clock(), write=True)
    assert audit_book(path) == []


def test_opening_a_book_does_not_load_sqlite_utils(tmp_path: Path) -> None:
    path = small.ended(tmp_path / "a.book")
    code = (
        "import sys, pathlib; from fieldbook.book.store import Book; from fieldbook.clock import SystemClock\n"
        f"book = Book.open(pathlib.Path({str(path)!r}), clock=SystemClock(), write=True)\n"
        "book.epochs(1); list(book.items(1)); book.state(); book.close()\n"
        "print([name for name in ('sqlite_utils', 'numpy', 'textual') if name in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
