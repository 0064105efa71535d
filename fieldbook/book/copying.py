"""A whole copy of a sound book by SQLite's online backup: consistent at any moment, also while a recorder writes.

The source is read through a connection of its own in one read transaction, so the copy is the book as it stood at one
moment; in WAL mode that holds up no writer. Pages are copied a few at a time with pauses between. The copy is one plain
file without a -wal.
"""

from __future__ import annotations

import sqlite3
import time
from collections.abc import Callable
from pathlib import Path

from . import connect

STEP_PAGES = 256
PAUSE_S = 0.005


def copy_book(
    source: Path,
    target: Path,
    *,
    stopped: Callable[[], bool] = lambda: False,
    step_pages: int = STEP_PAGES,
    pause_s: float = PAUSE_S,
) -> bool:
    """Copy a book to a file that is not there yet; False if `stopped` said so, and then the target is no book.

    Raises:
        BookError: the source cannot be read, or the target cannot be written.
    """
    with connect.book_errors(source):
        reading = connect.open_reader(source)
    try:
        writing = connect.open_writer(target, create=True)
        try:
            with connect.book_errors(target):
                return _copied(reading, writing, stopped, step_pages, pause_s)
        finally:
            writing.close()
    finally:
        reading.close()


class _Stopped(Exception):
    """Enough."""


def _copied(
    reading: sqlite3.Connection,
    writing: sqlite3.Connection,
    stopped: Callable[[], bool],
    step_pages: int,
    pause_s: float,
) -> bool:
    def progress(_status: int, _remaining: int, _total: int) -> None:
        if stopped():
            raise _Stopped
        time.sleep(pause_s)

    # one snapshot from the first page to the last: without it every commit of a recorder begins the copy again
    reading.execute("BEGIN")
    reading.execute("SELECT count(*) FROM sqlite_master").fetchone()
    try:
        reading.backup(writing, pages=step_pages, progress=progress)
    except _Stopped:
        return False
    finally:
        reading.execute("COMMIT")
    writing.execute("PRAGMA journal_mode=DELETE").fetchone()
    return True
