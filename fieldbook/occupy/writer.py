"""One occupation's way into the book: decode, commit, seal, and the entries that tell what happened.

In: items in the order of their arrival. Each call of `write` is one commit: the raw rows first and always, with
whichever epochs have closed by then. The decoder sees recorded items only and in recorded order, so a rebuild from the
raw rows cannot differ. `restore.catch_up` puts a new writer where an earlier one stopped.

A commit that fails (disk full, book busy) is tried again; meanwhile arriving bytes wait in memory.
"""

from __future__ import annotations

import hashlib
import time
from collections.abc import Callable, Iterable
from dataclasses import dataclass, field
from datetime import date, timedelta

from fieldbook import __version__
from fieldbook.book.store import Book
from fieldbook.clock import Clock, utc_ms_of, utc_text
from fieldbook.errors import BookError
from fieldbook.model.canonical import Tree, fixed
from fieldbook.model.epoch import DAY_MS, Epoch
from fieldbook.model.item import Item, ItemKind
from fieldbook.model.recorder import RecorderState
from fieldbook.model.state import Occupation
from fieldbook.nmea.decoder import Decoder
from fieldbook.occupy.rebuild import decoder_options
from fieldbook.occupy.source_warnings import finding_of
from fieldbook.occupy.spans import Claimed, Span

SEAL_ROWS, SEAL_MS = 60, 60_000
STATE_MS = 250
RETRY_S = 0.5
PASSING = frozenset({"busy", "disk_full", "disk_error", "read_only", "cannot_open"})  # may be better in a moment


@dataclass
class _Break:
    """A hole in the recording that is not closed yet."""

    reason: str
    from_utc_ms: int


@dataclass
class Heard:
    """What an occupation has received so far."""

    received_bytes: int = 0
    epochs: int = 0
    span: Span = field(default_factory=Span)
    last_utc_ms: int | None = None  # arrival of the latest burst; None for files
    last_item_utc_ms: int = 0  # arrival of the latest item of any kind


