"""Register: create, open, append, keep and give back evidence.

One connection, one thread, short transactions. What holds is folded from the entries (`fold`); evidence is kept under the
SHA-256 of its bytes, which the entries name, so the chain covers it too.
"""

from __future__ import annotations

import hashlib
import json
import uuid
import zlib
from collections.abc import Iterable, Iterator
from contextlib import contextmanager
from pathlib import Path
from types import TracebackType
from typing import Any

from fieldbook import __version__
from fieldbook.book.begin import give_name
from fieldbook.book.connect import printable
from fieldbook.book.transactions import immediate
from fieldbook.clock import Clock, utc_text
from fieldbook.errors import BookError, UsageError
from fieldbook.model.canonical import Tree, canonical_json
from fieldbook.model.entry import GENESIS, Entry, entry_hash

from . import connect, migrations
from .fold import RegisterState
from .kinds import MAX_BODY_BYTES, STRIKABLE, checked_body

FORMAT = 1
MAX_CONTENT_BYTES = 32 * 1024 * 1024


class Register:
    """One open register. Use `create` or `open`; close it, or use it in a `with` statement."""

    def __init__(self, path: Path, connection: connect.Connection, clock: Clock, *, write: bool) -> None:
        self.path = path
        self.writable = write
        self._connection = connection
        self._clock = clock
        self._state = RegisterState()

    @classmethod
    def create(cls, path: Path, *, clock: Clock, by: str) -> Register:
        """Begin a register and open it for writing; the file appears under its name only when it is complete.

        Raises:
            UsageError: the path exists, or nobody is named.
            BookError: the file cannot be made.
        """
        if path.exists() or path.is_symlink():
            raise UsageError(f"{path} exists already.", "Choose another name; a register is never overwritten.")
        part = path.with_name(f".{path.name}.{uuid.uuid4().hex}.part")
        with connect.register_errors(path):
            try:
                connection = connect.open_writer(part, create=True)
                try:
                    _begin(connection, clock, by)
                finally:
                    connection.close()
                give_name(part, path)
            finally:
                part.unlink(missing_ok=True)
        return cls.open(path, clock=clock, write=True)

    @classmethod
    def open(cls, path: Path, *, clock: Clock, write: bool = False) -> Register:
        """Open a register, for reading unless `write`. A writer brings an older one up to date.

        Raises:
            BookError: code "missing", "no_register", "newer", "older", "schema", "damaged", "busy", "read_only".
        """
        connection = connect.open_writer(path) if write else connect.open_reader(path)
        try:
            with connect.register_errors(path):
                found = connect.check_identity(connection, path)
                register = cls(path, connection, clock, write=write)
                if found < migrations.version():
                    register._upgrade(found)
        except BaseException:
            connection.close()
            raise
        return register

    @staticmethod
    def recognises(path: Path) -> bool:
        """Whether a file says that it is a register."""
        try:
            connection = connect.open_reader(path)
        except BookError:
            return False
        try:
            with connect.register_errors(path):
                found = connection.execute("PRAGMA application_id").fetchone()[0]
                return bool(found == migrations.APPLICATION_ID)
        except BookError:
            return False
        finally:
            connection.close()

    def _upgrade(self, found: int) -> None:
        if not self.writable:
            raise BookError(
                f"{self.path} was written by an older Fieldbook.",
                "Any command that writes to it brings it up to date; nothing is lost.",
                code="older",
            )
        with self.transaction():
            rows = _migrate(self._connection, found, utc_text(self._clock.utc_ms()))
            self.append("migrated", {"migrations": rows}, "fieldbook " + __version__)

    def close(self) -> None:
        """Close; what was committed is in the one file."""
        self._connection.close()

    def __enter__(self) -> Register:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    @contextmanager
    def transaction(self) -> Iterator[None]:
        """One write transaction: all of it is committed, or nothing. Inside another one it is part of that.

        Raises:
            BookError: busy, read-only, disk full.
        """
        if not self.writable:
            raise BookError(f"{self.path} is open for reading only.", "Open it for writing.", code="read_only")
        with connect.register_errors(self.path), immediate(self._connection, self._forget):
            yield

    def _forget(self) -> None:
        self._state = RegisterState()  # it may hold entries that were not committed

    # -- entries -----------------------------------------------------------------------------------------------

    def append(self, kind: str, body: Tree, by: str) -> Entry:
        """Append one entry, durably.

        Raises:
            UsageError: it cannot be stored, nobody is named, or what a strike names cannot be struck.
            BookError: busy, read-only, disk full.
        """
        with self.transaction():
            if kind == "strike":
                self._check_strike(body["seq"])
            return _insert(self._connection, kind, body, by, utc_text(self._clock.utc_ms()))

    def _check_strike(self, seq: int) -> None:
        state = self.state()
        entry = next((item for item in state.entries if item.seq == seq), None)
        if entry is None:
            raise UsageError(f"There is no entry {seq} in {self.path}.", f"Entries run from 1 to {state.head_seq}.")
        if entry.kind not in STRIKABLE:
            raise UsageError(
                f"Entry {seq} is '{entry.kind}' and cannot be struck.",
                f"Only decisions can: {', '.join(STRIKABLE)}.",
                code="not_strikable",
            )
        if seq in state.struck:
            raise UsageError(
                f"Entry {seq} was struck by entry {state.struck[seq].seq} already.",
                "Strike that strike if it was wrong.",
                code="struck_already",
            )

    def entries(self, after_seq: int = 0) -> list[Entry]:
        """Entries after a seq, in order.

        Raises:
            BookError: damaged.
        """
        with connect.register_errors(self.path):
            return list(read_entries(self._connection, after_seq))

    def state(self) -> RegisterState:
        """What the entries say. Treat it as read-only; only what is new since the last call is folded.

        Raises:
            BookError: an entry is damaged.
        """
        with connect.register_errors(self.path):
            for entry in read_entries(self._connection, self._state.head_seq):
                try:
                    self._state.apply(entry)
                except (LookupError, TypeError, ValueError, AttributeError) as error:
                    raise _damaged(entry.seq, f"its body is not that of '{entry.kind}'") from error
        return self._state

    # -- evidence ----------------------------------------------------------------------------------------------

    def keep(self, data: bytes) -> str:
        """Keep bytes under their SHA-256; the same bytes are kept once. Called inside a transaction.

        Raises:
            UsageError: more than 32 MB.
        """
        if len(data) > MAX_CONTENT_BYTES:
            raise UsageError(f"{len(data)} bytes are more than a register keeps in one piece.", "Split the book.")
        sha256 = hashlib.sha256(data).hexdigest()
        with self.transaction():
            if not self._connection.execute("SELECT 1 FROM content WHERE sha256 = ?", (sha256,)).fetchone():
                pressed = zlib.compress(data, 9)
                codec, stored = ("zlib", pressed) if len(pressed) < len(data) else ("plain", data)
                self._connection.execute("INSERT INTO content VALUES (?, ?, ?, ?)", (sha256, len(data), codec, stored))
        return sha256

    def given(self, wanted: Iterable[str]) -> Iterator[tuple[str, bytes]]:
        """(SHA-256, bytes) of kept pieces, each checked against its hash.

        Raises:
            BookError: missing or damaged.
        """
        with connect.register_errors(self.path):
            for sha256 in wanted:
                row = self._connection.execute(
                    "SELECT bytes, codec, data FROM content WHERE sha256 = ?", (sha256,)
                ).fetchone()
                data = None if row is None else unpacked(*row)
                if data is None or hashlib.sha256(data).hexdigest() != sha256:
                    raise BookError(
                        f"The evidence {sha256[:12]}… of the register {self.path} is {'missing' if row is None else 'damaged'}.",
                        "`fieldbook verify` says what still holds.",
                        code="damaged",
                    )
                yield sha256, data

    def kept_tree(self, sha256: str) -> Any:
        """A kept JSON tree.

        Raises:
            BookError: missing or damaged.
        """
        (_, data) = next(iter(self.given([sha256])))
        return json.loads(data)

    def raw_entries(self) -> list[tuple[Any, ...]]:
        """Rows of `entry` as they are stored: seq, utc, kind, body text, by, previous hash, hash."""
        with connect.register_errors(self.path):
            return self._connection.execute(
                "SELECT seq, utc, kind, body, by, previous_hash, hash FROM entry ORDER BY seq"
            ).fetchall()

    def raw_content(self) -> Iterator[tuple[Any, ...]]:
        """Rows of `content` as they are stored: SHA-256, bytes, codec, data."""
        with connect.register_errors(self.path):
            yield from self._connection.execute("SELECT sha256, bytes, codec, data FROM content ORDER BY rowid")


