"""Books made to harm whoever opens them: refused or found, in little time and memory, and nothing of ours is touched."""

from __future__ import annotations

import contextlib
import hashlib
import io
import json
import lzma
import os
import shutil
import sqlite3
import struct
import time
import tracemalloc
import zlib
from pathlib import Path

import pytest

from fieldbook.book import epoch_packs, lines, raw
from fieldbook.book.audit import audit_book
from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.commands import run
from fieldbook.errors import BookError
from fieldbook.model.epoch import Satellite
from fieldbook.model.recorder import RecorderState

from .forger import change, forging, reseal, seqs
from .victims import holds, made

READING = (
    ("status",),
    ("status", "--json"),
    ("reduce", "--json"),
    ("marks", "list"),
    ("verify",),
    ("watch", "--count", "1"),
)


@pytest.fixture(scope="module")
def packed(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return made("packed", tmp_path_factory.mktemp("hostile"))


@pytest.fixture
def book(packed: Path, tmp_path: Path) -> Path:
    return Path(shutil.copy(packed, tmp_path / "hostile.book"))


def _said(book: Path, command: tuple[str, ...]) -> tuple[int, str]:
    out = io.StringIO()
    place = 2 if command[0] == "marks" else 1
    with contextlib.redirect_stdout(out), contextlib.redirect_stderr(out):
        code = run([*command[:place], str(book), *command[place:]])
    return code, out.getvalue()


def _hot_journal(book: Path, super_journal: Path) -> None:
    """A journal of a transaction that was cut off, which names another file as SQLite does for several databases."""
    writer = sqlite3.connect(book, isolation_level=None)
    for statement in ("PRAGMA cache_size = 1", "BEGIN IMMEDIATE", "CREATE TABLE other (a)"):
        writer.execute(statement)
    for _ in range(50):
        writer.execute("INSERT INTO other VALUES (zeroblob(900))")
    cut_off, journal = book.read_bytes(), Path(f"{book}-journal").read_bytes()
    writer.execute("ROLLBACK")
    writer.close()
    book.write_bytes(cut_off)
    name = str(super_journal).encode()
    total = sum(struct.unpack(f"{len(name)}b", name)) & 0xFFFFFFFF
    locked = struct.pack(">I", 0x40000000 // 1024 + 1)
    end = locked + name + struct.pack(">II", len(name), total) + bytes.fromhex("d9d505f920a163d7")
    Path(f"{book}-journal").write_bytes(journal + end)


def test_sqlite_deletes_the_file_that_a_journal_names(book: Path, tmp_path: Path) -> None:
    """Why it is refused. If this fails, SQLite has become more careful."""
    precious = tmp_path / "precious.txt"
    precious.write_text("mine")
    _hot_journal(book, precious)
    with contextlib.closing(sqlite3.connect(book)) as connection:
        connection.execute("SELECT count(*) FROM sqlite_master").fetchone()
    assert not precious.exists()


@pytest.mark.parametrize("command", READING)
def test_a_journal_that_would_delete_a_file_of_ours_is_refused(
    book: Path, tmp_path: Path, command: tuple[str, ...]
) -> None:
    precious = tmp_path / "precious.txt"
    precious.write_text("mine")
    _hot_journal(book, precious)
    code, out = _said(book, command)
    assert code == (1 if command[0] == "verify" else 4)
    assert "names another file" in out
    with pytest.raises(BookError) as caught:
        Book.open(book, clock=SystemClock(), write=True)
    assert caught.value.code == "hostile"
    assert precious.read_text() == "mine"


@pytest.mark.parametrize("ending", ["-wal", "-shm", "-journal", ".lock"])
def test_links_beside_a_book_lead_nowhere(book: Path, tmp_path: Path, ending: str) -> None:
    precious = tmp_path / "precious.txt"
    precious.write_bytes(b"mine")
    Path(f"{book}{ending}").unlink(missing_ok=True)
    Path(f"{book}{ending}").symlink_to(precious)
    for write in (False, True):
        with pytest.raises(BookError) as caught:
            Book.open(book, clock=SystemClock(), write=write)
        assert caught.value.code == "hostile"
    assert precious.read_bytes() == b"mine"
    assert any("link to another file" in line for line in holds(book)[1])


BOMB = "WITH RECURSIVE n(a) AS (SELECT 1 UNION ALL SELECT a + 1 FROM n WHERE a < 1000000000)"
SCHEMAS = {
    "view named like a table": "ALTER TABLE entry RENAME TO old; CREATE VIEW entry AS SELECT * FROM old",
    "view that never ends": f"CREATE VIEW more AS {BOMB} SELECT max(a) FROM n",
    "trigger": "CREATE TRIGGER more AFTER INSERT ON entry BEGIN DELETE FROM epoch; END",
    "trigger that never ends": f"CREATE TRIGGER more AFTER INSERT ON entry BEGIN INSERT INTO epoch_form SELECT * FROM ({BOMB} SELECT a, a, '', '', '', 1, 1, 1, 1, 1, 1, '', '', 1 FROM n); END",
    "check that takes time": "DROP TABLE recorder_state; CREATE TABLE recorder_state (id INTEGER PRIMARY KEY CHECK (length(hex(zeroblob(30000000))) > 0), state TEXT NOT NULL) STRICT; INSERT INTO recorder_state VALUES (1, ''), (2, ''), (3, ''), (4, ''), (5, ''), (6, '')",
    "generated column": "ALTER TABLE epoch_pack ADD COLUMN more INTEGER AS (length(hex(zeroblob(30000000)))) VIRTUAL",
    "without rowid": "DROP TABLE recorder_state; CREATE TABLE recorder_state (id INTEGER PRIMARY KEY CHECK (id = 1), state TEXT NOT NULL) STRICT, WITHOUT ROWID",
    "not strict": "DROP TABLE recorder_state; CREATE TABLE recorder_state (id INTEGER PRIMARY KEY CHECK (id = 1), state TEXT NOT NULL)",
    "virtual table": "CREATE VIRTUAL TABLE more USING fts5(a)",
    "index on an expression": "CREATE INDEX more ON entry (length(hex(zeroblob(30000000))))",
    "statistics": "ANALYZE",
    "name that steers a terminal": 'CREATE TABLE "\x1b[2J\x1b]0;x\x07" (a)',
}  # fmt: skip


@pytest.mark.parametrize("script", SCHEMAS.values(), ids=SCHEMAS)
def test_other_tables_triggers_and_views_are_refused_before_they_do_anything(book: Path, script: str) -> None:
    with contextlib.closing(sqlite3.connect(book, isolation_level=None)) as connection:
        connection.execute("PRAGMA writable_schema = OFF")
        connection.executescript(script)
    before = hashlib.sha256(book.read_bytes()).hexdigest()
    began = time.perf_counter()
    findings = audit_book(book)
    assert {finding.where for finding in findings} == {"schema"}
    assert all(finding.text.isprintable() for finding in findings)
    for write in (False, True):
        with pytest.raises(BookError) as caught:
            Book.open(book, clock=SystemClock(), write=write)
        assert caught.value.code == "schema"
    assert time.perf_counter() - began < 2.0, "nothing of the foreign schema may run"
    assert hashlib.sha256(book.read_bytes()).hexdigest() == before
    for command in READING:
        code, out = _said(book, command)
        assert code == (1 if command[0] == "verify" else 4)
        assert "\x1b" not in out


def test_two_tables_on_the_same_pages(book: Path) -> None:
    """The texts of the schema are ours; where the tables begin is not."""
    with contextlib.closing(sqlite3.connect(book, isolation_level=None)) as connection:
        connection.execute("PRAGMA writable_schema = ON")
        connection.execute(
            "UPDATE sqlite_master SET rootpage = (SELECT rootpage FROM sqlite_master WHERE name = 'epoch_pack')"
            " WHERE name = 'raw_tail'"
        )
    assert any("SQLite:" in line for line in holds(book)[1])


@pytest.mark.parametrize(("place", "value"), [(32, 3), (32, 10**6), (36, 7), (28, 2**31 - 1)])
def test_a_corrupt_freelist_or_size(book: Path, place: int, value: int) -> None:
    data = bytearray(book.read_bytes())
    data[place : place + 4] = struct.pack(">I", value)
    book.write_bytes(data)
    assert not holds(book)[0]


def _raw_bomb(size: int) -> bytes:
    """The smallest stored bytes that state and make `size` bytes: pieces of empty lines, zeros compressed."""
    stored = []
    while size > 0:
        makes = min(size, lines.PIECE_BYTES)
        folded = lines._folded(bytes(makes))
        data = lzma.compress(folded, lzma.FORMAT_RAW, filters=lines._FILTERS)
        stored.append(lines._SIZES.pack(lines.SMALL, len(data), makes) + data)
        size -= makes
    return b"".join(stored)


@pytest.mark.parametrize("claimed", [raw.LARGE_CHUNK_BYTES, 60 * 1024 * 1024, 2**31 - 1, 2**61])
def test_a_pack_that_inflates_to_much_more(book: Path, claimed: int) -> None:
    """Stated sizes are believed up to 64 MiB a piece; memory stays near that, whatever is claimed."""
    data = _raw_bomb(min(claimed, 61 * 1024 * 1024))
    with forging(book) as db:
        hashes = {"stored_sha256": "0" * 64, "sha256": "0" * 64}
        change(db, seqs(db, "raw")[0], lambda body: body.update(bytes=claimed, **hashes))
        change(db, seqs(db, "packed")[0], lambda body: body.update(bytes=len(data), sha256=raw.sha256_of(data)))
        db.execute("UPDATE raw_pack SET data = ?", (data,))
        reseal(db)
    tracemalloc.start()
    try:
        good, _ = holds(book)
        peak = tracemalloc.get_traced_memory()[1]
    finally:
        tracemalloc.stop()
    assert not good
    assert peak < 250 * 1024 * 1024


@pytest.mark.parametrize(
    "bomb", [zlib.compress(bytes(10**8)), lzma.compress(bytes(10**8), lzma.FORMAT_RAW, filters=epoch_packs._FILTERS)]
)
def test_an_epoch_pack_that_inflates_to_much_more(book: Path, bomb: bytes) -> None:
    with forging(book) as db:
        db.execute("UPDATE epoch_pack SET sha256 = ?, data = ?", (raw.sha256_of(bomb), bomb))
    assert not holds(book)[0]


@pytest.mark.parametrize("text", ["[" * 200_000, '{"a":' * 100_000, "9" * 100_000, '"\\ud800"', "NaN", "1e400", ""])
def test_a_heartbeat_that_is_a_bomb(book: Path, text: str) -> None:
    with forging(book) as db:
        db.execute("UPDATE recorder_state SET state = ?", (text,))
    for command in READING:
        code, out = _said(book, command)
        assert code == (1 if command[0] == "verify" else 0), out
    assert "cannot be read" in _said(book, ("verify",))[1]


VALUES = ("x", -1, 2**70, 1.5, True, None, [], {}, ["x"], {"a": "b"}, [{"system": "GPS"}], "\x1b[2J", 10**400)


KEYS = tuple(json.loads(RecorderState(1).to_json()))


@pytest.mark.parametrize("key", KEYS)
def test_values_that_no_recorder_writes_are_no_heartbeat(key: str) -> None:
    """The row is covered by no hash, so it is the place for a forger."""
    sound = json.loads(RecorderState(1, sky=[Satellite("GPS", 7, 45, 120, 41.0, True)]).to_json())
    assert RecorderState.from_json(json.dumps(sound)).to_json() == json.dumps(sound)
    kept = 0
    for value in VALUES:
        with contextlib.suppress(ValueError):
            state = RecorderState.from_json(json.dumps({**sound, key: value}))
            assert json.loads(state.to_json())[key] == value
            kept += 1
    assert kept < 5
    for text in ("NaN", "Infinity", "-Infinity", "1e999"):
        with pytest.raises(ValueError):
            RecorderState.from_json(json.dumps({**sound, key: "?"}).replace('"?"', text))


@pytest.mark.parametrize("value", [2**62, "\x1b[2J"])
def test_a_heartbeat_of_such_values_leaves_status_calm(book: Path, value: object) -> None:
    with Book.open(book, clock=SystemClock()) as opened:
        state = opened.recorder_state()
    assert state is not None
    sound = json.loads(state.to_json())
    for key in KEYS:
        with forging(book) as db:
            db.execute("UPDATE recorder_state SET state = ?", (json.dumps({**sound, key: value}),))
        code, out = _said(book, ("status",))
        assert code == 0, (key, out)
        assert "\x1b" not in out


@pytest.mark.parametrize("what", ["fifo", "folder", "device", "sparse"])
def test_what_is_no_regular_file_or_hardly_one(tmp_path: Path, packed: Path, what: str) -> None:
    path = tmp_path / "odd.book"
    if what == "fifo":
        os.mkfifo(path)
    elif what == "folder":
        path.mkdir()
    elif what == "device":
        path.symlink_to("/dev/zero")
    else:
        shutil.copy(packed, path)
        with path.open("r+b") as file:
            file.truncate(2**36)
    began = time.perf_counter()
    code, out = _said(path, ("verify",))
    assert code == (0 if what == "sparse" else 1), out  # what stands behind the last page is no part of the book
    assert time.perf_counter() - began < 5


def test_an_audit_ends_in_time_however_much_there_is_to_inflate(book: Path) -> None:
    findings = audit_book(book, time_limit_s=0.0)
    assert [finding.text for finding in findings if "longer to read than" in finding.text]
