"""`python -m fieldbook.occupy BOOK OCCUPATION [--link LINK] [--backup PATH]`: the detached recorder, started by `detached`.

One line on stdout says `started`, or the error as JSON; then stdout goes to the null device, because the process that
reads it may be gone at any time. A later failure becomes an alarm in the book where that is still possible.
"""

from __future__ import annotations

import contextlib
import os
import sys
import threading
from pathlib import Path

from fieldbook.book.backup import refuse_other, target_of
from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.errors import FieldbookError
from fieldbook.links.address import parse_link
from fieldbook.occupy.detached import STARTED, error_line
from fieldbook.occupy.recorder import Recorder, StopSignals
from fieldbook.settings.user import user_backup


class _Voice:
    """Says one line to the starter, then is silent for ever."""

    def __init__(self) -> None:
        self.spoken = False

    def say(self, text: str) -> None:
        if self.spoken:
            return
        self.spoken = True
        with contextlib.suppress(OSError):  # the starter is gone; the recording goes on all the same
            os.write(1, text.encode("utf-8") + b"\n")
        null = os.open(os.devnull, os.O_RDWR)
        os.dup2(null, 1)
        os.dup2(null, 2)
        os.close(null)


def main(arguments: list[str]) -> int:
    """Record until the occupation ends or the process is told to stop; returns the exit code."""
    book_path, occupation = Path(arguments[0]), int(arguments[1])
    given = dict(zip(arguments[2::2], arguments[3::2], strict=False))
    address = parse_link(given["--link"], Path.cwd()) if "--link" in given else None
    voice, stop = _Voice(), threading.Event()
    try:
        backup = Path(given["--backup"]) if "--backup" in given else user_backup()
        if backup is not None:
            refuse_other(target_of(backup, book_path), book_path)
        recorder = Recorder(
            book_path,
            occupation,
            SystemClock(),
            address=address,
            backup=backup,
            on_start=lambda: voice.say(STARTED),
        )
        with StopSignals(stop):
            recorder.run(stop)
    except FieldbookError as error:
        if voice.spoken:
            _alarm(book_path, occupation, error)
        voice.say(error_line(error))
        return int(error.exit_code)
    return 0


def _alarm(book_path: Path, occupation: int, error: FieldbookError) -> None:
    """Leave the reason in the book, for whoever looks next."""
    try:
        book = Book.open(book_path, clock=SystemClock(), write=True)
        try:
            body = {
                "occupation": occupation,
                "code": "recorder_stopped",
                "text": str(error),
                "acknowledged": False,
            }
            book.append("alarm", body, "recorder")
        finally:
            book.close()
    except FieldbookError:
        pass  # the book cannot be written: that is why the recorder stopped


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
