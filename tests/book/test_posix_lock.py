"""The lost POSIX lock, repeated: why no code may open a book except through SQLite.

Closing any file handle on a path drops all POSIX locks the process holds there, SQLite's too. After one
`open(book).close()` in a recorder, the next process that closes the book believes it is the last one, writes the
WAL back and deletes it; the recorder goes on committing into a deleted file. Here a recorder process commits and
says so, other processes open and close the book, the recorder is killed, and the acknowledged commits are counted.
"""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest
import small_books as small

from fieldbook.book.audit import audit_book
from fieldbook.book.store import Book

pytestmark = pytest.mark.skipif(sys.platform == "win32", reason="POSIX locks")

HERE = str(Path(__file__).parent)

RECORDER = """
import pathlib, sys
sys.path.insert(0, {here!r})
import small_books as small
from fieldbook.book.audit import audit_book
from fieldbook.book.connect import open_reader
from fieldbook.book.foreign import size_beside
from fieldbook.book.lock import RecorderLock, held
from fieldbook.book.store import Book
path = pathlib.Path(sys.argv[1])
lock = RecorderLock(path)
lock.acquire()
book = Book.open(path, clock=small.clock(), write=True)
number = 0
for word in sys.stdin:
    if word == "touch\\n":
        {touch}
    else:
        number += 1
        book.write_burst(1, [small.item(number)], [small.epoch(number)])
    print("done", flush=True)
"""

# Everything the product does with a book besides recording, in the recorder's own process.
OURS = """
held(path), size_beside(path, "-wal"), path.stat(), path.exists()
assert audit_book(path) == []
with Book.open(path, clock=small.clock()) as reader:
    reader.state(), reader.epochs(1), list(reader.items(1)), reader.recorder_state(), reader.copied_without_wal
with Book.open(path, clock=small.clock(), write=True) as screen:
    screen.append("remark", {"occupation": 1, "text": "x"}, "S. Marl")
other = RecorderLock(path)
try:
    other.acquire(wait_s=0)
except Exception:
    pass
other.release()
"""
FORBIDDEN = "open(path, 'rb').close()"

OTHER_PROCESS = """
import pathlib, sys
from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
Book.open(pathlib.Path(sys.argv[1]), clock=SystemClock(), write=True).close()
"""


def _acknowledged_and_kept(path: Path, touch: str) -> tuple[int, int]:
    """Commits acknowledged by a recorder, and those found in the book after it was killed."""
    small.begun(path).close()
    code = RECORDER.format(here=HERE, touch=touch.strip().replace("\n", "\n        "))
    recorder = subprocess.Popen(
        [sys.executable, "-c", code, str(path)], stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True
    )
    assert recorder.stdin is not None
    assert recorder.stdout is not None

    def ask(word: str) -> None:
        recorder.stdin.write(word + "\n")
        recorder.stdin.flush()
        assert recorder.stdout.readline() == "done\n"

    acknowledged = 0
    try:
        ask("commit")
        ask("touch")
        subprocess.run([sys.executable, "-c", OTHER_PROCESS, str(path)], check=True)
        acknowledged = 1
        for _ in range(20):
            ask("commit")
            acknowledged += 1
        subprocess.run([sys.executable, "-c", OTHER_PROCESS, str(path)], check=True)
    finally:
        recorder.kill()
        recorder.communicate()
    with Book.open(path, clock=small.clock()) as book:
        return acknowledged, len(list(book.items(1)))


def test_our_own_ways_to_look_at_a_book_lose_nothing(tmp_path: Path) -> None:
    path = tmp_path / "a.book"
    assert _acknowledged_and_kept(path, OURS) == (21, 21)
    assert audit_book(path) == []


def test_one_open_and_close_in_the_recorder_loses_commits(tmp_path: Path) -> None:
    """If this fails, SQLite or the system no longer needs the rule; the architecture test may then be relaxed."""
    acknowledged, kept = _acknowledged_and_kept(tmp_path / "a.book", FORBIDDEN)
    assert acknowledged == 21
    assert kept < acknowledged