def rebuilt(path: Path, entries: Iterable[tuple[Any, ...]], content: Iterable[tuple[Any, ...]]) -> int:
    """A register file of rows that come from elsewhere; the caller audits it. Returns the number of entries.

    Raises:
        BookError: it cannot be written, or the rows are not those of a register.
    """
    connection = connect.open_writer(path, create=True)
    count = 0
    try:
        with connect.register_errors(path):
            connection.execute("BEGIN IMMEDIATE")
            connection.execute(f"PRAGMA application_id = {migrations.APPLICATION_ID}")
            _migrate(connection, 0, "")
            for row in entries:
                connection.execute("INSERT INTO entry VALUES (?, ?, ?, ?, ?, ?, ?)", row)
                count += 1
            for row in content:
                connection.execute("INSERT INTO content VALUES (?, ?, ?, ?)", row)
            connection.execute("COMMIT")
    finally:
        connection.close()
    return count


def unpacked(size: object, codec: object, data: object) -> bytes | None:
    """The bytes of one row of `content`; None if they are not what the row says. Inflates to the stated size at most."""
    if not isinstance(size, int) or not isinstance(data, bytes) or not 0 <= size <= MAX_CONTENT_BYTES:
        return None
    if codec == "plain":
        return data if len(data) == size else None
    if codec != "zlib":
        return None
    press = zlib.decompressobj()
    try:
        plain = press.decompress(data, size + 1)
    except zlib.error:
        return None
    return plain if len(plain) == size and press.eof and not press.unused_data else None


