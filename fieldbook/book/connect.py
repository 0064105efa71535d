"""SQLite connections to a book, and sqlite3's errors in the words of a book.

A connection belongs to one thread. A writer puts the book into WAL mode; closing it puts it back to one plain file
if nobody else is on it, so that the book opens on a read-only stick. Other people's books are hostile input: the
schema is never trusted, cells are checked, values are bounded, and a book whose schema is not ours is refused.
This module counts the connections of this process per file, because `foreign` may only copy a book to which the
process has none.
"""

from __future__ import annotations

import os
import sqlite3
import threading
import time
from collections import Counter
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from urllib.parse import quote_from_bytes

from fieldbook.errors import BookError
from fieldbook.model.visible import visible

from . import beside, foreign, migrations
from .wal import wal_problem

BUSY_MS = 5000
PAGE_BYTES = 1024  # a book's fixed part counts beside a short log; 512 costs 4 % of the CPU of recording a file
MAX_VALUE_BYTES = 64 * 1024 * 1024
WAL_KEPT_BYTES = 8 * 1024 * 1024

_open: Counter[str] = Counter()
_open_guard = threading.Lock()


class BookConnection(sqlite3.Connection):
    """A connection that is counted. `notes` says what a reader should know about how the book was opened."""

    real_path: str = ""
    notes: list[str]
    without_wal: bool = False  # the file says WAL, and there was no WAL beside it
    wal_wrong: str = ""  # of a writer: what of the -wal it found cannot be read
    _copy: foreign.Copy | None = None

    def count_in(self, path: Path) -> None:
        """Enter this connection into the count."""
        self.real_path = os.path.realpath(path)
        self.notes = []
        with _open_guard:
            _open[self.real_path] += 1

    def keep(self, copy: foreign.Copy) -> None:
        """Hold the temporary copy this connection reads, until it is closed."""
        self._copy = copy

    def close(self) -> None:
        """Close and count out."""
        super().close()
        if self.real_path:
            with _open_guard:
                _open[self.real_path] -= 1
            self.real_path = ""
        if self._copy is not None:
            self._copy.remove()
            self._copy = None


def connections_here(path: Path) -> int:
    """How many connections this process has to a book."""
    with _open_guard:
        return _open[os.path.realpath(path)]


def file_uri(path: Path, query: str) -> str:
    """The path as a URI for sqlite3, symbolic links followed."""
    posix = Path(os.path.realpath(path)).as_posix()
    if not posix.startswith("/"):
        posix = "/" + posix  # a drive letter of Windows
    return f"file://{quote_from_bytes(os.fsencode(posix), safe='/:')}?{query}"


def _connect(path: Path, query: str) -> BookConnection:
    if sqlite3.sqlite_version_info < (3, 37, 0):  # STRICT tables
        raise BookError(
            f"This Python brings SQLite {sqlite3.sqlite_version}; a book needs 3.37 or later.",
            "Install Python 3.11 or later from python.org.",
            code="sqlite",
        )
    connection = sqlite3.connect(
        file_uri(path, query), uri=True, isolation_level=None, timeout=BUSY_MS / 1000, factory=BookConnection
    )
    connection.count_in(path)
    harden(connection, MAX_VALUE_BYTES)
    return connection


def harden(connection: sqlite3.Connection, most_bytes: int) -> None:
    """Settings for a file that may come from anybody; the connection is closed where they are refused.

    Args:
        most_bytes: of one value.
    """
    try:
        connection.setlimit(sqlite3.SQLITE_LIMIT_LENGTH, most_bytes)
        for pragma in ("trusted_schema=OFF", "cell_size_check=ON", "foreign_keys=ON", "recursive_triggers=ON"):
            connection.execute(f"PRAGMA {pragma}")
    except BaseException:
        connection.close()
        raise


def look(path: Path) -> None:
    """Refuse what can be refused without opening anything.

    Raises:
        BookError: nothing there, a folder, an empty file, neighbours that lead elsewhere.
    """
    try:
        found = path.stat()
    except OSError as error:
        raise BookError(
            f"There is no book {path}.",
            "Check the name, or begin one with `fieldbook new`.",
            code="missing",
        ) from error
    if path.is_dir():
        raise BookError(f"{path} is a folder, not a book.", "Name the book file in it.", code="not_a_book")
    if not path.is_file():
        raise BookError(f"{path} is no regular file.", "Name a book file.", code="not_a_book")
    if found.st_size == 0:
        raise BookError(
            f"{path} is empty: no book was ever written there.",
            "Delete it and begin one with `fieldbook new`.",
            code="not_a_book",
        )
    beside.refuse_hostile(path)


def folder_is_writable(path: Path) -> bool:
    """Whether this process may make files beside the book."""
    folder = Path(os.path.realpath(path)).parent
    return os.access(folder, os.W_OK, effective_ids=os.access in os.supports_effective_ids)


def recognises(path: Path, application_id: int) -> bool:
    """Whether a file bears this application id, sound or damaged; a damaged head counts, a missing or foreign file not."""
    try:
        connection = open_reader(path)
    except BookError as error:
        return error.code not in ("missing", "not_a_book")
    try:
        return bool(connection.execute("PRAGMA application_id").fetchone()[0] == application_id)
    except sqlite3.Error:
        return True
    finally:
        connection.close()


