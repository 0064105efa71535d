"""Book: create, open, append, record, read.

A Book holds one connection and belongs to the thread that opened it: every thread opens its own. A writer works in
explicit transactions (BEGIN IMMEDIATE) and never holds one while it computes. Screen, commands and recorder may
write to one book at the same time; the raw and epoch tables belong to the process that holds the `RecorderLock`.
"""

from __future__ import annotations

import hashlib
import sqlite3
import uuid
from collections.abc import Iterable, Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from types import TracebackType

from fieldbook import __version__
from fieldbook.clock import Clock, utc_text
from fieldbook.errors import BookError, UsageError
from fieldbook.model.canonical import Tree
from fieldbook.model.entry import Entry
from fieldbook.model.epoch import Epoch
from fieldbook.model.item import Item, ItemKind, canonical_items
from fieldbook.model.recorder import RecorderState
from fieldbook.model.state import BookState

from . import chain, connect, epoch_packs, epochs, heartbeat, migrations, raw
from .begin import new_book
from .known import Known
from .press import LARGE_BYTES, Presser
from .tail import TailSum
from .transactions import immediate


class Book:
    """One open book. Use `create` or `open`; close it, or use it in a `with` statement."""

    def __init__(self, path: Path, connection: connect.BookConnection, clock: Clock, *, write: bool) -> None:
        self.path = path
        self.writable = write
        self._connection = connection
        self._clock = clock
        self._known = Known(connection)
        self._tail = TailSum(connection)
        self._next_id: int | None = None
        self._forms: dict[int, dict[epochs.Form, int]] = {}
        self._version_seen = -1
        self._tail_bytes = 0  # written since the last seal
        self._presser = Presser()
        self._pressed: dict[str, bytes] = {}  # large chunks that were committed, for their pack

    # -- begin and end -------------------------------------------------------------------------------------

    @classmethod
    def create(
        cls,
        path: Path,
        *,
        clock: Clock,
        observer: str,
        session_tree: Tree | None = None,
        book_id: str | None = None,
    ) -> Book:
        """Begin a book and open it for writing. The file appears under its name only when it is complete.

        Args:
            path: where no file is yet.
            clock: time of the entries.
            observer: who signs the first entries.
            session_tree: canonical tree of the session file to offer for the first occupation.
            book_id: the UUID4 of the book; made up if None.

        Raises:
            UsageError: the path exists; observer or tree cannot be stored.
            BookError: the file cannot be made.
        """
        if path.exists() or path.is_symlink():
            raise UsageError(f"{path} exists already.", "Choose another name; a book is never overwritten.")
        new_book(path, clock, observer, session_tree, book_id or str(uuid.uuid4()))
        return cls.open(path, clock=clock, write=True)

    @classmethod
    def open(cls, path: Path, *, clock: Clock, write: bool = False) -> Book:
        """Open a book, for reading unless `write`. A book of an older version is brought up to date by a writer.

        Raises:
            BookError: code "missing", "not_a_book", "newer", "older", "schema", "damaged", "busy", "read_only", ...
        """
        connection = connect.open_writer(path) if write else connect.open_reader(path)
        try:
            with connect.book_errors(path):
                found = connect.check_identity(connection, path)
                book = cls(path, connection, clock, write=write)
                if write:
                    connect.begin_wal(connection)
                if found < migrations.version():
                    book._upgrade()
                if connection.wal_wrong:
                    book._enter_lost_commits(connection.wal_wrong)
        except BaseException:
            connection.close()
            raise
        return book

    @staticmethod
    def recognises(path: Path) -> bool:
        """Whether a file is a book, sound or damaged: asked of SQLite, because nobody else may open it."""
        return connect.recognises(path, migrations.APPLICATION_ID)

    def _enter_lost_commits(self, wrong: str) -> None:
        """Closing this writer clears the -wal away: whoever asks later must still know that something is missing."""
        body = {"occupation": None, "code": "wal_damaged", "text": f"Found when the book was opened: {wrong}."}
        self.append("alarm", {**body, "acknowledged": False}, "fieldbook " + __version__)

    def _upgrade(self) -> None:
        if not self.writable:
            raise BookError(
                f"{self.path} was written by an older Fieldbook.",
                "Open it once for writing (`fieldbook open`): it is brought up to date and nothing is lost.",
                code="older",
            )
        with self.transaction():
            rows = migrations.apply(self._connection)
            if rows:
                body = {"migrations": [list(row) for row in rows]}
                chain.insert_entry(self._connection, "migrated", body, "fieldbook " + __version__, self._now())

    @property
    def notes(self) -> list[str]:
        """What a reader should know about how the book was opened (read-only medium, temporary copy)."""
        return self._connection.notes

    @property
    def copied_without_wal(self) -> bool:
        """True if the entries say that a recorder runs, the file expects a -wal, and none was beside it.

        Such a book was copied while it was recorded: what the recorder wrote last is missing.
        """
        return self._connection.without_wal and self._known.recorder_runs()

    def close(self) -> None:
        """Close. A writer leaves one plain file behind if nobody else is on the book (see `close_clean`)."""
        self.close_clean()

    def close_clean(self) -> bool:
        """Close; True if what is left is one plain file without a -wal (a reader leaves that as it is)."""
        try:
            return self.writable and not self._connection.in_transaction and connect.end_wal(self._connection)
        except sqlite3.Error:
            return False  # closed already, or damaged: what was committed stays in the -wal
        finally:
            self._presser.close()
            self._connection.close()

    def __enter__(self) -> Book:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    # -- transactions --------------------------------------------------------------------------------------

    def _now(self) -> str:
        return utc_text(self._clock.utc_ms())

    @contextmanager
    def transaction(self) -> Iterator[None]:
        """One write transaction; all of it is committed, or nothing. Inside another one it is part of that.

        Raises:
            BookError: busy, read-only, disk full, ...
        """
        if not self.writable:
            raise BookError(f"{self.path} is open for reading only.", "Open it for writing.", code="read_only")
        with connect.book_errors(self.path), immediate(self._connection, self._forget):
            yield

    @contextmanager
    def _reading(self) -> Iterator[None]:
        with connect.book_errors(self.path):
            if self._connection.in_transaction:
                yield
                return
            self._connection.execute("BEGIN")
            try:
                yield
            finally:
                self._connection.execute("COMMIT")

    def _forget(self) -> None:
        """Drop what was remembered of the tables: after a rollback or a change by another connection."""
        self._known.forget()
        self._tail.forget()
        self._next_id = None
        self._forms.clear()

    def _look_around(self) -> None:
        """Forget ids and forms if another connection has written. Called inside a write transaction."""
        version = self.data_version()
        if version != self._version_seen:
            self._version_seen = version
            self._tail.forget()
            self._next_id = None
            self._forms.clear()

    # -- entries -------------------------------------------------------------------------------------------

    def append(self, kind: str, body: Tree, observer: str) -> Entry:
        """Append one entry, durably. An `end` entry seals what is still in the tail first.

        Raises:
            UsageError: it cannot be stored (unknown kind, missing key, a float, no observer).
            BookError: busy, read-only, disk full, ...
        """
        if kind == "end" and type(body.get("occupation")) is int:
            self.seal(body["occupation"])
        with self.transaction():
            return chain.insert_entry(self._connection, kind, body, observer, self._now())

    def entries(self, after_seq: int = 0) -> list[Entry]:
        """Entries after a seq, in order.

        Raises:
            BookError: damaged.
        """
        with connect.book_errors(self.path):
            return list(chain.read_entries(self._connection, after_seq))

    def state(self) -> BookState:
        """The state of the job, folded from all entries. Treat it as read-only; folded again only after news.

        Raises:
            BookError: an entry is damaged.
        """
        with connect.book_errors(self.path):
            return self._known.state()

    def data_version(self) -> int:
        """A number that changes when another connection has committed. 5 microseconds."""
        with connect.book_errors(self.path):
            return int(self._connection.execute("PRAGMA data_version").fetchone()[0])

    def write_back(self) -> None:
        """Write the -wal back into the file, as far as no reader holds it up: a copy of the file alone then has it too."""
        connect.write_back(self._connection)

    # -- recording -----------------------------------------------------------------------------------------

    def prepare(self, items: Sequence[Item]) -> None:
        """Begin to compress what `write_burst` will be given next, in a thread, if it is much; else nothing."""
        if sum(len(item.data) for item in items) >= LARGE_BYTES:
            for group in raw.groups_of(items):
                plain = canonical_items(group)
                self._presser.offer(raw.sha256_of(plain), plain)

    def write_burst(
        self,
        occupation: int,
        items: Sequence[Item],
        epochs: Sequence[Epoch] = (),
        state: RecorderState | None = None,
    ) -> None:
        """Write received items, closed epochs and the recorder's state as one durable commit.

        Items and epochs may be many; all may be empty (heartbeat).

        Raises:
            UsageError: the occupation has not begun.
            BookError: busy, read-only, disk full, ...; then nothing was written and the burst may be tried again.
        """
        size = sum(len(item.data) for item in items)
        large = size >= LARGE_BYTES
        if large or self._tail_bytes >= raw.CHUNK_BYTES:
            self.seal(occupation)  # before, not after: a burst that failed may be tried again
        chunks = self._chunks(occupation, items) if large else []
        with self.transaction():
            self._look_around()
            if items:
                first = self._free_id(occupation)
                if not chunks:
                    raw.insert_tail(self._connection, occupation, first, items)
                    self._tail.add(first, items)
                for chunk in chunks:
                    self._insert_chunk(chunk)
                self._next_id = first + len(items)
            if epochs:
                self._write_epochs(occupation, epochs)
            if state is not None:
                heartbeat.write(self._connection, state, self._tail.stated())
        self._tail_bytes += 0 if large else size
        self._pressed.update((chunk.sealed.sha256, chunk.data) for chunk in chunks if chunk.large)

    def _free_id(self, occupation: int) -> int:
        """The next item id. Only the holder of the recorder's lock writes items, so it does not change meanwhile."""
        if self._next_id is None:
            self._known.observer_of(occupation)  # it has begun
            self._next_id = max(self._known.last_sealed_id(), raw.last_tail_id(self._connection)) + 1
        return self._next_id

    def _chunks(self, occupation: int, items: Sequence[Item]) -> list[raw.Chunk]:
        """A large piece of a file goes into chunks at once: it would only pass through the tail."""
        with connect.occupation_errors(self.path, occupation):
            number = max((sealed.chunk for sealed in self._known.sealed(occupation)), default=0) + 1
            return list(raw.chunks_of(occupation, number, self._free_id(occupation), items, self._presser.take))

    def _insert_chunk(self, chunk: raw.Chunk) -> Entry:
        """A chunk with its `raw` entry, signed by whoever began the occupation."""
        raw.insert_chunk(self._connection, chunk)
        observer = self._known.observer_of(chunk.sealed.occupation)
        return chain.insert_entry(self._connection, "raw", chunk.sealed.body(), observer, self._now())

    def _write_epochs(self, occupation: int, rows: Sequence[Epoch]) -> None:
        forms = self._forms.get(occupation)
        if forms is None:
            forms = self._forms[occupation] = epochs.load_forms(self._connection, occupation)
        origin = self._known.origin_of(occupation)
        if origin is None:
            origin = epochs.first_position(rows)
            if origin is not None:
                body = {"occupation": occupation, "latitude_e8min": origin[0], "longitude_e8min": origin[1]}
                observer = self._known.observer_of(occupation)
                chain.insert_entry(self._connection, "origin", body, observer, self._now())
        epochs.insert_epochs(self._connection, occupation, rows, origin, forms)

    def replace_epochs(self, occupation: int, rows: Iterable[Epoch]) -> None:
        """Put newly decoded epochs in the place of an occupation's epochs, as one commit; packed if it has ended."""
        decoded = list(rows)  # may read `items`, so before the transaction
        packs: list[epoch_packs.Pack] = []
        with connect.occupation_errors(self.path, occupation):
            if self._known.has_ended(occupation):
                packs = [epoch_packs.packed(piece) for piece in epoch_packs.pieces_of_epochs(decoded)]
        with self.transaction():
            epochs.delete_epochs(self._connection, occupation)
            self._forms[occupation] = {}
            epoch_packs.insert(self._connection, occupation, packs)
            if left := decoded[sum(pack.count for pack in packs) :]:
                self._write_epochs(occupation, left)

    def seal(self, occupation: int) -> list[Entry]:
        """Move the tail of an occupation into chunks of at most about 512 KiB, each with its `raw` entry.

        Compression happens outside the transaction. Returns the entries written; none if the tail is empty.

        Raises:
            UsageError: the occupation has not begun.
            BookError: the tail has a gap or was changed meanwhile, or any of `transaction`.
        """
        written: list[Entry] = []
        with connect.occupation_errors(self.path, occupation):
            while rows := raw.tail_rows(self._connection, occupation, 0):
                number = max((sealed.chunk for sealed in self._known.sealed(occupation)), default=0) + 1
                chunk = raw.chunk_of(occupation, number, rows[0][0], raw.items_of(rows))
                with self.transaction():
                    written.append(self._insert_chunk(chunk))
                    raw.clear_tail(self._connection, chunk.sealed)
                self._tail.forget()
        self._tail_bytes = 0
        return written

    def pack(self, occupation: int) -> int:
        """Seal the tail, move all chunks of an occupation into packs, and let the file shrink; epochs too if it ended.

        Every chunk's SHA-256 is compared with its `raw` entry before and after compression, every epoch with what
        reads back. Returns the number of chunks packed.

        Raises:
            BookError: a chunk or an epoch is damaged or missing (then it stays as it is), or any of `transaction`.
        """
        self.seal(occupation)
        packed = 0
        with connect.occupation_errors(self.path, occupation):
            smaller = self._pack_epochs(occupation)
            left = raw.unpacked(self._connection, occupation)
            due = [sealed for sealed in self._known.sealed(occupation) if sealed.chunk in left]
            for group in raw.pack_groups(due):
                data = raw.compress_pack(self._connection, group, lambda sealed: self._pressed.pop(sealed.sha256, None))
                observer = self._known.observer_of(occupation)
                with self.transaction():
                    body = raw.insert_pack(self._connection, group, data).body()
                    chain.insert_entry(self._connection, "packed", body, observer, self._now())
                packed += len(group)
            if smaller or packed:
                connect.shrink(self._connection)
        return packed

    def _pack_epochs(self, occupation: int) -> bool:
        """Move the epoch rows of an ended occupation into packs, compressed outside the transaction."""
        if not self._known.has_ended(occupation):
            return False
        packs = epoch_packs.packs_of_rows(self._connection, occupation, self._known.origin_of(occupation))
        with self.transaction():
            heartbeat.forget_sky(self._connection, occupation)
            if packs:
                epoch_packs.insert(self._connection, occupation, packs)
                epoch_packs.clear_rows(self._connection, occupation, packs)
        self._forms.pop(occupation, None)
        return bool(packs)

    # -- reading what was recorded -------------------------------------------------------------------------

    def items(self, occupation: int, after_id: int = 0) -> Iterator[Item]:
        """Received items and link events of an occupation, in order, across packs, chunks and tail.

        Safe while a recorder seals and packs; no transaction stays open between two items.

        Raises:
            BookError: a chunk is missing or damaged.
        """
        with connect.occupation_errors(self.path, occupation):
            yield from raw.iterate(self._connection, occupation, lambda: self._known.sealed(occupation), after_id)

    def received(self, occupation: int) -> Iterator[bytes]:
        """The received bytes alone, piece by piece."""
        return (item.data for item in self.items(occupation) if item.kind is ItemKind.BYTES)

    def received_digest(self, occupation: int) -> tuple[int, str]:
        """(number, SHA-256) of the received bytes alone."""
        size, total = 0, hashlib.sha256()
        for data in self.received(occupation):
            size += len(data)
            total.update(data)
        return size, total.hexdigest()

    def epochs(self, occupation: int, after: int = 0, limit: int | None = None) -> list[Epoch]:
        """Decoded epochs of an occupation with a number above `after`, in order; the first `limit` of them if given.

        Raises:
            BookError: damaged.
        """
        with connect.occupation_errors(self.path, occupation), self._reading():
            return epoch_packs.read(self._connection, occupation, self._known.origin_of(occupation), after, limit)

    def recorder_state(self) -> RecorderState | None:
        """What the recorder last said of itself; None if there never was one, or it cannot be read."""
        with connect.book_errors(self.path):
            return heartbeat.read(self._connection)
