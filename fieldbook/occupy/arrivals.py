"""What has arrived and is not yet committed: the only thing the reader thread and the writer share.

The reader appends and never waits; the writer takes whole bursts. A burst ends after 20 ms without a byte, at 64 KiB,
or 250 ms after its first byte, whichever comes first, judged by the arrival times that are recorded with it, so that
a writer that was late cuts the same bursts as one that was on time. Above `limit_bytes` arriving bytes are counted
and dropped, and the count becomes an item of its own at the place where the bytes are missing: a loss is never silent.
Dropping goes on until half of the room is free again, so that a slow disk leaves one long hole and not a thousand
small ones.
"""

from __future__ import annotations

import threading
from collections import deque

from fieldbook.clock import Clock
from fieldbook.model.item import Item, ItemKind

SILENCE_MS = 20
LONGEST_MS = 250
LARGEST_BYTES = 64 * 1024
LIMIT_BYTES = 64 * 1024 * 1024
BATCH_BYTES = 1024 * 1024  # most that one commit takes when catching up: a transaction stays short


class Arrivals:
    """A bounded queue of items between one reader and one writer."""

    def __init__(self, clock: Clock, limit_bytes: int = LIMIT_BYTES) -> None:
        self._clock = clock
        self._limit = limit_bytes
        self._queue: deque[Item] = deque()
        self._changed = threading.Condition()
        self._dropped_now = 0
        self.waiting_bytes = 0
        self.dropped_bytes = 0
        self.last_byte_monotonic_ms: int | None = None
        self.last_byte_utc_ms: int | None = None
        self.ended = False  # the source has said that nothing more will come

    def add_bytes(self, data: bytes) -> None:
        """Received bytes, stamped with the time of now; dropped and counted when there is no room."""
        mono, utc = self._clock.monotonic_ms(), self._clock.utc_ms()
        with self._changed:
            self.last_byte_monotonic_ms, self.last_byte_utc_ms = mono, utc
            room = self._limit if not self._dropped_now else self._limit // 2
            if self.waiting_bytes + len(data) > room:
                self._dropped_now += len(data)
                self.dropped_bytes += len(data)
                return
            self._note_loss(mono, utc)
            self._queue.append(Item(ItemKind.BYTES, data, mono, utc))
            self.waiting_bytes += len(data)
            self._changed.notify()

    def add_event(self, kind: ItemKind, text: str) -> Item:
        """A link event, stamped with the time of now; returns its item."""
        mono, utc = self._clock.monotonic_ms(), self._clock.utc_ms()
        item = Item(kind, text.encode("utf-8"), mono, utc)
        with self._changed:
            self._note_loss(mono, utc)
            self._queue.append(item)
            self._changed.notify()
        return item

    def end(self) -> None:
        """Nothing more will come from this source."""
        with self._changed:
            self._note_loss(self._clock.monotonic_ms(), self._clock.utc_ms())
            self.ended = True
            self._changed.notify()

    @property
    def dropping(self) -> bool:
        """Bytes are being lost right now, because the disk cannot follow."""
        return self._dropped_now > 0

    def take(self, wait_s: float, *, all_of_it: bool = False) -> list[Item]:
        """The bursts that are complete, as items; an empty list if none is within `wait_s`.

        Args:
            wait_s: how long to wait for the first byte.
            all_of_it: do not wait for silence, take what is there (closing).
        """
        with self._changed:
            if not self._queue and not self.ended and wait_s > 0:
                self._changed.wait(wait_s)
            if not self._queue:
                return []
            items, taken = self._bursts(complete_only=not all_of_it)
            while not items:
                self._changed.wait(self._until_complete_s())
                items, taken = self._bursts(complete_only=True)
            for _ in range(taken):
                self.waiting_bytes -= self._size(self._queue.popleft())
            return items

    def _note_loss(self, mono: int, utc: int) -> None:
        if self._dropped_now:
            self._queue.append(Item(ItemKind.DROPPED, str(self._dropped_now).encode(), mono, utc))
            self._dropped_now = 0

    @staticmethod
    def _size(item: Item) -> int:
        return len(item.data) if item.kind is ItemKind.BYTES else 0

    def _until_complete_s(self) -> float:
        """Seconds until the burst at the head is over if no byte comes any more."""
        first = self._queue[0].monotonic_ms or 0
        last = self._queue[-1].monotonic_ms or 0
        due = min(last + SILENCE_MS, first + LONGEST_MS)
        return max(due - self._clock.monotonic_ms(), 1) / 1000

    def _bursts(self, *, complete_only: bool) -> tuple[list[Item], int]:
        """Finished items from the head of the queue, and how many queued pieces they take up."""
        done: list[Item] = []
        taken = taken_bytes = 0
        burst = _Burst()
        for item in self._queue:
            if burst.pieces and burst.is_over_before(item):
                done.append(burst.joined())
                taken += len(burst.pieces)
                taken_bytes += burst.size
                burst = _Burst()
                if taken_bytes >= BATCH_BYTES:
                    return done, taken
            if item.kind is ItemKind.BYTES:
                burst.add(item)
            else:
                done.append(item)
                taken += 1
        if burst.pieces and (not complete_only or self.ended or burst.is_over_at(self._clock.monotonic_ms())):
            done.append(burst.joined())
            taken += len(burst.pieces)
        return done, taken


class _Burst:
    """The pieces of one burst so far, and the rule that ends it."""

    def __init__(self) -> None:
        self.pieces: list[Item] = []
        self.size = 0
        self._first = self._last = 0

    def add(self, piece: Item) -> None:
        mono = piece.monotonic_ms or 0
        if not self.pieces:
            self._first = mono
        self._last = mono
        self.pieces.append(piece)
        self.size += len(piece.data)

    def is_over_before(self, item: Item) -> bool:
        """Whether `item` belongs to another burst, by recorded arrival times alone."""
        if item.kind is not ItemKind.BYTES or self.size + len(item.data) > LARGEST_BYTES:
            return True
        return self.is_over_at(item.monotonic_ms or 0)

    def is_over_at(self, mono: int) -> bool:
        """Whether a byte that came at `mono` would come too late for this burst."""
        return mono - self._last >= SILENCE_MS or mono - self._first >= LONGEST_MS or self.size >= LARGEST_BYTES

    def joined(self) -> Item:
        """The burst as one item with the time of its first byte."""
        first = self.pieces[0]
        if len(self.pieces) == 1:
            return first
        data = b"".join(piece.data for piece in self.pieces)
        return Item(ItemKind.BYTES, data, first.monotonic_ms, first.utc_ms)
