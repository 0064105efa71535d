"""The recorder: one link, one occupation, one book, in a process of its own.

    link --> ReaderThread --> Arrivals --> Writer --> book            live links
    link ------------------------------> Writer --> book            files: no arrival times, large commits

The lock BOOK.lock is held from the first to the last moment; it is what 'a recorder is running' means. The recorder
ends the occupation at the end of a file, at the time limit, or on a `request` entry; on SIGTERM, SIGINT, a `leave`
request or a crash the occupation stays open and the next recorder takes it up. SIGHUP is ignored: closing a terminal
must not cost an epoch. Neither Textual nor numpy nor pyproj is loaded here.
"""

from __future__ import annotations

import signal
import threading
from collections.abc import Callable
from contextlib import suppress
from dataclasses import dataclass, field
from pathlib import Path
from types import FrameType

from fieldbook.book.lock import RecorderLock
from fieldbook.book.place import warnings_of_place
from fieldbook.book.store import Book
from fieldbook.clock import Clock
from fieldbook.errors import BookError, FieldbookError, UsageError
from fieldbook.links import open_link
from fieldbook.links.address import LinkAddress, parse_link
from fieldbook.links.base import Link
from fieldbook.model.canonical import Tree
from fieldbook.model.recorder import RecorderState
from fieldbook.model.state import Occupation
from fieldbook.occupy.backup_thread import FINISH_S, LEAVE_S, BackupStatus, BackupThread
from fieldbook.occupy.disk_guard import DiskGuard
from fieldbook.occupy.file_run import FileRun
from fieldbook.occupy.live_run import LiveRun
from fieldbook.occupy.rebuild import occupation_of
from fieldbook.occupy.run import BACKUP_FAILED, Source, Wishes
from fieldbook.occupy.spans import claimed_times
from fieldbook.occupy.writer import Writer

PATIENCE_MS = 10_000


@dataclass
class RecorderResult:
    """What a recorder did before it stopped."""

    occupation: int
    resumed: bool
    ended_by: str | None  # None: the occupation is left open
    epochs: int
    fixes: int
    received_bytes: int
    dropped_bytes: int
    counters: dict[str, int]
    sentences: dict[str, int]
    findings: list[Tree] = field(default_factory=list)
    backup: BackupStatus | None = None  # the last copy; None: none was asked for


