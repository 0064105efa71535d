"""What figures draw: a bounded number of epochs about the mean, with what became of them.

Every step-th heard epoch is remembered; when more than the limit have gathered, every second is forgotten and the step
doubles. The same epochs remain whether they came at once or one by one.
"""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
from numpy.typing import NDArray

from fieldbook.model.epoch import Epoch
from fieldbook.model.reduction import Trace
from fieldbook.reduce.columns import MISSING, EpochColumns
from fieldbook.reduce.local_frame import UNITS_PER_M, LocalFrame

MOST_POINTS = 4000


class TraceStore:
    """Epochs kept for drawing, with their row among all heard ones."""

    def __init__(self) -> None:
        self._step = 1
        self._heard = 0
        self._rows: list[int] = []
        self._epochs: list[Epoch] = []
        self._columns = EpochColumns()  # of the first len(self._columns) epochs: a look turns only new ones to numbers

    def push(self, epochs: Iterable[Epoch]) -> None:
        """Take in epochs in order of hearing."""
        for epoch in epochs:
            if self._heard % self._step == 0:
                self._rows.append(self._heard)
                self._epochs.append(epoch)
                if len(self._rows) > MOST_POINTS:
                    self._step *= 2
                    self._rows = self._rows[::2]
                    self._epochs = self._epochs[::2]
                    self._columns = EpochColumns()
            self._heard += 1

    def trace(
        self,
        codes: NDArray[np.uint8],
        initialisation: NDArray[np.int32],
        frame: LocalFrame,
        mean_enu_m: tuple[float, float, float | None],
        start_ms: int | None = None,
    ) -> Trace:
        """The remembered epochs that have a time and a position, in metres about the mean.

        start_ms: zero of the times on the occupation's clock; None = the first of them.
        """
        self._columns.append(self._epochs[len(self._columns) :])
        columns = self._columns
        usable = np.flatnonzero((columns.latitude_e8min != MISSING) & (columns.instant_ms != MISSING))
        rows = np.array(self._rows, dtype=np.int64)[usable]
        east, north, up = frame.of_columns(columns, usable)
        first = int(columns.instant_ms[usable[0]]) if usable.size else 0
        start = first if start_ms is None else start_ms
        level = mean_enu_m[2]
        ups = [None if value == MISSING or level is None else value / UNITS_PER_M - level for value in up.tolist()]
        return Trace(
            time_s=((columns.instant_ms[usable] - start) / 1000.0).tolist(),
            east_m=(east / UNITS_PER_M - mean_enu_m[0]).tolist(),
            north_m=(north / UNITS_PER_M - mean_enu_m[1]).tolist(),
            up_m=ups,
            kept=[bool(code == 0) for code in codes[rows]],
            initialisation=[int(number) for number in initialisation[rows]],
            step=self._step,
        )
