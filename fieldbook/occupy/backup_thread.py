"""Copies of the book to a second medium while it is recorded, by a thread that nothing waits for.

The thread has connections of its own and touches neither the writer nor what has arrived; while SQLite copies, the
interpreter is free. A copy begins every EVERY_S, or later where the medium is slow: it is busy at most a fifth of the
time. Whatever happens to the medium is a line of the status and an alarm, never an error of the recorder.
"""

from __future__ import annotations

import threading
from dataclasses import dataclass, replace
from pathlib import Path

from fieldbook.book.backup import target_of, write_copy
from fieldbook.clock import Clock
from fieldbook.errors import BookError, FieldbookError, UsageError

FIRST_S, EVERY_S, AGAIN_S = 5.0, 60.0, 10.0  # after a failure sooner: the stick may be back
BUSY_SHARE = 5
HALT_S, FINISH_S, LEAVE_S = 3.0, 60.0, 10.0
_WORDS = {
    "disk_full": "the medium of the copy is full",
    "read_only": "the medium of the copy is read-only",
    "cannot_open": "the medium of the copy cannot be opened",
    "disk_error": "the medium of the copy reports an error",
    "gone": "the medium of the copy is not there",
}


@dataclass(frozen=True)
class BackupStatus:
    """What became of the copies so far. `problem` is empty while they succeed."""

    path: str
    last_utc_ms: int | None = None  # the moment the last good copy shows the book at
    took_ms: int | None = None
    problem: str = ""


class BackupThread(threading.Thread):
    """Makes copies until it is told to finish.

    Args:
        book: the book that is being recorded.
        wanted: a file, or a folder for a copy under the book's name.
        clock: for the times of the status.
    """

    def __init__(self, book: Path, wanted: Path, clock: Clock, *, first_s: float = FIRST_S, every_s: float = EVERY_S):
        super().__init__(name="fieldbook-backup", daemon=True)
        self._book, self._wanted, self._clock = book, wanted, clock
        self._first_s, self._every_s = first_s, every_s
        self._halt = threading.Event()
        self._device: int | None = None  # of the medium that holds the last good copy
        self.status = BackupStatus(str(wanted))

    def run(self) -> None:
        """Copy, wait, copy, until halted."""
        wait_s = self._first_s
        while not self._halt.wait(wait_s):
            took_s = self._copied(last=False)
            wait_s = max(self._every_s, BUSY_SHARE * took_s)
            if self.status.problem:
                wait_s = min(wait_s, max(AGAIN_S, took_s))

    def halt(self) -> None:
        """Give up the copy at hand and make no more, so that the book can be closed. Waits a moment, not for ever."""
        self._halt.set()
        if self.is_alive():
            self.join(HALT_S)

    def last_copy(self, wait_s: float = FINISH_S) -> BackupStatus:
        """After `halt`, when the book is closed: the copy of everything, waited for so long and no longer."""
        if self.is_alive():
            self.status = replace(self.status, problem="the medium of the copy does not answer")
            return self.status
        last = threading.Thread(target=lambda: self._copied(last=True), name=self.name, daemon=True)
        last.start()
        last.join(wait_s)
        if last.is_alive():
            return replace(self.status, problem=f"the last copy was not finished within {wait_s:.0f} s")
        return self.status

    def _copied(self, *, last: bool) -> float:
        """One copy; the seconds it took."""
        began, moment = self._clock.monotonic_ms(), self._clock.utc_ms()
        try:
            target = target_of(self._wanted, self._book)
            self._look_for_medium(target)
            done = write_copy(
                self._book,
                target,
                stopped=(lambda: False) if last else self._halt.is_set,
                pause_s=0.0 if last else 0.005,
            )
        except FieldbookError as error:
            self.status = replace(self.status, problem=_words(error))
        except OSError as error:
            self.status = replace(self.status, problem=f"{_WORDS['gone']} ({error.strerror})")
        else:
            if done:
                took = self._clock.monotonic_ms() - began
                self._device = target.stat().st_dev
                self.status = BackupStatus(str(target), moment, took)
        return (self._clock.monotonic_ms() - began) / 1000

    def _look_for_medium(self, target: Path) -> None:
        """The folder of a stick that was pulled out can still be there, empty, on the disk below.

        Raises:
            BookError: it is another medium now, and no copy of before is on it.
        """
        if self._device is None or target.exists() or not target.parent.is_dir():
            return
        if target.parent.stat().st_dev != self._device:
            raise BookError(f"{target.parent} is not the medium of before.", "Put it back.", code="gone")


def _words(error: FieldbookError) -> str:
    if isinstance(error, UsageError):
        return error.text
    return _WORDS.get(error.code, error.text)
