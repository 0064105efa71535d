"""Room on the disk of the book: warned of in time, and recording stopped cleanly before there is none.

What a minute of recording needs is measured, not assumed: received bytes a second, each counted once although the
book keeps it in a third to a half of that; the rest is for the -wal and for the pages that sealing turns over.

    DISK LOW        less than two hours at the measured rate are left above the reserve, or less than LOW_BYTES
    stop            the reserve is reached: everything is committed, the occupation stays open, the state says why

The reserve (16 MiB, on a small disk a fiftieth of it) is what sealing, closing and the last entries need. A disk that another
program fills at once, past an eighth of the reserve, leaves no room for that: then commits are tried again and arriving
bytes wait in memory.
"""

from __future__ import annotations

import shutil
from dataclasses import dataclass
from pathlib import Path

from fieldbook.clock import Clock

LOOK_MS = 1_000
LOW_S = 2 * 3600
LOW_BYTES = 64 * 1024 * 1024
RESERVE_BYTES = 16 * 1024 * 1024
TOO_LATE = 8  # with less than this part of the reserve nothing can be closed any more: waiting is better
LEAST_RATE = 200.0  # bytes a second: less is no GNSS receiver, only one that has just begun


@dataclass(frozen=True)
class Room:
    """What is left: bytes, and seconds of recording above the reserve at the measured rate."""

    free_bytes: int
    seconds: float
    low: bool
    spent: bool

    @property
    def text(self) -> str:
        """For the alarm and the state."""
        size = self.free_bytes / 1e6
        if self.spent:
            return f"The disk of the book has {size:.1f} MB left: recording stopped, everything is committed."
        return f"The disk of the book has {size:.0f} MB left, enough for {self.seconds / 3600:.1f} h at this rate. Free some space."


class DiskGuard:
    """Looks at the disk once a second."""

    def __init__(self, book: Path, clock: Clock) -> None:
        self._folder, self._clock = book.absolute().parent, clock
        self._began_ms = clock.monotonic_ms()
        self._looked_ms: int | None = None
        self._first_bytes: int | None = None
        self.room: Room | None = None

    def look(self, received_bytes: int) -> Room | None:
        """The room as of the last look; None while nothing is known."""
        now = self._clock.monotonic_ms()
        if self._looked_ms is not None and now - self._looked_ms < LOOK_MS:
            return self.room
        if self._first_bytes is None:
            self._first_bytes = received_bytes
        self._looked_ms = now
        try:
            usage = shutil.disk_usage(self._folder)
        except OSError:
            return self.room  # the next commit will say what is wrong
        seconds = max(1.0, (now - self._began_ms) / 1000)
        rate = max(LEAST_RATE, (received_bytes - self._first_bytes) / seconds)
        self.room = room_of(usage.total, usage.free, rate)
        return self.room


def room_of(total_bytes: int, free_bytes: int, bytes_per_s: float) -> Room:
    """What so much free space means at this rate."""
    reserve = min(RESERVE_BYTES, total_bytes // 50)
    above = free_bytes - reserve
    seconds = max(0.0, above / bytes_per_s)
    low = seconds < LOW_S or free_bytes < min(LOW_BYTES, total_bytes // 10)
    return Room(free_bytes, seconds, low, above <= 0 and free_bytes > reserve // TOO_LATE)
