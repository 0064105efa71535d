"""Ending an occupation: by asking the recorder if one runs, else directly.

The request is an entry, because signals do not exist everywhere and leave no trace. Whoever ends an occupation without
a recorder does what the recorder would have done: decode the rest, seal, re-pack, write the `end` entry.
"""

from __future__ import annotations

import time
from pathlib import Path

from fieldbook.book.lock import RecorderLock, held
from fieldbook.book.store import Book
from fieldbook.clock import Clock, SystemClock
from fieldbook.errors import BookError, UsageError
from fieldbook.occupy.rebuild import occupation_of
from fieldbook.occupy.restore import catch_up
from fieldbook.occupy.writer import Writer

LOOK_S = 0.05
WAIT_S = 30.0


def end_directly(book: Book, number: int, clock: Clock, *, by: str = "operator") -> None:
    """End an occupation that nobody records; the caller holds the lock, or has just begun the book.

    Raises:
        UsageError: no such occupation, or it is ended.
    """
    occupation = occupation_of(book, number)
    if not occupation.open:
        raise UsageError(f"Occupation {number} was ended already, by {occupation.ended_by}.", "Nothing is left to do.")
    writer = Writer(book, occupation, clock, patience=lambda: False)
    catch_up(writer, book, number)
    writer.finish(by, live=not occupation.link.startswith("file:"))


def request_end(book_path: Path, occupation: int, observer: str, wait_s: float = WAIT_S) -> None:
    """End an occupation and wait until it is ended.

    Raises:
        UsageError: no such occupation, or it is ended already.
        BookError: the running recorder did not end it within `wait_s`.
    """
    _ask(book_path, occupation, observer, "end")
    deadline = time.monotonic() + wait_s
    while not _ended(book_path, occupation):
        if not held(book_path):
            _end_under_lock(book_path, occupation)
            return
        if time.monotonic() > deadline:
            raise BookError(
                f"The recorder did not end occupation {occupation} within {wait_s:.0f} s.",
                "It will do so as soon as it can write; look with `fieldbook status`.",
                code="recorder_busy",
            )
        time.sleep(LOOK_S)


def request_leave(book_path: Path, occupation: int, observer: str) -> None:
    """Ask the running recorder, if any, to stop and leave the occupation open."""
    _ask(book_path, occupation, observer, "leave")


def _ask(book_path: Path, occupation: int, observer: str, action: str) -> None:
    book = Book.open(book_path, clock=SystemClock(), write=True)
    try:
        found = occupation_of(book, occupation)
        if not found.open:
            raise UsageError(
                f"Occupation {occupation} was ended already, by {found.ended_by}.", "Nothing is left to do."
            )
        if held(book_path):
            book.append("request", {"occupation": occupation, "action": action}, observer)
    finally:
        book.close()


def _ended(book_path: Path, occupation: int) -> bool:
    book = Book.open(book_path, clock=SystemClock(), write=False)
    try:
        return not occupation_of(book, occupation).open
    finally:
        book.close()


def _end_under_lock(book_path: Path, occupation: int) -> None:
    with RecorderLock(book_path):
        book = Book.open(book_path, clock=SystemClock(), write=True)
        try:
            if occupation_of(book, occupation).open:
                end_directly(book, occupation, SystemClock())
        finally:
            book.close_clean()
