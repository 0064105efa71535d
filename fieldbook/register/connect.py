"""SQLite connections to a register file, and sqlite3's errors in the words of a register.

The only module of the register that opens one. A register comes from a colleague's machine like a book does: its schema
is never trusted, what lies beside it is looked at first, and one whose tables are not ours is refused. It is written by
short commands of one office, so the plain rollback journal does; nobody has to copy a second file with it.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager
from functools import lru_cache
from pathlib import Path
from typing import Any

from fieldbook.book.beside import refuse_hostile
from fieldbook.book.connect import file_uri, folder_is_writable, harden, printable
from fieldbook.book.migrations import schema_of
from fieldbook.errors import BookError

from . import migrations

BUSY_MS = 5000
MAX_VALUE_BYTES = 64 * 1024 * 1024
PAGE_BYTES = 4096
CACHE_KIB = 64 * 1024  # evidence is found by its hash, anywhere in the file

Connection = sqlite3.Connection
DatabaseError = sqlite3.Error


def open_reader(path: Path) -> Connection:
    """A connection that can only read; the schema is checked by `check_identity`.

    Raises:
        BookError: missing, no register, damaged, busy.
    """
    _look(path)
    with register_errors(path):
        query = "mode=ro" if folder_is_writable(path) else "immutable=1"
        connection = _connect(path, query)
        return _tried(connection, ("query_only=ON",))


def open_writer(path: Path, *, create: bool = False) -> Connection:
    """A connection that may write.

    Raises:
        BookError: missing, no register, damaged, busy, read-only.
    """
    if not create:
        _look(path)
    with register_errors(path):
        connection = _connect(path, "mode=rwc" if create else "mode=rw")
        first = (f"page_size={PAGE_BYTES}", f"cache_size=-{CACHE_KIB}") if create else (f"cache_size=-{CACHE_KIB}",)
        return _tried(connection, (*first, "synchronous=FULL"))


def _connect(path: Path, query: str) -> Connection:
    connection = sqlite3.connect(file_uri(path, query), uri=True, isolation_level=None, timeout=BUSY_MS / 1000)
    harden(connection, MAX_VALUE_BYTES)
    return connection


def _tried(connection: Connection, pragmas: tuple[str, ...]) -> Connection:
    try:
        for pragma in pragmas:
            connection.execute(f"PRAGMA {pragma}")
        connection.execute("SELECT count(*) FROM sqlite_master").fetchone()
    except BaseException:
        connection.close()
        raise
    return connection


def _look(path: Path) -> None:
    if not path.exists():
        raise BookError(
            f"There is no register {path}.",
            "Check the name; `fieldbook register add` begins one.",
            code="missing",
        )
    if not path.is_file() or path.stat().st_size == 0:
        raise BookError(
            f"{path} is no register file.", "Name one made by `fieldbook register add`.", code="no_register"
        )
    refuse_hostile(path)


def check_identity(connection: Connection, path: Path) -> int:
    """The register's version, after making sure that this program can read it.

    Raises:
        BookError: no register, newer than this program, or its tables are not those of a register.
    """
    application = connection.execute("PRAGMA application_id").fetchone()[0]
    if application != migrations.APPLICATION_ID:
        raise BookError(
            f"{path} is an SQLite file, but no register.",
            "Name one made by `fieldbook register add`; books are named after it.",
            code="no_register",
        )
    found: int = connection.execute("PRAGMA user_version").fetchone()[0]
    if found > migrations.version():
        raise BookError(
            f"{path} was written by a newer Fieldbook (register version {found}, this program reads up to "
            f"{migrations.version()}).",
            "Install that version or a later one; the register was not touched.",
            code="newer",
        )
    if found < 1 or schema_of(connection) != expected_schema(found):
        raise BookError(
            f"{path} has tables or triggers that are not those of a register of version {found}.",
            "It was changed by another program: `fieldbook verify` says where. Work with an untouched copy.",
            code="schema",
        )
    return found


@lru_cache(maxsize=8)
def _expected(known: int) -> Any:
    connection = sqlite3.connect(":memory:", isolation_level=None)
    try:
        for statement in migrations.statements(0, known):
            connection.execute(statement)
        return schema_of(connection)
    finally:
        connection.close()


def expected_schema(user_version: int) -> dict[tuple[str, str], tuple[str, str | None]]:
    """The schema a register of this version must have."""
    schema: dict[tuple[str, str], tuple[str, str | None]] = _expected(user_version)
    return schema


_WORDS: dict[int, tuple[str, str, str]] = {
    sqlite3.SQLITE_NOTADB: ("is no register", "Name one made by `fieldbook register add`.", "no_register"),
    sqlite3.SQLITE_CORRUPT: ("is damaged", "Keep it untouched; add the books to a new register.", "damaged"),
    sqlite3.SQLITE_BUSY: ("is busy: another program holds it", "Try again in a moment.", "busy"),
    sqlite3.SQLITE_LOCKED: ("is busy: another program holds it", "Try again in a moment.", "busy"),
    sqlite3.SQLITE_FULL: ("cannot grow: the disk is full", "Free some space on that disk.", "disk_full"),
    sqlite3.SQLITE_READONLY: (
        "cannot be written: it is read-only",
        "Copy it to a folder you may write to.",
        "read_only",
    ),
    sqlite3.SQLITE_CANTOPEN: ("cannot be opened", "Check the rights on the file and its folder.", "cannot_open"),
    sqlite3.SQLITE_CONSTRAINT: (
        "refused the change: nothing in a register is ever changed or erased",
        "This is a fault of the program; the register is as it was.",
        "append_only",
    ),
}


@contextmanager
def register_errors(path: Path) -> Iterator[None]:
    """Turn sqlite3's errors into BookErrors that speak of the register."""
    try:
        yield
    except sqlite3.Error as error:
        primary = int(getattr(error, "sqlite_errorcode", sqlite3.SQLITE_CORRUPT)) & 0xFF
        words = _WORDS.get(primary, ("cannot be used", "`fieldbook verify` says what still holds.", "damaged"))
        text, remedy, code = words
        raise BookError(f"The register {path} {text} ({printable(error)}).", remedy, code=code) from error
    except (UnicodeDecodeError, MemoryError) as error:
        raise BookError(
            f"The register {path} is damaged ({type(error).__name__}).",
            _WORDS[sqlite3.SQLITE_CORRUPT][1],
            code="damaged",
        ) from error
