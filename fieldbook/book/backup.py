"""One copy of a book on another medium: written beside the one of before, and put in its place when it is complete.

The copy is made by SQLite (`copying`) under a temporary name on that medium, synced, and renamed; until then the copy
of before stays as it is, so a stick pulled out at any moment holds a whole one. What stands under the name and is no
earlier copy of the same book is never touched: its id must be this book's, and its last entry must stand in this book.
"""

from __future__ import annotations

import json
import os
import sqlite3
import uuid
from collections.abc import Callable
from contextlib import closing, suppress
from pathlib import Path

from fieldbook.errors import BookError, UsageError

from . import connect
from .begin import sync_folder
from .copying import copy_book


def target_of(wanted: Path, book: Path) -> Path:
    """The file to write: in a folder, the book's own name.

    A name without an ending is a folder, also while it is not there: the medium may be pulled out.

    Raises:
        UsageError: it is the book itself.
    """
    is_folder = wanted.is_dir() or not (wanted.suffix or wanted.is_file())
    target = wanted / book.name if is_folder else wanted
    if os.path.realpath(target) == os.path.realpath(book):
        raise UsageError(
            f"{target} is the book itself.", "Name a folder or file on another disk or stick.", code="backup_itself"
        )
    return target


def refuse_other(target: Path, book: Path) -> None:
    """Nothing but an earlier copy of this book may stand under the name.

    Raises:
        UsageError: something else does (code "backup_other").
        BookError: the book cannot be read.
    """
    if not target.exists() and not target.is_symlink():
        return
    remedy = "Name another file or folder for the copy, or move that one away."
    if not target.is_file():
        raise UsageError(f"{target} is no regular file.", remedy, code="backup_other")
    try:
        copied, head = _identity(target)
    except (BookError, sqlite3.Error, ValueError) as error:
        why = error.text if isinstance(error, BookError) else str(error)
        raise UsageError(
            f"{target} is no copy of this book ({connect.printable(why)}).", remedy, code="backup_other"
        ) from error
    with connect.book_errors(book), closing(connect.open_reader(book)) as connection:
        own = _book_id(connection)
        there = connection.execute("SELECT hash FROM entry WHERE seq = ?", (head[0],)).fetchone()
    if copied != own:
        raise UsageError(f"{target} is a copy of another book ({copied}).", remedy, code="backup_other")
    if there is None or there[0] != head[1]:
        text = f"{target} holds entries of this book that are not in {book.name}: it may be the better one."
        raise UsageError(text, remedy, code="backup_other")


def _identity(path: Path) -> tuple[str, tuple[int, str]]:
    with closing(connect.open_reader(path)) as connection:
        connect.check_identity(connection, path)
        seq, own = connection.execute("SELECT seq, hash FROM entry ORDER BY seq DESC LIMIT 1").fetchone() or (0, "")
        return _book_id(connection), (seq, own)


def _book_id(connection: sqlite3.Connection) -> str:
    row = connection.execute("SELECT body FROM entry WHERE seq = 1").fetchone()
    tree = json.loads(row[0]) if row is not None and isinstance(row[0], str) else {}
    return str(tree.get("id")) if isinstance(tree, dict) else ""


def write_copy(
    book: Path, target: Path, *, stopped: Callable[[], bool] = lambda: False, pause_s: float = 0.005
) -> bool:
    """Put a fresh copy in the place of the one of before; False if `stopped` said so.

    Raises:
        UsageError: something else stands under the name.
        BookError: the medium is full, read-only, gone, ...; the copy of before is as it was.
    """
    refuse_other(target, book)
    folder = target.parent
    if not folder.is_dir():
        raise BookError(f"There is no folder {folder}.", "Put the medium back.", code="gone")
    for left in folder.glob(f".{target.name}.*.part*"):
        with suppress(OSError):
            left.unlink()
    part = folder / f".{target.name}.{uuid.uuid4().hex[:8]}.part"
    try:
        if not copy_book(book, part, stopped=stopped, pause_s=pause_s):
            return False
        _check(part, book)
        part.replace(target)
        sync_folder(folder)
        return True
    except OSError as error:
        raise BookError(f"{target} cannot be written: {error.strerror}.", "Look at the medium.", code="gone") from error
    finally:
        for ending in ("", "-journal"):
            with suppress(OSError):
                part.with_name(part.name + ending).unlink(missing_ok=True)


def _check(part: Path, book: Path) -> None:
    """What was written reads as a whole copy of the book.

    Raises:
        BookError: it does not.
    """
    with connect.book_errors(part), closing(connect.open_reader(part)) as connection:
        connect.check_identity(connection, part)
        said = connection.execute("PRAGMA quick_check(1)").fetchone()[0]
    if said != "ok":
        raise BookError(
            f"The copy of {book.name} does not read back as it was written.", "Use another medium.", code="disk_error"
        )