def open_reader(path: Path) -> BookConnection:
    """A connection that can only read. The schema is not yet checked.

    Raises:
        BookError: missing, no book, damaged, locked.
    """
    look(path)
    with book_errors(path):
        _roll_back(path)
        empty_wal = foreign.size_beside(path, "-wal") == 0
        try:
            connection = _read_only(path, "mode=ro")
        except sqlite3.OperationalError:
            if folder_is_writable(path):
                raise
            return _open_on_read_only_medium(path)
        try:
            mode = connection.execute("PRAGMA journal_mode").fetchone()[0]
        except BaseException:
            connection.close()
            raise
        connection.without_wal = empty_wal and mode == "wal"
        return connection


def _roll_back(path: Path) -> None:
    """A process killed while it switched to WAL or back leaves a -journal, which only a writer can roll back."""
    if foreign.size_beside(path, "-journal") and folder_is_writable(path):
        with suppress(sqlite3.Error):  # the reader's own attempt says what is wrong
            connection = _connect(path, "mode=rw")
            try:
                connection.execute("SELECT count(*) FROM sqlite_master").fetchone()
            finally:
                connection.close()


def _read_only(path: Path, query: str) -> BookConnection:
    connection = _connect(path, query)
    try:
        connection.execute("PRAGMA query_only=ON")
        connection.execute("SELECT count(*) FROM sqlite_master").fetchone()
    except BaseException:
        connection.close()
        raise
    return connection


def _open_on_read_only_medium(path: Path) -> BookConnection:
    """SQLite cannot make its -shm here: read the file as it stands, or a copy where a -wal must be read too."""
    if not foreign.size_beside(path, "-wal") and not foreign.size_beside(path, "-journal"):
        connection = _read_only(path, "immutable=1")
        connection.without_wal = True
        connection.notes.append("read as it stands on a read-only medium")
        return connection
    copy = foreign.copy_for_reading(path, connections_here(path))
    try:
        connection = _read_only(copy.path, "mode=ro")
    except BaseException:
        copy.remove()
        raise
    connection.keep(copy)
    connection.notes.append("read from a copy in a temporary folder, because the medium is read-only")
    return connection


def open_writer(path: Path, *, create: bool = False) -> BookConnection:
    """A connection that may write, in WAL mode.

    Raises:
        BookError: missing, no book, damaged, locked, read-only.
    """
    if not create:
        look(path)
    wal_wrong = wal_problem(path, connections_here(path))
    with book_errors(path):
        connection = _connect(path, "mode=rwc" if create else "mode=rw")
        connection.wal_wrong = wal_wrong
        try:
            connection.execute("PRAGMA synchronous=FULL")
            if create:
                connection.execute(f"PRAGMA page_size={PAGE_BYTES}")
            else:
                connection.execute("SELECT count(*) FROM sqlite_master").fetchone()
        except BaseException:
            connection.close()
            raise
    return connection


def begin_wal(connection: BookConnection) -> None:
    """Switch to WAL. Somebody just reading may hold the switch up: try for some seconds, then stay as it is."""
    deadline = time.monotonic() + BUSY_MS / 1000
    while True:
        try:
            connection.execute("PRAGMA journal_mode=WAL").fetchone()
            break
        except sqlite3.OperationalError as error:
            if _primary(error) not in (sqlite3.SQLITE_BUSY, sqlite3.SQLITE_LOCKED):
                raise
            if time.monotonic() > deadline:
                connection.notes.append("the book could not be switched to WAL: somebody else holds it")
                break
            time.sleep(0.02)
    empty = foreign.size_beside(Path(connection.real_path), "-wal") == 0
    if empty:
        # The header says WAL from here on. A process killed now would leave that and an empty -wal, which is what a book
        # copied without its -wal looks like: so there is one frame in it at once.
        version = connection.execute("PRAGMA user_version").fetchone()[0]
        with suppress(sqlite3.OperationalError):  # full or busy: the first commit will do it, or say so
            connection.execute(f"PRAGMA user_version = {version}")
    connection.execute(f"PRAGMA journal_size_limit={WAL_KEPT_BYTES}")


def end_wal(connection: BookConnection) -> bool:
    """Back to one plain file, if nobody else is on it. True = done; else the WAL is only written back."""
    connection.execute("PRAGMA busy_timeout=100")
    try:
        mode: str = connection.execute("PRAGMA journal_mode=DELETE").fetchone()[0]
        return mode == "delete"
    except sqlite3.OperationalError:
        with suppress(sqlite3.OperationalError):
            connection.execute("PRAGMA wal_checkpoint(PASSIVE)").fetchall()
        return False
    finally:
        connection.execute(f"PRAGMA busy_timeout={BUSY_MS}")


def write_back(connection: BookConnection) -> None:
    """Write the -wal back into the file as far as it goes now. Never waits and never fails: nothing is lost without it."""
    with suppress(sqlite3.OperationalError):
        connection.execute("PRAGMA wal_checkpoint(PASSIVE)").fetchall()


