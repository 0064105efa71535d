"""Targets for hostile books: bytes of the file edited, values edited through SQL as a forger would, epoch packs.

Whatever the file: opening and reading raise nothing but a FieldbookError, the audit raises nothing, and a book without
findings reads without an error. Each runs on a copy in memory.
"""

from __future__ import annotations

import hashlib
import json
import lzma
import shutil
import sqlite3
from contextlib import closing, suppress
from functools import cache
from pathlib import Path
from typing import Any

from fieldbook.book import epoch_packs, lines
from fieldbook.book.audit import audit_book
from fieldbook.book.store import Book
from fieldbook.book.wal import wal_problem
from fieldbook.clock import FakeClock
from fieldbook.errors import FieldbookError
from fieldbook.model.entry import GENESIS, entry_hash
from fieldbook.model.epoch import Satellite
from fieldbook.model.item import Item, ItemKind
from fieldbook.model.recorder import RecorderState
from fieldbook.nmea.decoder import Decoder
from fieldbook.settings.session import load_session

from .edits import edited, script_of
from .target import Target, kept, workshop

_SAMPLE = Path(__file__).parents[2] / "sample_sessions" / "kestrel-ridge-1"
_PARTS = ("", "-wal")
_START_MS = 1_804_122_600_000
_COLUMNS = {
    "entry": ("seq", "utc", "kind", "body", "observer", "previous_hash", "hash"),
    "raw_tail": ("id", "occupation", "kind", "monotonic_ms", "utc_ms", "data"),
    "raw_chunk": ("occupation", "chunk", "first_id", "last_id", "items", "bytes", "sha256", "data"),
    "raw_pack": ("occupation", "first_chunk", "last_chunk", "codec", "data"),
    "epoch_form": ("form", "source", "talker", "code", "latitude_decimals", "quality", "station", "datum", "flags"),
    "epoch": ("number", "form", "day", "time_ms", "latitude_offset_e8min", "altitude_e5m", "hdop_milli", "age_ms"),
    "epoch_pack": ("occupation", "first", "last", "codec", "count", "sha256", "data"),
    "recorder_state": ("id", "state"),
}
_KEYS = {
    "raw_chunk": ("occupation", "chunk"),
    "raw_pack": ("occupation", "first_chunk"),
    "epoch_form": ("occupation", "form"),
    "epoch": ("occupation", "number"),
}  # the others have a rowid
_INTEGERS = (0, 1, -1, 2, 3, 2**31, 2**62, 2**63 - 1, -(2**63), 65536, 999)


def _record(book: Book, occupation: int, text: list[bytes], *, seal_at: int) -> int:
    body = {"occupation": occupation, "mark": "KR-07", "session": load_session(_SAMPLE / "session.toml").tree}
    book.append("occupation", {**body, "link": "file:receiver.nmea", "simulated": False}, "R. Kell")
    book.append("recorder", {"occupation": occupation, "state": "running", "program": "0"}, "R. Kell")
    decoder, count = Decoder(), 0
    for number, line in enumerate(text):
        item = Item(ItemKind.BYTES, line, 100 * number, _START_MS + 100 * number)
        epochs = decoder.feed(item) + (decoder.finish() if number + 1 == len(text) else [])
        count += len(epochs)
        book.write_burst(occupation, [item], epochs, RecorderState(occupation, epochs=count))
        if number % seal_at == seal_at - 1:
            book.seal(occupation)
    return count


def _end(book: Book, occupation: int, epochs: int) -> None:
    book.append("recorder", {"occupation": occupation, "state": "closed", "program": "0"}, "R. Kell")
    book.seal(occupation)
    size, sha256 = book.received_digest(occupation)
    body = {"occupation": occupation, "by": "end of file", "epochs": epochs}
    book.append("end", {**body, "received_bytes": size, "received_sha256": sha256}, "R. Kell")


@cache
def _bases() -> list[Path]:
    """Three sound books: ended and packed; ended, not packed; being recorded, with a -wal."""
    with (_SAMPLE / "receiver.nmea").open("rb") as file:
        text = file.read(12000).splitlines(keepends=True)[:-1]
    bases = []
    for name in ("packed", "ended", "open"):
        path = workshop() / f"base-{name}.book"
        with Book.create(path, clock=FakeClock(1000, _START_MS), observer="R. Kell") as book:
            epochs = _record(book, 1, text, seal_at=30)
            if name != "open":
                _end(book, 1, epochs)
            if name == "packed":
                book.pack(1)
            book.append("remark", {"occupation": 1, "text": "wind"}, "R. Kell")
            if name == "open":
                bases.append(workshop() / "base-wal.book")
                for part in _PARTS:
                    shutil.copyfile(f"{path}{part}", f"{bases[-1]}{part}")
        bases.append(path)
    for base in bases:
        copy = _copy(base)
        findings = [one.text for one in audit_book(copy)]
        assert not findings or base.name == "base-open.book", findings  # its recorder says it is still running
    return bases


