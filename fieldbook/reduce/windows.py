"""Outliers: one causal pass over 60 s windows, the same live and in batch.

Strategy: windows of the occupation's clock, each split where an initialisation begins. Scale per component = median of
the windows' MADs so far, this one included (1.4826 x median |x - median|); until three exist, half the class sigma;
never below half the received step, since rounded output has a MAD of zero in many windows. An epoch beyond 5 scales of
its window's median in any component is set aside, final when the window closes. Nothing is ever judged against the
whole session's s/sqrt(n). A window of fewer than 5 epochs has no MAD worth keeping: it is judged, but adds none.

What this pass lets through: a burst that fills more than half a window. `apart` looks for those at every evaluation.
"""

from __future__ import annotations

import math
from bisect import insort
from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from fieldbook.model.session import FixClass
from fieldbook.reduce.columns import MISSING
from fieldbook.reduce.fix_classes import governing_class
from fieldbook.reduce.local_frame import UNITS_PER_M
from fieldbook.reduce.quantisation import coordinate_quantum_m
from fieldbook.reduce.stream import AT, EMPTY

Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]

WINDOW_MS = 60_000
LIMIT_SCALES = 5.0
MAD_TO_SIGMA = 1.4826  # 1/Phi^-1(3/4): MAD of a normal variable to its standard deviation
_LEAST_WINDOWS, _LEAST_EPOCHS = 3, 5
_AXES = (AT["east"], AT["north"], AT["up"])


@dataclass
class Windows:
    """Judges closed windows. `push` returns [(epochs of one window, kept)...]; `pending` is the open window."""

    cos_latitude: float
    override: FixClass | None = None
    pending: Ints = field(default_factory=lambda: EMPTY)
    mads: tuple[list[float], list[float], list[float]] = field(default_factory=lambda: ([], [], []))
    common: tuple[int, int] = (0, 0)  # greatest common divisors of all coordinates and of all altitudes so far

    def push(self, table: Ints) -> list[tuple[Ints, Flags]]:
        """Take in epochs; the windows they close."""
        if len(table) == 0:
            return []
        rows = np.vstack([self.pending, table]) if len(self.pending) else table
        window = rows[:, AT["instant_ms"]] // WINDOW_MS
        changed = (np.diff(window) != 0) | (np.diff(rows[:, AT["initialisation"]]) != 0)
        edges = [0, *[int(row) + 1 for row in np.flatnonzero(changed)]]
        self.pending = rows[edges[-1] :]
        return [self._closed(rows[start:end]) for start, end in pairwise(edges)]

    def look_ahead(self, table: Ints) -> list[tuple[Ints, Flags]]:
        """What would come of these further epochs, and of the open window, if it closed now. Changes nothing."""
        scratch = Windows(self.cos_latitude, self.override, self.pending, self._mads_copied(), self.common)
        closed = scratch.push(table)
        return [*closed, scratch._closed(scratch.pending)] if len(scratch.pending) else closed

    def _mads_copied(self) -> tuple[list[float], list[float], list[float]]:
        east, north, up = self.mads
        return east.copy(), north.copy(), up.copy()

    def _closed(self, rows: Ints) -> tuple[Ints, Flags]:
        kept = np.ones(len(rows), dtype=np.bool_)
        self._seen(rows)
        fix_class = governing_class([int(item) for item in np.unique(rows[:, AT["quality"]])], self.override)
        for number, axis in enumerate(_AXES):
            units = rows[:, axis]
            known = units != MISSING
            if not known.any():
                continue
            x = units[known] / UNITS_PER_M
            deviations = np.abs(x - np.median(x))
            if len(x) >= _LEAST_EPOCHS:
                insort(self.mads[number], MAD_TO_SIGMA * float(np.median(deviations)))
            floor = self._step_m(rows, number) / 2
            scale = max(self._scale(number, fix_class.sigma_enu_m[number] / 2), floor)
            kept[np.flatnonzero(known)[deviations > LIMIT_SCALES * scale]] = False
        return rows, kept

    def _seen(self, rows: Ints) -> None:
        angles, altitudes = rows[:, (AT["latitude_e8min"], AT["longitude_e8min"])], rows[:, AT["altitude_e5m"]]
        altitudes = altitudes[altitudes != MISSING]
        of_angles = int(np.gcd.reduce(np.abs(angles), axis=None))
        of_altitudes = int(np.gcd.reduce(np.abs(altitudes))) if altitudes.size else 0
        self.common = math.gcd(self.common[0], of_angles), math.gcd(self.common[1], of_altitudes)

    def _scale(self, axis: int, until_then: float) -> float:
        mads = self.mads[axis]
        count = len(mads)
        if count < _LEAST_WINDOWS:
            return until_then
        return (mads[(count - 1) // 2] + mads[count // 2]) / 2

    def _step_m(self, rows: Ints, axis: int) -> float:
        """Received step of an axis: fewest digits in the window, padded zeros off, as far as all values so far tell.

        A separation counts only where it changes.
        """
        if axis == 2:
            step = 10.0 ** -min(_fewest(rows, "altitude_decimals"), 5 - _zeros(self.common[1]))
            separations = rows[:, AT["separation_e5m"]]
            if (separations != separations[0]).any():
                step = max(step, 10.0 ** -_fewest(rows, "separation_decimals"))
            return step
        most = 8 - _zeros(self.common[0])
        if axis == 0:
            return coordinate_quantum_m(min(_fewest(rows, "longitude_decimals"), most), self.cos_latitude)
        return coordinate_quantum_m(min(_fewest(rows, "latitude_decimals"), most))


def _zeros(common: int) -> int:
    """Number of zeros at the end of every value of which this is the divisor; 0 says nothing."""
    return len(str(common)) - len(str(common).rstrip("0")) if common else 0


def _fewest(rows: Ints, name: str) -> int:
    decimals = rows[:, AT[name]]
    known = decimals[decimals != MISSING]
    return int(known.min()) if known.size else 8