def shrink(connection: BookConnection) -> None:
    """Give free pages back, if the book can be had at once; else the next occupation fills them.

    Busy, or no room for a second copy: the book is whole, only larger than need be. (No auto_vacuum for that case: its
    pointer pages would cost every book more than it ever gave back.)
    """
    with suppress(sqlite3.OperationalError):
        connection.executescript("VACUUM")


def check_identity(connection: BookConnection, path: Path) -> int:
    """The book's version, after making sure it is a book this program can read.

    Raises:
        BookError: no book, newer than this program, or its tables are not those of a book.
    """
    application = connection.execute("PRAGMA application_id").fetchone()[0]
    if application != migrations.APPLICATION_ID:
        raise BookError(
            f"{path} is an SQLite file, but no book.", "Name a book made by `fieldbook new`.", code="not_a_book"
        )
    found: int = connection.execute("PRAGMA user_version").fetchone()[0]
    if found > migrations.version():
        raise BookError(
            f"{path} was written by a newer Fieldbook (book version {found}, this program reads up to "
            f"{migrations.version()}).",
            "Install that version or a later one; the book was not touched.",
            code="newer",
        )
    if found < 1 or migrations.schema_of(connection) != migrations.expected_schema(found):
        raise BookError(
            f"{path} has tables or triggers that are not those of a book of version {found}.",
            "It was changed by another program: `fieldbook verify` says where. Work with an untouched copy.",
            code="schema",
        )
    return found


def _primary(error: sqlite3.Error) -> int:
    return int(getattr(error, "sqlite_errorcode", sqlite3.SQLITE_CORRUPT)) & 0xFF


_WORDS: dict[int, tuple[str, str, str]] = {
    sqlite3.SQLITE_NOTADB: ("is not a book", "Name a book file made by `fieldbook new`.", "not_a_book"),
    sqlite3.SQLITE_CORRUPT: (
        "is damaged",
        "Keep it untouched and work on a copy; `fieldbook verify` says what still holds.",
        "damaged",
    ),
    sqlite3.SQLITE_BUSY: ("is busy: another program holds it", "Try again in a moment.", "busy"),
    sqlite3.SQLITE_LOCKED: ("is busy: another program holds it", "Try again in a moment.", "busy"),
    sqlite3.SQLITE_FULL: ("cannot grow: the disk is full", "Free some space on that disk.", "disk_full"),
    sqlite3.SQLITE_READONLY: (
        "cannot be written: the file, its folder or the medium is read-only",
        "Copy the book (with its -wal, if there is one) to a folder you may write to.",
        "read_only",
    ),
    sqlite3.SQLITE_CANTOPEN: (
        "cannot be opened",
        "Check the rights on the file and its folder.",
        "cannot_open",
    ),
    sqlite3.SQLITE_PERM: ("cannot be opened", "Check the rights on the file and its folder.", "cannot_open"),
    sqlite3.SQLITE_AUTH: ("cannot be opened", "Check the rights on the file and its folder.", "cannot_open"),
    sqlite3.SQLITE_IOERR: (
        "cannot be read or written: the disk reports an error",
        "Check the disk or stick; copy the book to another one.",
        "disk_error",
    ),
    sqlite3.SQLITE_TOOBIG: (
        "holds a value larger than any book has",
        "Treat it as damaged: `fieldbook verify` says what still holds.",
        "damaged",
    ),
    sqlite3.SQLITE_CONSTRAINT: (
        "refused the change: nothing in a book is ever changed or erased",
        "This is a fault of the program; the book is as it was.",
        "append_only",
    ),
}


def printable(what: object) -> str:
    """SQLite's words without anything a hostile file could put into them to steer a terminal."""
    return visible(str(what)[:300])


def book_error(path: Path, error: sqlite3.Error) -> BookError:
    """sqlite3's error as a BookError."""
    words = _WORDS.get(_primary(error))
    if words is None:
        return BookError(
            f"The book {path} cannot be used: {printable(error)}.", "`fieldbook verify` says what still holds."
        )
    text, remedy, code = words
    return BookError(f"The book {path} {text} ({printable(error)}).", remedy, code=code)


@contextmanager
def book_errors(path: Path) -> Iterator[None]:
    """Turn sqlite3's errors into BookErrors."""
    try:
        yield
    except sqlite3.Error as error:
        raise book_error(path, error) from error
    except (UnicodeDecodeError, MemoryError) as error:
        # A damaged name inside an error message of SQLite's, or a damaged length it asks memory for.
        raise book_error(path, sqlite3.DatabaseError(type(error).__name__)) from error


@contextmanager
def occupation_errors(path: Path, occupation: int) -> Iterator[None]:
    """As `book_errors`; what the raw and epoch tables hold and should not (ValueError) is a BookError too."""
    with book_errors(path):
        try:
            yield
        except (ValueError, OverflowError, TypeError) as error:  # a damaged page can hold values of any type
            raise BookError(
                f"Occupation {occupation} of {path} is damaged: {printable(error)}.",
                "`fieldbook verify` says what still holds.",
                code="damaged",
            ) from error