def _copy(base: Path) -> Path:
    path = workshop() / "under-attack.book"
    for part in (*_PARTS, "-shm", "-journal"):
        Path(f"{path}{part}").unlink(missing_ok=True)
    for part in _PARTS:
        if Path(f"{base}{part}").exists():
            shutil.copyfile(f"{base}{part}", f"{path}{part}")
    return path


def _attempt(what: Any, *arguments: Any) -> bool:
    try:
        what(*arguments)
    except FieldbookError:
        return False
    return True


def _read_all(path: Path, *, write: bool = False) -> bool:
    """Everything a reader asks of a book; True if nothing was refused."""
    try:
        book = Book.open(path, clock=FakeClock(0, _START_MS), write=write)
    except FieldbookError:
        return False
    good = True
    with book:
        good &= _attempt(book.entries)
        good &= _attempt(book.state)
        _attempt(book.recorder_state)  # a heartbeat that the audit does not cover; see test_regressions
        good &= _attempt(getattr, book, "copied_without_wal")
        for occupation in (1, 2):
            good &= _attempt(book.epochs, occupation)
            good &= _attempt(book.epochs, occupation, 3, 4)
            good &= _attempt(lambda number: list(book.items(number)), occupation)
            good &= _attempt(book.received_digest, occupation)
        if write:
            _attempt(book.append, "remark", {"occupation": 1, "text": "x"}, "R. Kell")
            _attempt(book.write_burst, 1, [Item(ItemKind.BYTES, b"x")])
            _attempt(book.seal, 1)
            _attempt(book.pack, 1)
    return good


def _judge(path: Path, *, write: bool) -> None:
    findings = audit_book(path, time_limit_s=20.0)
    for one in findings:
        assert one.text.isprintable() or "\n" in one.text, "a finding must not steer a terminal"
    good = _read_all(path)
    Book.recognises(path)
    if not findings:
        assert good, "no findings, but it cannot be read"
    if write:
        _read_all(path, write=True)


def book_bytes(data: bytes) -> None:
    """Any bytes of the file (or its -wal) changed."""
    choice = data[:1].ljust(1, b"\0")[0]
    base = _bases()[choice % 4]
    path = _copy(base)
    wal = Path(f"{path}-wal")
    target = wal if choice & 64 and wal.exists() else path
    target.write_bytes(edited(target.read_bytes(), data[1:]))
    _judge(path, write=choice >= 224)


