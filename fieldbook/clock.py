"""The only place that asks the host what time it is.

Everything below `occupy` receives times as values, so that a rebuild, a test and a live run cannot differ.
"""

from __future__ import annotations

import time
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Protocol


class Clock(Protocol):
    """Two readings of time: one that never goes back, one that says the date."""

    def monotonic_ms(self) -> int:
        """Milliseconds of a clock that never goes back; zero is arbitrary."""
        ...

    def utc_ms(self) -> int:
        """Milliseconds since 1970-01-01T00:00:00Z as the host believes."""
        ...


class SystemClock:
    """The host's clocks."""

    def monotonic_ms(self) -> int:
        """Milliseconds of the host's monotonic clock."""
        return time.monotonic_ns() // 1_000_000

    def utc_ms(self) -> int:
        """Milliseconds since 1970 by the host's wall clock."""
        return time.time_ns() // 1_000_000


@dataclass
class FakeClock:
    """A clock that stands still until told otherwise (tests, simulated receiver)."""

    now_monotonic_ms: int = 0
    now_utc_ms: int = 0

    def monotonic_ms(self) -> int:
        """The set value."""
        return self.now_monotonic_ms

    def utc_ms(self) -> int:
        """The set value."""
        return self.now_utc_ms

    def advance(self, milliseconds: int) -> None:
        """Move both clocks forward."""
        self.now_monotonic_ms += milliseconds
        self.now_utc_ms += milliseconds


def utc_text(utc_ms: int) -> str:
    """`2027-03-04T01:10:00.000Z`, the one form of a time in entries and JSON."""
    moment = datetime.fromtimestamp(utc_ms // 1000, UTC)
    return f"{moment:%Y-%m-%dT%H:%M:%S}.{utc_ms % 1000:03d}Z"


def utc_ms_of(text: str) -> int:
    """The inverse of `utc_text`.

    Raises:
        ValueError: the text is not of that form.
    """
    moment = datetime.strptime(text, "%Y-%m-%dT%H:%M:%S.%fZ").replace(tzinfo=UTC)
    return round(moment.timestamp() * 1000)