class Writer:
    """Writes one occupation. Not thread-safe: one thread writes."""

    def __init__(
        self,
        book: Book,
        occupation: Occupation,
        clock: Clock,
        *,
        claimed: Iterable[Claimed] = (),
        patience: Callable[[], bool] = lambda: True,
    ) -> None:
        self._book, self._occupation, self._clock = book, occupation, clock
        self._number = occupation.number
        self._claimed = list(claimed)
        self._patience = patience
        self._break: _Break | None = None
        self._date: date | None = occupation.day0
        self._rows = 0
        self._sealed_ms = clock.monotonic_ms()
        self._state_ms = 0
        self._hash = hashlib.sha256()
        self.decoder = Decoder(decoder_options(occupation))
        self.heard = Heard()
        self.findings: list[Tree] = []
        self.state = RecorderState(
            occupation=self._number,
            mark=occupation.mark,
            observer=occupation.observer,
            program=f"fieldbook {__version__}",
            link=occupation.link,
            started_utc_ms=clock.utc_ms(),
        )

    @property
    def received_sha256(self) -> str:
        """Of the received bytes alone."""
        return self._hash.hexdigest()

    def options_changed(self, occupation: Occupation) -> None:
        """Go on with the decoder options that new entries give; everything recorded so far is decoded again."""
        self._occupation = occupation
        self.decoder = Decoder(decoder_options(occupation))
        self._hash, self.heard, self._break = hashlib.sha256(), Heard(), None
        for item in self._book.items(self._number):
            self.take(item)
        self.decode_again()
        self.note_date()

    def decode_again(self) -> None:
        """Replace all epochs by what a fresh decoder makes of all items."""
        again = Decoder(decoder_options(self._occupation))
        items = self._book.items(self._number)
        epochs = [epoch for item in items for epoch in again.feed(item)]
        self._persist(lambda: self._book.replace_epochs(self._number, epochs))

    def resumed(self, *, live: bool) -> None:
        """Enter that a new recorder took the occupation up again, and that a live link was not heard meanwhile."""
        now = self._clock.utc_ms()
        since = max(self.heard.last_item_utc_ms, self._last_sign_ms())
        self.append("resumed", after_s=max(0, (now - since) // 1000))
        if live:
            heard = self.heard.last_utc_ms or utc_ms_of(self._occupation.started_utc)
            self._break = self._break or _Break("recorder stopped", heard)

    def write_raw(self, items: list[Item]) -> None:
        """Commit these items; they are decoded when `restore.catch_up` comes by."""
        if items:
            self.commit(items, [])
            self._rows += len(items)
            self.seal_if_due()

    def write(self, items: list[Item]) -> None:
        """Decode and commit these items, then enter what they tell (gap, date, overlap)."""
        self._book.prepare(items)  # compressed while they are decoded
        epochs = [epoch for item in items for epoch in self.take(item, fresh=True)]
        self.commit(items, epochs)
        self._rows += len(items)
        if epochs:
            self.note_date()
            self._note_overlap()
        self.seal_if_due()

    def seal_if_due(self) -> None:
        """Seal the raw rows when there are 60 of them or the oldest is 60 s old."""
        now = self._clock.monotonic_ms()
        if self._rows >= SEAL_ROWS or (self._rows and now - self._sealed_ms >= SEAL_MS):
            self.seal()

    def seal(self) -> None:
        """Seal what is not sealed."""
        self._persist(lambda: self._book.seal(self._number))
        self._rows = 0
        self._sealed_ms = self._clock.monotonic_ms()

    def show_state(self, *, now: bool = False) -> None:
        """Write the heartbeat row, at most four times a second unless `now`."""
        if now or self._clock.monotonic_ms() - self._state_ms >= STATE_MS:
            self.commit([], [], with_state=True)

    def append(self, kind: str, **body: object) -> None:
        """One entry about this occupation, signed with the occupation's observer."""
        tree: Tree = {"occupation": self._number, **body}
        self._persist(lambda: self._book.append(kind, tree, self._occupation.observer))

    def finish(self, reason: str, *, live: bool) -> None:
        """End the occupation: last epoch closed, everything sealed, the `end` entry, chunks re-packed."""
        mono, utc = (self._clock.monotonic_ms(), self._clock.utc_ms()) if live else (None, None)
        last = Item(ItemKind.END, reason.encode("utf-8"), mono, utc)
        epochs = self.take(last) + self._counted(self.decoder.finish())
        self.state.link_state = "ended"
        self.commit([last], epochs, with_state=True)
        self.note_date()
        self._note_overlap()
        self._note_source()
        self.seal()
        self.append(
            "end",
            by=reason,
            epochs=self.heard.epochs,
            received_bytes=self.heard.received_bytes,
            received_sha256=self.received_sha256,
        )
        self._persist(lambda: self._book.pack(self._number))

    def take(self, item: Item, *, fresh: bool = False) -> list[Epoch]:
        """Let the decoder have a recorded item; a `fresh` one also gives its entries (gap)."""
        self.heard.last_item_utc_ms = item.utc_ms or 0
        if item.kind is ItemKind.BYTES:
            self._hash.update(item.data)
            self.heard.received_bytes += len(item.data)
            self.heard.last_utc_ms = item.utc_ms
        elif item.kind is ItemKind.LOST:
            since = self.heard.last_utc_ms or item.utc_ms or 0
            self._break = _Break(item.data.decode("utf-8", "replace"), since)
        elif item.kind is ItemKind.REOPENED:
            if fresh:
                self._gap(item)
            self._break = None
        return self._counted(self.decoder.feed(item))

    def _counted(self, epochs: list[Epoch]) -> list[Epoch]:
        self.heard.epochs += len(epochs)
        self.heard.span.add(epochs)
        if epochs:
            _show_epoch(self.state, epochs[-1], self.decoder.day0)
        return epochs

    def _gap(self, item: Item) -> None:
        if self._break is None:
            return
        until = item.utc_ms or self._clock.utc_ms()
        self.append(
            "gap",
            reason=self._break.reason,
            from_utc=utc_text(self._break.from_utc_ms),
            to_utc=utc_text(until),
            seconds=fixed((until - self._break.from_utc_ms) / 1000, 1),
        )

    def _last_sign_ms(self) -> int:
        own = [
            utc_ms_of(entry.utc)
            for entry in self._book.entries()
            if entry.kind in ("occupation", "recorder") and entry.body.get("occupation") == self._number
        ]
        state = self._book.recorder_state()
        if state is not None and state.occupation == self._number and state.last_commit_utc_ms:
            own.append(state.last_commit_utc_ms)
        return max(own, default=0)

    def note_date(self) -> None:
        """Enter the date of day 0 once the receiver has given it."""
        day0 = self.decoder.day0
        if day0 is not None and day0 != self._date and self._occupation.day0_source != "decision":
            self._date = day0
            self.append("date", date=day0.isoformat(), source=self.decoder.day0_source)

    def _note_overlap(self) -> None:
        times = self.heard.span.utc_ms(self.decoder.day0, self._occupation.rollover_weeks)
        if times is None or not self._claimed:
            return
        for other in [item for item in self._claimed if item.overlaps(times)]:
            self._claimed.remove(other)
            text = f"The fix times overlap those of {other}."
            self.find("overlap", "stop", text, {"with_occupation": other.occupation})

    def _note_source(self) -> None:
        for code in self.decoder.warnings:
            severity, text = finding_of(code)
            self.find(code, severity, text, {})
        if self.heard.epochs and not self.heard.span.fixes:
            self.find("no_fix", "caution", "No epoch of this occupation has a fix.", {"epochs": self.heard.epochs})

    def note_damage(self, wrong: str) -> None:
        """Enter that items no entry covered yet are not as an earlier recorder wrote them: sealed now, they would pass."""
        text = f"Before this recorder took the occupation up again, its book was damaged: {wrong}."
        self.find("tail_damaged", "caution", text, {})

    def find(self, code: str, severity: str, text: str, figures: Tree) -> None:
        """Enter a finding of this occupation."""
        self.findings.append({"code": code, "severity": severity, "text": text, "figures": figures})
        self.append("finding", code=code, severity=severity, text=text, figures=figures)

    def commit(self, items: list[Item], epochs: list[Epoch], *, with_state: bool = False) -> None:
        """One commit, with the heartbeat where it is due."""
        began = self._clock.monotonic_ms()
        state = self.state if with_state or began - self._state_ms >= STATE_MS else None
        if state is not None:
            self._fill(state)
        began_ns = time.perf_counter_ns()
        self._persist(lambda: self._book.write_burst(self._number, items, epochs, state))
        if items:
            self.state.last_commit_took_ms = round((time.perf_counter_ns() - began_ns) / 1e6, 3)
            self.state.last_commit_utc_ms = self._clock.utc_ms()
        if state is not None:
            self._state_ms = began

    def _fill(self, state: RecorderState) -> None:
        state.received_bytes, state.epochs = self.heard.received_bytes, self.heard.epochs
        state.counters = dict(self.decoder.counters)
        state.sentences = dict(self.decoder.sentences)
        state.sky = list(self.decoder.sky)

    def _persist(self, action: Callable[[], object]) -> None:
        """Do it, and do it again while the book cannot be written and there is patience left."""
        while True:
            try:
                action()
            except BookError as error:
                if error.code not in PASSING or not self._patience():
                    raise
                time.sleep(RETRY_S)
            else:
                return


def _show_epoch(state: RecorderState, epoch: Epoch, day0: date | None) -> None:
    """The latest epoch in the words of the head line."""
    state.quality, state.satellites, state.station = epoch.quality, epoch.satellites, epoch.station
    state.age_s = None if epoch.age_ms is None else epoch.age_ms / 1000
    state.hdop = None if epoch.hdop_milli is None else epoch.hdop_milli / 1000
    state.pdop = None if epoch.pdop_milli is None else epoch.pdop_milli / 1000
    if epoch.time_ms is None:
        return
    whole, thousandths = divmod(epoch.time_ms, 1000)
    clock = f"{whole // 3600:02d}:{whole // 60 % 60:02d}:{whole % 60:02d}"
    if whole * 1000 >= DAY_MS:  # a leap second is shown as what it is
        clock = f"23:59:{60 + whole - DAY_MS // 1000:02d}"
    if day0 is None or epoch.day is None:
        state.fix_utc = clock
    else:
        state.fix_utc = f"{day0 + timedelta(days=epoch.day):%Y-%m-%d}T{clock}.{thousandths:03d}Z"
