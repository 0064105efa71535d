"""What recording a live link and recording a file have in common: restoring, requests, the limit, leaving, ending."""

from __future__ import annotations

import threading
from collections.abc import Callable
from dataclasses import dataclass

from fieldbook import __version__
from fieldbook.book.store import Book
from fieldbook.book.tail import problem_of_book
from fieldbook.clock import Clock
from fieldbook.links.address import LinkAddress
from fieldbook.links.base import Link
from fieldbook.model.recorder import RecorderState
from fieldbook.model.state import Occupation
from fieldbook.occupy.backup_thread import BackupThread
from fieldbook.occupy.disk_guard import DiskGuard
from fieldbook.occupy.rebuild import decoder_options, occupation_of
from fieldbook.occupy.restore import Meanwhile, catch_up
from fieldbook.occupy.writer import Writer

WAIT_S = 0.1
POLL_MS = 250
DISK_TOO_SLOW, DISK_LOW, BACKUP_FAILED = "disk_too_slow", "disk_low", "backup_failed"


@dataclass(frozen=True)
class Source:
    """A link that is open, and its address."""

    link: Link
    address: LinkAddress


@dataclass(frozen=True)
class Wishes:
    """What whoever started the recorder wants: when to stop, and what to be told."""

    clock: Clock
    stop: threading.Event
    limit_s: float | None
    on_start: Callable[[], None]
    on_state: Callable[[RecorderState], None]
    backup: BackupThread | None = None
    disk: DiskGuard | None = None


class Run:
    """What both kinds of run share: restoring, requests, limit, leaving."""

    def __init__(
        self,
        book: Book,
        occupation: Occupation,
        writer: Writer,
        source: Source,
        wishes: Wishes,
    ) -> None:
        self._book, self._occupation, self._writer = book, occupation, writer
        self._link, self._address = source.link, source.address
        self._wishes, self._clock = wishes, wishes.clock
        self._until_ms = None if wishes.limit_s is None else self._clock.monotonic_ms() + round(wishes.limit_s * 1000)
        self._polled_ms = self._clock.monotonic_ms()
        self._version = book.data_version()
        self._seen_seq = book.state().head_seq
        self._shown_ms = 0
        self.resumed = next(iter(book.items(occupation.number)), None) is not None
        self._told: set[str] = set()
        writer.state.link = source.address.text

    def go(self) -> str | None:
        """Record; returns what ended the occupation, or None if it is left open."""
        raise NotImplementedError

    def close(self) -> None:
        """Let the link go, whatever happened."""
        self._link.close()

    def _begin(self, meanwhile: Meanwhile | None = None) -> None:
        if self.resumed:
            if wrong := problem_of_book(self._book.path):
                self._writer.note_damage(wrong)
            catch_up(self._writer, self._book, self._occupation.number, meanwhile)
            if meanwhile is None:
                self._writer.resumed(live=False)
        self._writer.append("recorder", state="running", program=f"fieldbook {__version__}")
        self._book.write_back()  # a copy without the -wal must know that a recorder was running
        self._writer.state.link_state = "open"
        self._writer.show_state(now=True)

    def _leave(self) -> None:
        self._writer.seal()
        self._writer.append("recorder", state="closed", program=f"fieldbook {__version__}")
        self._writer.state.link_state = "closed"
        self._writer.show_state(now=True)

    def _end(self, reason: str) -> None:
        self._writer.finish(reason, live=self._address.live)
        self._writer.append("recorder", state="closed", program=f"fieldbook {__version__}")

    def _wanted(self) -> str | None:
        """`leave`, the reason for an end, or None to go on."""
        if self._wishes.stop.is_set() or self._writer.state.stopped:
            return "leave"
        now = self._clock.monotonic_ms()
        if self._until_ms is not None and now >= self._until_ms:
            return "time limit"
        if now - self._polled_ms < POLL_MS:
            return None
        self._polled_ms = now
        version = self._book.data_version()
        if version == self._version:
            return None
        self._version = version
        return self._asked()

    def _asked(self) -> str | None:
        """What the entries that others wrote since the last look ask for."""
        wanted = None
        for entry in self._book.entries(after_seq=self._seen_seq):
            self._seen_seq = entry.seq
            if entry.kind == "strike":
                self._note_options()
            if entry.body.get("occupation") != self._occupation.number:
                continue
            if entry.kind == "request":
                wanted = "operator" if entry.body.get("action") == "end" else "leave"
            elif entry.kind in ("decision", "setup"):
                self._note_options()
        return wanted

    def _note_options(self) -> None:
        """Decode again if an entry has changed an option of the decoder (talker, missing checksums)."""
        occupation = occupation_of(self._book, self._occupation.number)
        if decoder_options(occupation) != decoder_options(self._occupation):
            self._writer.options_changed(occupation)
        self._occupation = occupation

    def _show(self) -> None:
        now = self._clock.monotonic_ms()
        if now - self._shown_ms >= POLL_MS:
            self._shown_ms = now
            self._note_backup()
            self._note_disk()
            self._writer.show_state()
            self._wishes.on_state(self._writer.state)

    def _note_backup(self) -> None:
        """Copy the status of the copies into the heartbeat."""
        if self._wishes.backup is None:
            return
        state, status = self._writer.state, self._wishes.backup.status
        state.backup_path, state.backup_utc_ms = status.path, status.last_utc_ms
        state.backup_problem = status.problem
        self._alarm(BACKUP_FAILED, bool(status.problem), f"No copy of the book is being made: {status.problem}")

    def _note_disk(self) -> None:
        """Warn before the disk is full, and stop while everything can still be committed."""
        room = None if self._wishes.disk is None else self._wishes.disk.look(self._writer.heard.received_bytes)
        if room is None:
            return
        state = self._writer.state
        state.disk_free_bytes, state.disk_left_s = room.free_bytes, round(room.seconds)
        self._alarm(DISK_LOW, room.low and (self._address.live or room.spent), room.text)
        if room.spent and not state.stopped:
            state.stopped = room.text

    def _alarm(self, code: str, on: bool, text: str) -> None:
        """Show an alarm while it holds; enter it once (a disk that is too slow each time: each is a loss)."""
        alarms = self._writer.state.alarms
        if on and code not in alarms:
            alarms.append(code)
            if code not in self._told or code == DISK_TOO_SLOW:
                self._told.add(code)
                self._writer.append("alarm", code=code, text=text, acknowledged=False)
        elif not on and code in alarms:
            alarms.remove(code)
