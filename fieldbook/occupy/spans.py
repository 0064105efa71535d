"""When an occupation heard fixes, and whether two occupations claim the same time.

One receiver cannot be on two marks at once, nor one mark be occupied twice at once: fix times (UTC, from the receiver)
that overlap those of another occupation of the same mark, or of the same receiver serial where stated, are a mistake.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from datetime import date

from fieldbook.book.store import Book
from fieldbook.clock import utc_text
from fieldbook.model.epoch import DAY_MS, Epoch
from fieldbook.model.session import Session
from fieldbook.model.state import BookState, Occupation

_UNIX_DAY = date(1970, 1, 1).toordinal()


@dataclass(slots=True)
class Span:
    """First and last instant of the epochs that the decoder has nothing against; None = none so far."""

    first_ms: int | None = None
    last_ms: int | None = None
    fixes: int = 0  # epochs with a quality above 0

    def add(self, epochs: Iterable[Epoch]) -> None:
        """Widen the span by these epochs."""
        for epoch in epochs:
            if epoch.code is None and epoch.quality:
                self.fixes += 1
                instant = epoch.instant_ms
                if instant is not None:
                    self.first_ms = instant if self.first_ms is None else min(self.first_ms, instant)
                    self.last_ms = instant if self.last_ms is None else max(self.last_ms, instant)

    def utc_ms(self, day0: date | None, rollover_weeks: int = 0) -> tuple[int, int] | None:
        """First and last fix as milliseconds since 1970, or None while the date is not known."""
        if day0 is None or self.first_ms is None or self.last_ms is None:
            return None
        start = (day0.toordinal() - _UNIX_DAY + 7 * rollover_weeks) * DAY_MS
        return start + self.first_ms, start + self.last_ms


@dataclass(frozen=True, slots=True)
class Claimed:
    """The fix times of an occupation that is already in the book."""

    occupation: int
    mark: str
    first_utc_ms: int
    last_utc_ms: int
    same_mark: bool

    def overlaps(self, times: tuple[int, int]) -> bool:
        """Whether the two claim a common instant."""
        return times[0] <= self.last_utc_ms and self.first_utc_ms <= times[1]

    def __str__(self) -> str:
        why = "of the same mark" if self.same_mark else f"of {self.mark} with the same receiver"
        return f"occupation {self.occupation} {why} ({utc_text(self.first_utc_ms)} to {utc_text(self.last_utc_ms)})"


def rivals(state: BookState, session: Session, *, besides: int | None = None) -> list[Occupation]:
    """The occupations of the same mark or the same receiver serial."""
    serial = session.receiver.serial
    return [
        other
        for other in state.occupations.values()
        if other.number != besides
        and (other.mark == session.mark.name or (serial is not None and other.session.receiver.serial == serial))
    ]


def claimed_times(book: Book, session: Session, *, besides: int | None = None) -> list[Claimed]:
    """The fix times that an occupation with this session must not touch."""
    found = []
    for other in rivals(book.state(), session, besides=besides):
        span = Span()
        span.add(book.epochs(other.number))
        times = span.utc_ms(other.day0, other.rollover_weeks)
        if times is not None:
            same = other.mark == session.mark.name
            found.append(Claimed(other.number, other.mark, times[0], times[1], same))
    return found