class Recorder:
    """Records one occupation that is already in the book.

    Args:
        book_path: the book.
        occupation: number of an open occupation.
        clock: the host's clock.
        address: another link than the one the occupation was begun with (a port that changed its name).
        link: the link if it is open already.
        lock: the lock if it is held already; it is released at the end all the same.
        backup: file or folder for copies of the book, on another medium.
        on_start: called when bytes can come in.
        on_state: called with the heartbeat about four times a second.
    """

    def __init__(
        self,
        book_path: Path,
        occupation: int,
        clock: Clock,
        *,
        address: LinkAddress | None = None,
        link: Link | None = None,
        lock: RecorderLock | None = None,
        backup: Path | None = None,
        on_start: Callable[[], None] = lambda: None,
        on_state: Callable[[RecorderState], None] = lambda _state: None,
    ) -> None:
        self._path, self._number, self._clock = book_path, occupation, clock
        self._address, self._link = address, link
        self._lock = lock or RecorderLock(book_path)
        self._on_start, self._on_state = on_start, on_state
        self._backup = None if backup is None else BackupThread(book_path, backup, clock)
        self._stop = threading.Event()
        self._stopped_ms: int | None = None
        self._ended, self._spent = False, ""

    def run(self, stop: threading.Event, limit_s: float | None = None) -> RecorderResult:
        """Record until the source ends, the limit is reached, somebody asks to end, or `stop` is set.

        Raises:
            BookError: locked by another recorder (code "locked"), or the book cannot be written.
            LinkError: the link cannot be opened, or was lost for good.
            BookError: the disk is nearly full (code "disk_low"): all is committed, the occupation is left open.
            UsageError: no such open occupation, or a file that is not the one recorded so far.
        """
        self._stop = stop
        self._lock.acquire()
        try:
            book = Book.open(self._path, clock=self._clock, write=True)
            try:
                result = self._record(book, limit_s)
            finally:
                if self._backup is not None:
                    self._backup.halt()
                book.close_clean()
        finally:
            self._lock.release()
            self._copy_last()
        if self._spent:
            raise BookError(
                self._spent, "Free some space and run the same command: the occupation goes on.", code="disk_low"
            )
        result.backup = None if self._backup is None else self._backup.status
        return result

    def _copy_last(self) -> None:
        """The copy of everything, when the book is closed. What goes wrong with it is an alarm in the book."""
        if self._backup is None:
            return
        status = self._backup.last_copy(FINISH_S if self._ended else LEAVE_S)
        if status.problem:
            with suppress(FieldbookError), Book.open(self._path, clock=self._clock, write=True) as book:
                text = f"The last copy of the book was not made: {status.problem}"
                body: Tree = {"occupation": self._number, "code": BACKUP_FAILED, "text": text, "acknowledged": False}
                book.append("alarm", body, "recorder")

    def _record(self, book: Book, limit_s: float | None) -> RecorderResult:
        occupation = occupation_of(book, self._number)
        if not occupation.open:
            raise UsageError(
                f"Occupation {self._number} was ended by {occupation.ended_by}.", "Begin another one with --new."
            )
        address = self._address or parse_link(occupation.link, Path.cwd())
        claimed = claimed_times(book, occupation.session, besides=self._number) if address.live else ()
        writer = Writer(book, occupation, self._clock, claimed=claimed, patience=self._has_patience)
        link = self._link or open_link(address, clock=self._clock)
        self._warn_of_place(writer, occupation)
        disk = DiskGuard(self._path, self._clock)
        wishes = Wishes(self._clock, self._stop, limit_s, self._on_start, self._on_state, self._backup, disk)
        kind = LiveRun if address.live else FileRun
        run = kind(book, occupation, writer, Source(link, address), wishes)
        if self._backup is not None:
            self._backup.start()
        try:
            ended_by = run.go()
        finally:
            run.close()
        self._ended, self._spent = ended_by is not None, writer.state.stopped
        return RecorderResult(
            occupation=self._number,
            resumed=run.resumed,
            ended_by=ended_by,
            epochs=writer.heard.epochs,
            fixes=writer.heard.span.fixes,
            received_bytes=writer.heard.received_bytes,
            dropped_bytes=writer.state.dropped_bytes,
            counters=dict(writer.decoder.counters),
            sentences=dict(writer.decoder.sentences),
            findings=writer.findings,
        )

    def _warn_of_place(self, writer: Writer, occupation: Occupation) -> None:
        """A network or a mirrored folder: a finding of the occupation, once."""
        known = {entry.body["code"] for entry in occupation.findings}
        for warning in warnings_of_place(self._path):
            if warning.code not in known:
                writer.find(warning.code, "caution", warning.text, {"seen": warning.seen})

    def _has_patience(self) -> bool:
        """Whether a commit that failed is tried again: while recording always, after a stop for ten seconds."""
        if not self._stop.is_set():
            return True
        now = self._clock.monotonic_ms()
        self._stopped_ms = self._stopped_ms or now
        return now - self._stopped_ms < PATIENCE_MS


class StopSignals:
    """Within: SIGTERM and SIGINT set `stop`, SIGHUP does nothing. Main thread only."""

    def __init__(self, stop: threading.Event) -> None:
        self._stop = stop
        self._before: dict[int, object] = {}

    def __enter__(self) -> StopSignals:
        for name in ("SIGTERM", "SIGINT", "SIGBREAK"):
            if hasattr(signal, name):
                number = getattr(signal, name)
                self._before[number] = signal.signal(number, self._asked)
        if hasattr(signal, "SIGHUP"):
            self._before[signal.SIGHUP] = signal.signal(signal.SIGHUP, signal.SIG_IGN)
        return self

    def __exit__(self, *_: object) -> None:
        for number, handler in self._before.items():
            signal.signal(number, handler)  # type: ignore[arg-type]

    def _asked(self, _number: int, _frame: FrameType | None) -> None:
        self._stop.set()
