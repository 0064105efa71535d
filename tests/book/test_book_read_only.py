"""Books on read-only media: in place where SQLite can, as a copy where a -wal must be read, never silently less."""

from __future__ import annotations

import os
import shutil
import sqlite3
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest
import small_books as small

from fieldbook.book import connect, foreign
from fieldbook.book.audit import audit_book
from fieldbook.book.lock import RecorderLock
from fieldbook.book.store import Book
from fieldbook.errors import BookError

pytestmark = pytest.mark.skipif(not hasattr(os, "geteuid"), reason="needs POSIX rights")
NOBODY = 65534


@contextmanager
def _stick(*files: Path) -> Iterator[Path]:
    """A folder that this process may read and not write, also when the tests run as root."""
    folder = Path(tempfile.mkdtemp(prefix="stick-"))
    for file in files:
        shutil.copy(file, folder)
    for file in folder.iterdir():
        file.chmod(0o444)
    folder.chmod(0o555)
    root = os.geteuid() == 0
    if root:
        os.seteuid(NOBODY)
    try:
        yield folder
    finally:
        if root:
            os.seteuid(0)
        folder.chmod(0o755)
        shutil.rmtree(folder)


def _beside(path: Path, ending: str) -> Path:
    return path.with_name(path.name + ending)


def test_a_plain_book_opens_in_place(tmp_path: Path) -> None:
    with _stick(small.ended(tmp_path / "a.book")) as folder:
        path = folder / "a.book"
        assert not connect.folder_is_writable(path)
        with Book.open(path, clock=small.clock()) as book:
            assert len(book.epochs(1)) == 50
            assert book.notes == []
        assert audit_book(path) == []
        with pytest.raises(BookError) as caught:
            Book.open(path, clock=small.clock(), write=True)
        assert caught.value.code in ("read_only", "cannot_open")
        with pytest.raises(BookError, match="lock file"):
            RecorderLock(path).acquire()


def test_a_book_left_in_wal_mode_opens_as_it_stands(tmp_path: Path) -> None:
    path = small.ended(tmp_path / "a.book")
    connection = sqlite3.connect(path)
    connection.execute("PRAGMA journal_mode=WAL").fetchone()
    connection.close()
    with _stick(path) as folder, Book.open(folder / "a.book", clock=small.clock()) as book:
        assert len(book.epochs(1)) == 50
        assert book.notes == ["read as it stands on a read-only medium"]
        assert not book.copied_without_wal


def test_a_book_with_its_wal_is_read_from_a_copy(tmp_path: Path) -> None:
    path = tmp_path / "a.book"
    with small.begun(path) as book:
        small.record(book, 1, 1, 33)
        with _stick(path, _beside(path, "-wal")) as folder:
            taken = folder / "a.book"
            with Book.open(taken, clock=small.clock()) as reader:
                copy = reader._connection._copy
                assert copy is not None
                assert copy.path.exists()
                assert len(reader.epochs(1)) == 33
                assert "copy in a temporary folder" in reader.notes[0]
            assert not copy.path.parent.exists()
            assert audit_book(taken) == []
            assert sorted(item.name for item in folder.iterdir()) == ["a.book", "a.book-wal"]


def test_a_copy_without_its_wal_on_a_stick_is_said_to_be_one(tmp_path: Path) -> None:
    path = tmp_path / "a.book"
    with small.begun(path) as book:
        book.append("recorder", {"occupation": 1, "state": "running", "program": "0"}, "R. Kell")
        book._connection.execute("PRAGMA wal_checkpoint(PASSIVE)").fetchall()
        small.record(book, 1, 1, 5)
        with _stick(path) as folder, Book.open(folder / "a.book", clock=small.clock()) as reader:
            assert reader.copied_without_wal


def test_nothing_is_copied_while_this_process_or_a_recorder_is_on_the_book(tmp_path: Path) -> None:
    path = tmp_path / "a.book"
    with small.begun(path):
        assert connect.connections_here(path) == 1
        with pytest.raises(BookError, match="in use"):
            foreign.copy_for_reading(path, connect.connections_here(path))
    with RecorderLock(path), pytest.raises(BookError, match="in use"):
        foreign.copy_for_reading(path, 0)


def test_a_copy_that_cannot_be_made_leaves_no_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(tempfile, "tempdir", str(tmp_path))
    with pytest.raises(BookError, match="cannot be copied"):
        foreign.copy_for_reading(tmp_path / "missing.book", 0)
    assert list(tmp_path.iterdir()) == []
