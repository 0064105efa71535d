"""Epochs as numpy columns: exact integers as received, one chunk after another.

Strategy: nothing is converted here. Angles stay in 1e-8 arc-minute, heights and sigmas in 0.01 mm, DOP in 0.001,
ages and instants in ms, all int64; MISSING stands for None. Texts (station, datum) are coded by tables that belong
to the columns. Arrays grow by doubling, so a live occupation appends in amortised constant time.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from operator import attrgetter

import numpy as np
from numpy.typing import NDArray

from fieldbook.model.epoch import DAY_MS, Epoch, SetAside

Ints = NDArray[np.int64]

MISSING = int(np.iinfo(np.int64).min)
CODES: tuple[SetAside, ...] = tuple(SetAside)  # code k + 1 of the arrays is CODES[k]; 0 = kept
CODE_NUMBER = {str(code): number for number, code in enumerate(CODES, start=1)}
SOURCES = {"GGA": 0, "GNS": 1, "RMC": 2}

_FIELDS = (
    "number",
    "latitude_e8min",
    "longitude_e8min",
    "latitude_decimals",
    "longitude_decimals",
    "altitude_e5m",
    "altitude_decimals",
    "separation_e5m",
    "separation_decimals",
    "quality",
    "satellites",
    "hdop_milli",
    "pdop_milli",
    "age_ms",
    "sigma_latitude_e5m",
    "sigma_longitude_e5m",
    "sigma_altitude_e5m",
    "flags",
)
_DERIVED = ("instant_ms", "leap", "height_e5m", "source", "code", "station", "datum")
NAMES = _FIELDS + _DERIVED


class EpochColumns:
    """Columns of epochs, in order of hearing. Every attribute is int64, shape (n,); MISSING = not given.

    number, latitude_e8min, longitude_e8min, latitude_decimals, longitude_decimals, altitude_e5m, altitude_decimals,
    separation_e5m, separation_decimals, quality, satellites, hdop_milli, pdop_milli, age_ms, sigma_latitude_e5m,
    sigma_longitude_e5m, sigma_altitude_e5m, flags: as in `model.epoch.Epoch`.
    instant_ms: since 00:00 of day 0. leap: 1 within a leap second (its instants are those of the second after it).
    height_e5m: altitude + separation of the same sentence. source: SOURCES.
    code: the decoder's own reason as a CODE_NUMBER, 0 = none. station, datum: indices into the tables, MISSING = none.
    """

    number: Ints
    latitude_e8min: Ints
    longitude_e8min: Ints
    latitude_decimals: Ints
    longitude_decimals: Ints
    altitude_e5m: Ints
    altitude_decimals: Ints
    separation_e5m: Ints
    separation_decimals: Ints
    quality: Ints
    satellites: Ints
    hdop_milli: Ints
    pdop_milli: Ints
    age_ms: Ints
    sigma_latitude_e5m: Ints
    sigma_longitude_e5m: Ints
    sigma_altitude_e5m: Ints
    flags: Ints
    instant_ms: Ints
    leap: Ints
    height_e5m: Ints
    source: Ints
    code: Ints
    station: Ints
    datum: Ints

    def __init__(self) -> None:
        self._held = {name: np.empty(0, dtype=np.int64) for name in NAMES}
        self._n = 0
        self.stations: list[str] = []
        self.datums: list[str] = []
        self._show()

    @classmethod
    def from_epochs(cls, epochs: Iterable[Epoch]) -> EpochColumns:
        """Columns of these epochs."""
        columns = cls()
        columns.append(epochs)
        return columns

    def __len__(self) -> int:
        return self._n

    def append(self, epochs: Iterable[Epoch]) -> None:
        """Add epochs at the end. Views taken earlier keep their old length."""
        rows = epochs if isinstance(epochs, list) else list(epochs)
        if not rows:
            return
        end = self._n + len(rows)
        if end > len(self._held["number"]):
            size = max(end, 2 * self._n, 64)
            self._held = {name: _grown(array, size, self._n) for name, array in self._held.items()}
        for name in _FIELDS:
            self._held[name][self._n : end] = _column(rows, attrgetter(name))
        held = self._held
        held["instant_ms"][self._n : end] = _column(rows, attrgetter("instant_ms"))
        held["leap"][self._n : end] = _column(rows, lambda epoch: int((epoch.time_ms or 0) >= DAY_MS))
        held["source"][self._n : end] = _column(rows, lambda epoch: SOURCES.get(epoch.source, 2))
        held["code"][self._n : end] = _column(rows, _code_number)
        held["station"][self._n : end] = _column(rows, lambda epoch: _index(self.stations, epoch.station))
        held["datum"][self._n : end] = _column(rows, lambda epoch: _index(self.datums, epoch.datum))
        altitude, separation = held["altitude_e5m"][self._n : end], held["separation_e5m"][self._n : end]
        known = (altitude != MISSING) & (separation != MISSING)
        held["height_e5m"][self._n : end] = np.where(known, altitude + np.where(known, separation, 0), MISSING)
        self._n = end
        self._show()

    def part(self, start: int, end: int) -> EpochColumns:
        """The epochs start <= i < end as columns of their own (views, same tables)."""
        chunk = EpochColumns()
        chunk._held = {name: array[: self._n][start:end] for name, array in self._held.items()}
        chunk._n = len(chunk._held["number"])
        chunk.stations, chunk.datums = self.stations, self.datums
        chunk._show()
        return chunk

    @property
    def instant_s(self) -> NDArray[np.float64]:
        """Seconds since 00:00 of day 0; NaN without time."""
        result: NDArray[np.float64] = np.where(self.instant_ms == MISSING, np.nan, self.instant_ms / 1000.0)
        return result

    def _show(self) -> None:
        for name, array in self._held.items():
            setattr(self, name, array[: self._n])


def _grown(array: Ints, size: int, used: int) -> Ints:
    larger = np.empty(size, dtype=np.int64)
    larger[:used] = array[:used]
    return larger


def _column(rows: list[Epoch], value: Callable[[Epoch], int | None]) -> Ints:
    return np.fromiter(
        (MISSING if item is None else item for item in map(value, rows)), dtype=np.int64, count=len(rows)
    )


def _code_number(epoch: Epoch) -> int:
    return 0 if epoch.code is None else CODE_NUMBER[epoch.code]


def _index(table: list[str], text: str | None) -> int | None:
    if text is None:
        return None
    if text not in table:
        table.append(text)
    return table.index(text)