def _value(old: Any, kind: int, payload: bytes) -> Any:
    match kind % 8:
        case 0:
            return _INTEGERS[payload[0] % len(_INTEGERS)] if payload else None
        case 1:
            return None
        case 2:
            return payload.decode("utf-8", "replace")
        case 3:
            return payload
        case 4 if isinstance(old, int):
            return old + (payload[0] if payload else 0) - 128
        case 5 if isinstance(old, str):
            return payload.decode("utf-8", "replace").join(old.rsplit(old[len(old) // 2 :][:4] or "x", 1))
        case _ if isinstance(old, bytes):
            return edited(old, payload)
        case _ if isinstance(old, str):
            return edited(old.encode(), payload).decode("utf-8", "replace")
    return old


def _forge(connection: sqlite3.Connection, script: bytes) -> None:
    tables, position = list(_COLUMNS), 0
    while position + 6 <= len(script):
        table_at, column_at, row_at, kind, length = script[position : position + 5]
        payload = script[position + 5 : position + 5 + length]
        position += 5 + length
        table = tables[table_at % len(tables)]
        column = _COLUMNS[table][column_at % len(_COLUMNS[table])]
        keys = _KEYS.get(table, ("rowid",))
        with suppress(sqlite3.Error, OverflowError, UnicodeError):  # STRICT refuses what does not fit
            named = ", ".join((column, *keys))
            row = connection.execute(f"SELECT {named} FROM {table} LIMIT 1 OFFSET {row_at % 40}").fetchone()
            if row is not None:
                where = " AND ".join(f"{key} = ?" for key in keys)
                values = (_value(row[0], kind, payload), *row[1:])
                connection.execute(f"UPDATE {table} SET {column} = ? WHERE {where}", values)


def _reseal(connection: sqlite3.Connection) -> None:
    """A forger's chain: every hash made again, epoch packs too."""
    previous = GENESIS
    for seq, utc, kind, body, observer in connection.execute(
        "SELECT seq, utc, kind, body, observer FROM entry ORDER BY seq"
    ).fetchall():
        new = entry_hash(seq, utc, kind, body, observer, previous)
        connection.execute("UPDATE entry SET previous_hash = ?, hash = ? WHERE seq = ?", (previous, new, seq))
        previous = new
    for number, data in connection.execute("SELECT rowid, data FROM epoch_pack").fetchall():
        connection.execute(
            "UPDATE epoch_pack SET sha256 = ? WHERE rowid = ?", (hashlib.sha256(data).hexdigest(), number)
        )


def book_values(data: bytes) -> None:
    """Values changed by somebody who knows SQLite, drops the triggers, and may forge the chain anew."""
    choice = data[:1].ljust(1, b"\0")[0]
    path = _copy(_bases()[choice % 4])
    with closing(sqlite3.connect(path, isolation_level=None)) as connection:
        connection.execute("PRAGMA synchronous = OFF")
        triggers = connection.execute("SELECT name, sql FROM sqlite_master WHERE type = 'trigger'").fetchall()
        for name, _ in triggers:
            connection.execute(f"DROP TRIGGER {name}")
        _forge(connection, data[1:])
        if choice & 32:
            with suppress(sqlite3.Error, UnicodeError):
                _reseal(connection)
        for _, text in triggers:
            connection.execute(text)
    _judge(path, write=choice >= 224)


def heartbeat(data: bytes) -> None:
    """A state whose JSON is read back as the same state, or a ValueError; `status` can show what was let in."""
    try:
        state = RecorderState.from_json(data.decode("utf-8", "replace"))
    except ValueError:
        return
    except RecursionError:  # caught by the book's reader
        return
    assert RecorderState.from_json(state.to_json()) == state
    json.dumps(vars(state), default=vars_of, allow_nan=False)


def vars_of(value: Any) -> Any:
    """A satellite as JSON."""
    return {name: getattr(value, name) for name in value.__slots__}


def wal_bytes(data: bytes) -> None:
    """A -wal of any bytes: a sentence or none; what is cut off at its end is no damage unless two commits are left out."""
    choice = data[:1].ljust(1, b"\0")[0]
    sound = Path(f"{_bases()[2]}-wal").read_bytes()
    content = data[1:] if choice & 1 else edited(sound, data[1:])
    path = workshop() / "wal-only.book"
    Path(f"{path}-wal").write_bytes(content)
    assert wal_problem(path, 0).isprintable()
    Path(f"{path}-wal").write_bytes(sound[: len(sound) - int.from_bytes(data[:3], "big") % len(sound)])
    assert wal_problem(path, 0) == ""


@cache
def _plain_pack() -> bytes:
    with closing(sqlite3.connect(_bases()[0])) as connection:
        data = connection.execute("SELECT data FROM epoch_pack").fetchone()[0]
    return lzma.decompress(data, lzma.FORMAT_RAW, filters=epoch_packs._FILTERS)


def epoch_pack(data: bytes) -> None:
    """A pack whose hash fits and whose content is anything: epochs, or a ValueError."""
    choice = data[:1].ljust(1, b"\0")[0]
    count = len(epoch_packs.PLAIN_FIELDS) and (choice & 31) + 1
    plain = edited(_plain_pack(), data[1:]) if choice & 32 else data[1:]
    if choice & 64 and b"\n" in plain:  # a head of one's own, its length right
        head, _, body = plain.partition(b"\n")
        plain = len(head).to_bytes(4, "big") + head + body
    stored = lzma.compress(plain, lzma.FORMAT_RAW, filters=epoch_packs._FILTERS)
    if choice & 128:
        stored = data[1:]
    pack = epoch_packs.Pack(1, count, epoch_packs.CODEC, count, hashlib.sha256(stored).hexdigest(), stored)
    try:
        piece = epoch_packs.unpacked(pack)
    except ValueError:
        return
    assert len(epoch_packs.epochs_of(piece)) == count == piece.count


def pressed_lines(data: bytes) -> None:
    """Any bytes come back as they were; a piece that is anything makes exactly the bytes asked for, or a ValueError."""
    choice = data[:1].ljust(1, b"\0")[0]
    content = data[1:]
    if choice & 1:
        assert lines.unpressed(lines.pressed(content), len(content)) == content
        return
    makes = (choice >> 2) * 40
    if choice & 2:
        makes, content = len(_some_lines()), edited(lines._folded(_some_lines()), content)
    stored = lzma.compress(content, lzma.FORMAT_RAW, filters=lines._FILTERS)
    piece = lines._SIZES.pack(lines.SMALL, len(stored), makes) + stored
    try:
        plain = lines.unpressed(piece, makes)
    except ValueError:
        return
    assert len(plain) == makes


@cache
def _some_lines() -> bytes:
    with (_SAMPLE / "receiver.nmea").open("rb") as file:
        return file.read(9000)


def _pressed_seeds() -> list[bytes]:
    return [
        b"\x01" + _some_lines()[:3000],
        b"\x02",
        b"\x02" + script_of((3, 2, 9, 0)),
        b"\xf0" + lines._folded(_some_lines()[:2000]),
    ]


def _pack_seeds() -> list[bytes]:
    size = int.from_bytes(_plain_pack()[:4], "big")
    head, body = _plain_pack()[4 : 4 + size], _plain_pack()[4 + size :]
    with closing(sqlite3.connect(_bases()[0])) as connection:
        count = connection.execute("SELECT count FROM epoch_pack").fetchone()[0]
    assert count <= 32
    tree = json.loads(head)
    again = json.dumps({"columns": tree["columns"], "forms": tree["forms"]}, separators=(",", ":")).encode()
    own = count - 1
    return [bytes([own | 32]), bytes([own | 64]) + again + b"\n" + body, bytes([own | 32]) + script_of((30, 2, 9, 0))]


def _byte_seeds() -> list[bytes]:
    return [
        bytes([n]) + script_of((200 * n + 17, what, 3 * n, 40)) for n, what in enumerate((0, 2, 4, 5, 6, 7, 64))
    ] + [b"\xe3", b"\x43"]


def _heartbeat_seeds() -> list[bytes]:
    full = RecorderState(1, epochs=9, sky=[Satellite("GPS", 7, 45, 120, 41.5, True)], counters={"good": 3}, hdop=0.7)
    return [full.to_json().encode(), RecorderState(2).to_json(tail={"first_id": 1}).encode(), b"{}", b"[]"]


def _value_seeds() -> list[bytes]:
    text = b'{"occupation":1,"text":"\\u001b[2J"}'
    return [
        bytes([base]) + bytes([table, column, row, kind, len(payload)]) + payload
        for base, table, column, row, kind, payload in (
            (0, 6, 6, 0, 6, script_of((9, 0, 1, 1))), (33, 0, 3, 9, 2, text), (2, 1, 2, 0, 2, b"X"), (32, 6, 4, 0, 0, b"\x06"),
            (35, 3, 4, 0, 6, script_of((50, 2, 0, 0))), (225, 5, 3, 0, 0, b"\x08"), (1, 7, 1, 0, 2, b'{"a":[1.5]}'), (34, 0, 1, 3, 2, b"9999-99-99"),
        )
    ]  # fmt: skip


_WORDS = (
    b"null",
    b"true",
    b"[]",
    b"{}",
    b'"forms":[',
    b'"columns":[',
    b"1e400",
    b"NaN",
    b"9" * 25,
    b"-1",
    b'"\\ud800"',
    b"9223372036854775808",
)
TARGETS = [
    Target("book_bytes", "book, bytes changed", book_bytes, lambda: _byte_seeds() + kept("book_bytes"), smoke=60, most_bytes=97),
    Target("book_values", "book, values forged", book_values, lambda: _value_seeds() + kept("book_values"), smoke=60, words=_WORDS, most_bytes=400),
    Target("heartbeat", "what the recorder says of itself", heartbeat, lambda: _heartbeat_seeds() + kept("heartbeat"), words=_WORDS, most_bytes=4096),
    Target("wal_bytes", "-wal, bytes changed", wal_bytes, lambda: [bytes([n]) + script_of((4000 * n + 60, n, 3, 1)) for n in range(8)] + kept("wal_bytes"), smoke=25, most_bytes=97),
    Target("pressed_lines", "columns of received lines", pressed_lines, lambda: _pressed_seeds() + kept("pressed_lines"), smoke=800, most_bytes=4096),
    Target("epoch_pack", "epoch pack", epoch_pack, lambda: _pack_seeds() + kept("epoch_pack"), smoke=800, words=_WORDS, most_bytes=4096),
]  # fmt: skip
