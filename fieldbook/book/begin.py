"""A new book: written under a temporary name, given its own name when it is complete.

So a power cut leaves either no book or a whole one, and two programs cannot begin the same book.
"""

from __future__ import annotations

import os
import sys
import uuid
from contextlib import suppress
from pathlib import Path

from fieldbook import __version__
from fieldbook.clock import Clock, utc_text
from fieldbook.errors import BookError, UsageError
from fieldbook.model.canonical import Tree

from . import chain, connect, migrations

FORMAT = 1


def new_book(path: Path, clock: Clock, observer: str, session_tree: Tree | None, book_id: str) -> None:
    """Write a book with its first entries and close it.

    Raises:
        UsageError: the path exists; observer or tree cannot be stored.
        BookError: the file cannot be made.
    """
    part = path.with_name(f".{path.name}.{uuid.uuid4().hex}.part")
    with connect.book_errors(path):
        try:
            _write(part, clock, observer, session_tree, book_id)
            give_name(part, path)
        finally:
            part.unlink(missing_ok=True)


def _write(part: Path, clock: Clock, observer: str, session_tree: Tree | None, book_id: str) -> None:
    connection = connect.open_writer(part, create=True)
    try:
        connection.execute("BEGIN IMMEDIATE")
        connection.execute(f"PRAGMA application_id = {migrations.APPLICATION_ID}")
        rows = migrations.apply(connection)
        body: Tree = {
            "id": book_id,
            "format": FORMAT,
            "program": __version__,
            "migrations": [list(row) for row in rows],
        }
        now = utc_text(clock.utc_ms())
        chain.insert_entry(connection, "book", body, observer, now)
        if session_tree is not None:
            chain.insert_entry(connection, "session", {"tree": session_tree}, observer, now)
        connection.execute("COMMIT")
    finally:
        connection.close()


def give_name(part: Path, path: Path) -> None:
    """Move the finished book to its name without overwriting, and make the folder remember it.

    Raises:
        UsageError: the name is taken.
        BookError: the file cannot be moved.
    """
    taken = UsageError(f"{path} exists already.", "Choose another name; a book is never overwritten.")
    try:
        path.hardlink_to(part)
    except FileExistsError:
        raise taken from None
    except OSError as error:  # a file system without hard links, such as that of most sticks
        if path.exists():
            raise taken from None
        try:
            part.rename(path)
        except OSError:
            raise BookError(
                f"The book {path} cannot be made: {error.strerror}.", "Choose another folder.", code="cannot_open"
            ) from error
    sync_folder(path.absolute().parent)


def sync_folder(folder: Path) -> None:
    """Make a folder remember the names in it."""
    if sys.platform != "win32":
        handle = os.open(folder, os.O_RDONLY)
        try:
            with suppress(OSError):  # a file system that cannot: SQLite syncs the folder with its first WAL
                os.fsync(handle)
        finally:
            os.close(handle)
