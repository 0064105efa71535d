"""Which day an instant belongs to: GGA and GNS carry a time of day and no date.

Strategy. Instants come in order; the day index counts midnights. A trusted date (RMC with status A of the same
epoch, else a ZDA within 1.5 s once there has been a fix) fixes the date of day 0 once, counted back over the
midnights passed. A later date that contradicts the count is a date jump: the index follows the date. Dates
are never repaired here; a week rollover is only suspected (`rollover_weeks`).
"""

from __future__ import annotations

from datetime import date, timedelta

from fieldbook.nmea.fields import DAY_MS

_HALF_DAY_MS = DAY_MS // 2
_BACK_OVER_MIDNIGHT_MS = DAY_MS - 60_000  # a rise of nearly a day is a sentence that came late over midnight
_CYCLE_DAYS = 7168  # 1024 weeks


def difference_ms(later: int, earlier: int) -> int:
    """later - earlier of two times of day; a fall of more than half a day is a midnight passed."""
    difference = later - earlier
    if difference < -_HALF_DAY_MS:
        return difference + DAY_MS
    if difference > _BACK_OVER_MIDNIGHT_MS:
        return difference - DAY_MS
    return difference


def nearness_ms(one: int, other: int) -> int:
    """Distance of two times of day round the clock."""
    difference = abs(one - other) % DAY_MS
    return min(difference, DAY_MS - difference)


def date_at(time_ms: int, stated: date, stated_ms: int) -> date | None:
    """The date at a time of day, from a date stated at another within seconds: midnight may lie between."""
    try:
        if time_ms - stated_ms > _HALF_DAY_MS:
            return stated - timedelta(days=1)
        if time_ms - stated_ms < -_HALF_DAY_MS:
            return stated + timedelta(days=1)
    except OverflowError:
        return None
    return stated


def rollover_weeks(stated: date, reference: date) -> int:
    """Whole 1024-week cycles, in weeks, that bring a stated date nearest to the reference; 0 within 512 weeks."""
    days = (reference - stated).days
    return 1024 * ((2 * days + _CYCLE_DAYS) // (2 * _CYCLE_DAYS))


class DayKeeper:
    """Counts days. The index is relative to the first instant ever assigned."""

    def __init__(self) -> None:
        self.day0: date | None = None
        self.source: str | None = None
        self._day = 0
        self._time_ms: int | None = None

    def assign(self, time_ms: int, stated: date | None, source: str) -> tuple[int, bool]:
        """Day index of the next instant, and whether the date jumped there.

        Args:
            time_ms: time of day.
            stated: trusted date of this instant, None = none.
            source: what stated it.
        """
        before = self._time_ms
        expected = self._day
        if before is not None:
            if time_ms - before < -_HALF_DAY_MS:
                expected += 1
            elif time_ms - before > _BACK_OVER_MIDNIGHT_MS:
                expected -= 1
        day, jump = expected, False
        if stated is not None:
            if self.day0 is None:
                self._learn(stated, expected, source)
            else:
                day = (stated - self.day0).days
                jump = day != expected and not self._is_midnight(day, time_ms, before)
        self._day, self._time_ms = day, time_ms
        return day, jump

    def learn_late(self, stated: date, stated_ms: int, source: str) -> None:
        """A date that came after the last instant, as at the end of a file."""
        if self.day0 is not None or self._time_ms is None:
            return
        at_last = date_at(self._time_ms, stated, stated_ms)
        if at_last is not None:
            self._learn(at_last, self._day, source)

    def _learn(self, stated: date, day: int, source: str) -> None:
        try:
            self.day0 = stated - timedelta(days=day)
        except OverflowError:
            return
        self.source = source

    def _is_midnight(self, day: int, time_ms: int, before: int | None) -> bool:
        """One day on with a falling time is a midnight in a gap; the same day with a fall, a time that went back."""
        return before is not None and time_ms < before and day - self._day in (0, 1)
