"""Where and when a book's work is, without reducing anything: for questions that are asked before a reduction."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import UTC, datetime, timedelta

from fieldbook.book.store import Book
from fieldbook.errors import UsageError
from fieldbook.model.epoch import E8MIN_PER_DEG
from fieldbook.model.session import Session


@dataclass(frozen=True)
class Whereabouts:
    """A place in degrees, said from what; the day if one was received; its session."""

    lat_deg: float
    lon_deg: float
    said: str
    day: datetime | None
    session: Session | None


def whereabouts(book: Book) -> Whereabouts:
    """The receiver's own position in the newest occupation that has one, else a mark's approximate position.

    Raises:
        UsageError: the book knows no place yet.
    """
    state = book.state()
    for occupation in reversed(state.occupations.values()):
        if occupation.origin_e8min is not None:
            lat, lon = (value / E8MIN_PER_DEG for value in occupation.origin_e8min)
            day = None
            if occupation.day0 is not None:
                first = datetime(occupation.day0.year, occupation.day0.month, occupation.day0.day, tzinfo=UTC)
                day = first + timedelta(weeks=occupation.rollover_weeks)
            said = f"the receiver's position in occupation {occupation.number}"
            return Whereabouts(lat, lon, said, day, occupation.session)
    for name, tree in state.marks.items():
        place = tree.get("approximate") or {}
        if "lat_deg" in place and "lon_deg" in place:
            said = f"the approximate position of {name}"
            return Whereabouts(float(place["lat_deg"]), float(place["lon_deg"]), said, None, state.session)
    raise UsageError(
        f"{book.path} knows no place yet: nothing was received, and no mark has an approximate position.",
        'Say where: --at "-34.27 146.05".',
        code="no_place",
    )
