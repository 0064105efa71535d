"""Books of other people on read-only media, and damaged ones: the one place that touches a book without SQLite.

A book that was copied to a stick together with its -wal cannot be read in place on a read-only medium, because
SQLite must make its -shm there. Only then, and only while this process has no connection to that book (closing a
file handle would drop the POSIX locks of the connection), the files are copied to a temporary folder. The same for a
rescue: what SQLite refuses to open is copied once and read from the copy, byte by byte; the book itself is never opened
for it again.
"""

from __future__ import annotations

import os
import shutil
import tempfile
from dataclasses import dataclass
from pathlib import Path

from fieldbook.errors import BookError

from .lock import held

PARTS = ("", "-wal", "-journal")


@dataclass
class Copy:
    """A copy in a temporary folder; whoever asked for it removes it."""

    path: Path
    folder: tempfile.TemporaryDirectory[str]

    def content(self, ending: str = "") -> bytes:
        """The bytes of the copy, or of what lies beside it; empty if that is not there."""
        try:
            return Path(str(self.path) + ending).read_bytes()
        except OSError:
            return b""

    def remove(self) -> None:
        """Delete the temporary folder."""
        self.folder.cleanup()


def size_beside(book: Path, ending: str) -> int:
    """Size in bytes of BOOK-wal or BOOK-journal; 0 = empty or absent. Looks, does not open."""
    try:
        return Path(os.path.realpath(book) + ending).stat().st_size
    except OSError:
        return 0


def copy_for_reading(book: Path, connections_here: int) -> Copy:
    """Copy BOOK with its -wal to a temporary folder.

    Raises:
        BookError: this process has a connection to the book, a recorder is on it, or it cannot be copied.
    """
    if connections_here or held(book):
        raise BookError(
            f"The book {book} is in use and its folder is read-only for you.",
            "Ask whoever records it for a copy, or for the right to write there.",
            code="read_only",
        )
    return _copied(book)


def copy_for_rescue(book: Path, connections_here: int) -> Copy:
    """Copy BOOK with its -wal and -journal to a temporary folder, whatever they hold.

    Raises:
        BookError: this process has a connection to the book, a recorder is on it, or it cannot be copied.
    """
    if connections_here or held(book):
        raise BookError(
            f"A recorder is recording into {book}.",
            "End that recording first; a running book needs no rescue.",
            code="locked",
        )
    return _copied(book)


def _copied(book: Path) -> Copy:
    folder = tempfile.TemporaryDirectory(prefix="fieldbook-")
    target = Path(folder.name) / "copy.book"
    real = os.path.realpath(book)
    try:
        for ending in PARTS:
            if ending and not size_beside(book, ending):
                continue
            shutil.copyfile(real + ending, str(target) + ending)
    except OSError as error:
        folder.cleanup()
        raise BookError(
            f"The book {book} cannot be copied to a temporary folder: {error.strerror}.",
            "Copy it by hand, with its -wal, to a folder you may write to.",
            code="cannot_open",
        ) from error
    return Copy(target, folder)
