"""Order in time and the division of an occupation into initialisations, epoch by epoch as they are heard.

Strategy: both look back only, so state is a few numbers and a chunk is one vectorised pass. An initialisation starts
at an epoch of accepted quality after: an epoch outside the accepted qualities (loss of fix: independent), more than
10 s of silence, a change of the correction station, a jump of the date ('resumed': tested, not counted as independent).
Missing epochs, and epochs set aside for age, DOP or as outliers, do not end one.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from fieldbook.model.epoch import EpochFlag
from fieldbook.reduce.columns import MISSING, EpochColumns
from fieldbook.reduce.fix_classes import QUALITIES_WITH_CORRECTIONS
from fieldbook.reduce.gates import CONFLICT, DUPLICATE, TIME_BACK, Codes, Limits, accepted

Ints = NDArray[np.int64]

SILENCE_MS = 10_000
MOST_STATIONS = 8  # named; all changes are counted
_OUT_OF_ORDER = (TIME_BACK, DUPLICATE, CONFLICT)
_SAME = ("latitude_e8min", "longitude_e8min", "altitude_e5m", "quality")


@dataclass
class TimeOrder:
    """Sets aside what the clock says came before, or at the same time as, an epoch already heard.

    The decoder names most of them; this is the second line of defence, and blind where the decoder has spoken.
    """

    latest_key: int | None = None
    latest: tuple[int, ...] = ()

    def apply(self, columns: EpochColumns, codes: Codes) -> Codes:
        """Codes with time_back, duplicate and conflict added where nothing earlier in the order stands."""
        result = codes.copy()
        valid = (columns.instant_ms != MISSING) & ~np.isin(codes, _OUT_OF_ORDER)
        jumps = np.flatnonzero(valid & ((columns.flags & int(EpochFlag.DATE_JUMP)) != 0))
        edges = [0, *[int(row) for row in jumps], len(columns)]
        for number, (start, end) in enumerate(pairwise(edges)):
            if number > 0:
                self.latest_key = None  # a corrected date may lie before: a new count begins
            self._segment(columns, np.flatnonzero(valid[start:end]) + start, result)
        return result

    def _segment(self, columns: EpochColumns, rows: Ints, codes: Codes) -> None:
        if rows.size == 0:
            return
        instants = _order_keys(columns, rows)
        before = np.concatenate([[MISSING if self.latest_key is None else self.latest_key], instants[:-1]])
        before = np.maximum.accumulate(before)
        codes[rows[instants < before]] = TIME_BACK
        for position in np.flatnonzero(instants == before):
            holder = np.flatnonzero(instants[:position] == instants[position])
            held = _values(columns, int(rows[holder[0]])) if holder.size else self.latest
            same = held == _values(columns, int(rows[position]))
            codes[rows[position]] = DUPLICATE if same else CONFLICT
        newest = int(np.argmax(instants))
        if self.latest_key is None or int(instants[newest]) > self.latest_key:
            self.latest_key, self.latest = int(instants[newest]), _values(columns, int(rows[newest]))


def _order_keys(columns: EpochColumns, rows: Ints) -> Ints:
    """Instants in microseconds, a leap second squeezed in before the midnight whose milliseconds it shares."""
    instants = columns.instant_ms[rows]
    into_second = instants % 1000
    return np.where(columns.leap[rows] > 0, (instants - into_second - 1) * 1000 + into_second, instants * 1000)


def _values(columns: EpochColumns, row: int) -> tuple[int, ...]:
    return tuple(int(getattr(columns, name)[row]) for name in _SAME)


@dataclass
class Splitter:
    """Numbers the initialisations 1, 2, ... as they begin. `independent[k]` belongs to number k + 1."""

    limits: Limits
    independent: list[bool] = field(default_factory=list)
    stations: list[str] = field(default_factory=list)  # correction stations in order of appearance, the first 8
    station_changes: int = 0
    _lost: bool = False
    _broken: bool = False
    _last_ms: int | None = None
    _station: str | None = None

    def apply(self, columns: EpochColumns, codes: Codes) -> Ints:
        """Number of the initialisation each epoch falls into, shape (n,); 0 before the first."""
        ordered = ~np.isin(codes, _OUT_OF_ORDER)
        good = ordered & accepted(columns, self.limits)
        lost, broken = ordered & ~good, self._breaks(columns, ordered)
        broken |= self._station_changes(columns, good)
        starts = np.zeros(len(columns), dtype=np.int64)
        rows = np.flatnonzero(good)
        if rows.size:
            losses, breaks = np.cumsum(lost), np.cumsum(broken)
            loss_here = np.diff(losses[rows], prepend=0) > 0
            break_here = np.diff(breaks[rows], prepend=0) > 0
            loss_here[0] |= self._lost
            break_here[0] |= self._broken
            begins = loss_here | break_here
            first_ever = not self.independent
            begins[0] |= first_ever
            starts[rows[begins]] = 1
            flags = [bool(item) for item in loss_here[begins]]
            if first_ever:
                flags[0] = True
            number = np.cumsum(starts) + len(self.independent)
            self.independent += flags
            tail = slice(int(rows[-1]) + 1, None)
            self._lost, self._broken = bool(lost[tail].any()), bool(broken[tail].any())
            return number
        self._lost |= bool(lost.any())
        self._broken |= bool(broken.any())
        return starts + len(self.independent)

    def roots(self, numbers: Iterable[int]) -> dict[int, int]:
        """Initialisation -> the latest independent one at or before it: they share one ambiguity solution."""
        every = np.arange(1, len(self.independent) + 1)
        latest = np.maximum.accumulate(np.where(self.independent, every, 1)) if len(every) else every
        return {number: int(latest[number - 1]) for number in numbers}

    def _breaks(self, columns: EpochColumns, ordered: NDArray[np.bool_]) -> NDArray[np.bool_]:
        broken: NDArray[np.bool_] = ordered & ((columns.flags & int(EpochFlag.DATE_JUMP)) != 0)
        timed = np.flatnonzero(ordered & (columns.instant_ms != MISSING))
        if timed.size:
            instants = columns.instant_ms[timed]
            before = np.concatenate([[instants[0] if self._last_ms is None else self._last_ms], instants[:-1]])
            broken[timed[np.abs(instants - before) > SILENCE_MS]] = True
            self._last_ms = int(instants[-1])
        return broken

    def _station_changes(self, columns: EpochColumns, good: NDArray[np.bool_]) -> NDArray[np.bool_]:
        changes = np.zeros(len(columns), dtype=np.bool_)
        corrected = np.isin(columns.quality, QUALITIES_WITH_CORRECTIONS)
        rows = np.flatnonzero(good & corrected & (columns.station != MISSING))
        if rows.size:
            stations = columns.station[rows]
            changes[rows[1:]] = stations[1:] != stations[:-1]
            first = columns.stations[int(stations[0])]
            changes[rows[0]] = self._station is not None and first != self._station
            self._station = columns.stations[int(stations[-1])]
            self.station_changes += int(np.count_nonzero(changes))
            self._name_stations(columns, stations)
        return changes

    def _name_stations(self, columns: EpochColumns, stations: Ints) -> None:
        found, first_rows = np.unique(stations, return_index=True)
        for code in found[np.argsort(first_rows)]:
            name = columns.stations[int(code)]
            if name not in self.stations and len(self.stations) < MOST_STATIONS:
                self.stations.append(name)