def as_kept(tree: Any) -> bytes:
    """A tree of `reduce --json` as it is kept: UTF-8, keys sorted, no spaces, numbers in their shortest exact form."""
    return json.dumps(tree, ensure_ascii=False, sort_keys=True, separators=(",", ":"), allow_nan=False).encode("utf-8")


def _begin(connection: connect.Connection, clock: Clock, by: str) -> None:
    connection.execute("BEGIN IMMEDIATE")
    connection.execute(f"PRAGMA application_id = {migrations.APPLICATION_ID}")
    now = utc_text(clock.utc_ms())
    rows = _migrate(connection, 0, now)
    body: Tree = {"id": str(uuid.uuid4()), "format": FORMAT, "program": __version__, "migrations": rows}
    _insert(connection, "register", body, by, now)
    connection.execute("COMMIT")


def _migrate(connection: connect.Connection, found: int, now: str) -> list[list[str]]:
    for statement in migrations.statements(found):
        connection.execute(statement)
    connection.execute(f"PRAGMA user_version = {migrations.version()}")
    return [[name, now] for name, _ in migrations.MIGRATIONS[found:]]


def _insert(connection: connect.Connection, kind: str, body: Tree, by: str, now: str) -> Entry:
    if not by.strip():
        raise UsageError("An entry needs a name.", "Give --by NAME.", code="no_name")
    tree = checked_body(kind, body)
    text = canonical_json(tree)
    if len(text.encode("utf-8")) > MAX_BODY_BYTES:
        raise UsageError(f"The entry '{kind}' is longer than {MAX_BODY_BYTES} bytes.", "Shorten it.")
    row = connection.execute("SELECT seq, hash FROM entry ORDER BY seq DESC LIMIT 1").fetchone()
    seq, previous = (row[0] + 1, row[1]) if row else (1, GENESIS)
    entry = Entry(seq, now, kind, tree, by.strip(), previous, entry_hash(seq, now, kind, text, by.strip(), previous))
    connection.execute(
        "INSERT INTO entry VALUES (?, ?, ?, ?, ?, ?, ?)",
        (seq, now, kind, text, entry.observer, previous, entry.hash),
    )
    return entry


def read_entries(connection: connect.Connection, after_seq: int = 0) -> Iterator[Entry]:
    """Entries after a seq, in order.

    Raises:
        BookError: a body is no JSON tree.
    """
    rows = connection.execute(
        "SELECT seq, utc, kind, body, by, previous_hash, hash FROM entry WHERE seq > ? ORDER BY seq", (after_seq,)
    )
    for seq, utc, kind, text, by, previous, own in rows.fetchall():
        if not all(isinstance(value, str) for value in (utc, kind, text, by, previous, own)):
            raise _damaged(seq, "it holds a value that is no text")
        try:
            body: Any = json.loads(text)
        except (ValueError, RecursionError) as error:
            raise _damaged(seq, "its body is no JSON") from error
        if not isinstance(body, dict):
            raise _damaged(seq, "its body is no tree")
        yield Entry(seq, utc, kind, body, by, previous, own)


def _damaged(seq: object, why: str) -> BookError:
    return BookError(
        f"Entry {printable(seq)} of the register is damaged: {printable(why)}.",
        "`fieldbook verify` says what is wrong.",
        code="damaged",
    )
