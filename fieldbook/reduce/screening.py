"""Screening: one code per epoch, nothing deleted, live and batch alike.

Strategy: a pipe of causal stages, each with a small state:

    gates -> order in time -> initialisations -> frozen runs -> 60 s windows -> sums in blocks

`push` takes any number of epochs any number of times; `evaluate` judges what is still open (a run that may turn out
frozen, the current window) as if the occupation ended now, without changing the state. Every sum is of integers, every
decision looks back only: one push of everything, or a thousand pushes, give the same result to the last bit.
Memory: 5 bytes an epoch for codes and initialisation numbers, and blocks of 10 s.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from fieldbook.model.epoch import Epoch
from fieldbook.model.session import FixClass
from fieldbook.reduce.blocks import Blocks
from fieldbook.reduce.columns import CODE_NUMBER, CODES, MISSING, EpochColumns
from fieldbook.reduce.frozen import FrozenRuns
from fieldbook.reduce.gate_reports import GateReports, GateTally
from fieldbook.reduce.gates import CONFLICT, DATE_UNKNOWN, DUPLICATE, NO_TIME, TIME_BACK, Limits, gate_codes
from fieldbook.reduce.kept_sums import InitialisationSums, KeptSums, median_of
from fieldbook.reduce.local_frame import LocalFrame
from fieldbook.reduce.runs import Splitter, TimeOrder
from fieldbook.reduce.stream import AT, stream_of
from fieldbook.reduce.windows import Windows

Ints = NDArray[np.int64]

FROZEN, OUTLIER = CODE_NUMBER["frozen"], CODE_NUMBER["outlier"]
_LONGEST_STEP_MS = 60_000


@dataclass(frozen=True, eq=False)
class Screened:
    """What screening knows at one moment. Codes initialisation and operator come later, from `initialisations`.

    codes: uint8 (n,), 0 = kept, else CODE_NUMBER; initialisation: int32 (n,), 0 = before the first.
    set_aside: code -> number of epochs. not_applied: requirement key -> epochs whose field was absent.
    gates: requirement key of each stated gate -> what was reported for the epochs that passed.
    frame: None while no epoch has passed the gates. Instants in ms of the occupation's clock.
    """

    codes: NDArray[np.uint8]
    initialisation: NDArray[np.int32]
    frame: LocalFrame | None
    blocks: Blocks
    initialisations: dict[int, InitialisationSums]
    not_applied: dict[str, int]
    gates: dict[str, GateTally]
    median_step_ms: int | None
    heard_from_ms: int | None
    heard_to_ms: int | None
    root_of: dict[int, int]  # initialisation -> the independent one whose ambiguities it shares
    stations: tuple[str, ...] = ()  # correction stations heard with accepted fixes, in order, the first 8
    station_changes: int = 0

    @property
    def heard(self) -> int:
        """Number of epochs heard."""
        return len(self.codes)

    @property
    def kept(self) -> int:
        """Number of epochs nothing speaks against so far."""
        return int(np.count_nonzero(self.codes == 0))

    @property
    def set_aside(self) -> dict[str, int]:
        """Code -> number, codes in the contract's order, only those that occur."""
        return counts_of(self.codes)

    @property
    def frozen_share(self) -> float:
        """Share of frozen ones among the epochs that passed the gates."""
        frozen = int(np.count_nonzero(self.codes == FROZEN))
        passed = int(np.count_nonzero((self.codes == 0) | (self.codes >= FROZEN)))
        return frozen / passed if passed else 0.0


def counts_of(codes: NDArray[np.uint8]) -> dict[str, int]:
    """Code -> number of epochs, in the contract's order, only those that occur; codes shape (n,)."""
    counts = np.bincount(codes, minlength=len(CODES) + 1)
    return {str(code): int(counts[number]) for number, code in enumerate(CODES, start=1) if counts[number]}


@dataclass
class Screening:
    """The state of screening one occupation.

    Args:
        limits: gates of the requirement.
        override: class of fix stated for this receiver, or None.
    """

    limits: Limits
    override: FixClass | None = None
    frame: LocalFrame | None = None
    _codes: NDArray[np.uint8] = field(default_factory=lambda: np.empty(0, dtype=np.uint8))
    _numbers: NDArray[np.int32] = field(default_factory=lambda: np.empty(0, dtype=np.int32))
    _heard: int = 0
    _sums: KeptSums = field(default_factory=KeptSums)
    _not_applied: Counter[str] = field(default_factory=Counter)
    _steps: Counter[int] = field(default_factory=Counter)
    _from_ms: int | None = None
    _to_ms: int | None = None
    _windows: Windows | None = None

    def __post_init__(self) -> None:
        self._order = TimeOrder()
        self._reports = GateReports(self.limits)
        self._splitter = Splitter(self.limits)
        self._frozen = FrozenRuns(self.override)

    def push(self, epochs: EpochColumns | Iterable[Epoch]) -> None:
        """Take in further epochs, in order of hearing."""
        columns = epochs if isinstance(epochs, EpochColumns) else EpochColumns.from_epochs(epochs)
        if len(columns) == 0:
            return
        codes, absent = gate_codes(columns, self.limits)
        codes = self._order.apply(columns, codes)
        numbers = self._splitter.apply(columns, codes)
        self._not_applied += absent
        self._reports.push(columns, codes)
        self._steps_of(columns, codes)
        first_row = self._remember(codes, numbers)
        rows = np.flatnonzero(codes == 0)
        if rows.size == 0:
            return
        windows = self._begun(columns, int(rows[0]))
        assert self.frame is not None  # noqa: S101 - set by _begun
        released, frozen = self._frozen.push(stream_of(columns, rows, first_row, numbers, self.frame))
        self._codes[frozen] = FROZEN
        for window, kept in windows.push(released):
            self._codes[window[~kept, AT["row"]]] = OUTLIER
            self._sums.add(window[kept], independent=self._independent(window))

    def evaluate(self, *, day0_known: bool = True) -> Screened:
        """The state as if the occupation ended now.

        Args:
            day0_known: False while the date of day 0 is unknown: every epoch with a time is then `date_unknown`.
        """
        codes = self._codes[: self._heard].copy()
        sums = self._sums.branch()
        if self._windows is not None:
            for window, kept in self._windows.look_ahead(self._frozen.pending):
                codes[window[~kept, AT["row"]]] = OUTLIER
                sums.add_ahead(window[kept], independent=self._independent(window))
        if not day0_known:
            codes[codes != NO_TIME] = DATE_UNKNOWN
            sums = KeptSums()
        return Screened(
            codes=codes,
            initialisation=self._numbers[
                : self._heard
            ],  # what was numbered keeps its number: no copy of a day of epochs
            frame=self.frame,
            blocks=sums.blocks(),
            initialisations=sums.by_number,
            not_applied=dict(self._not_applied),
            gates=dict(self._reports.tallies),
            median_step_ms=median_of(self._steps),
            heard_from_ms=self._from_ms,
            heard_to_ms=self._to_ms,
            root_of=self._splitter.roots(sums.by_number),
            stations=tuple(self._splitter.stations),
            station_changes=self._splitter.station_changes,
        )

    def _remember(self, codes: NDArray[np.uint8], numbers: Ints) -> int:
        start, end = self._heard, self._heard + len(codes)
        if end > len(self._codes):
            size = max(end, 2 * start, 256)
            self._codes = np.concatenate([self._codes[:start], np.zeros(size - start, dtype=np.uint8)])
            self._numbers = np.concatenate([self._numbers[:start], np.zeros(size - start, dtype=np.int32)])
        self._codes[start:end], self._numbers[start:end] = codes, numbers
        self._heard = end
        return start

    def _begun(self, columns: EpochColumns, row: int) -> Windows:
        """The frame about the first epoch that passes the gates; its height may be unknown, then 0 serves."""
        if self.frame is None or self._windows is None:
            height = int(columns.height_e5m[row])
            self.frame = LocalFrame(
                int(columns.latitude_e8min[row]),
                int(columns.longitude_e8min[row]),
                0 if height == MISSING else height,
            )
            self._windows = Windows(self.frame.cos_latitude, self.override)
        return self._windows

    def _independent(self, window: Ints) -> bool:
        return self._splitter.independent[int(window[0, AT["initialisation"]]) - 1]

    def _steps_of(self, columns: EpochColumns, codes: NDArray[np.uint8]) -> None:
        timed = columns.instant_ms[(columns.instant_ms != MISSING) & ~np.isin(codes, [TIME_BACK, DUPLICATE, CONFLICT])]
        if timed.size == 0:
            return
        before = timed[:1] if self._to_ms is None else np.array([self._to_ms])
        steps = np.diff(np.concatenate([before, timed]))
        found, count = np.unique(steps[(steps > 0) & (steps <= _LONGEST_STEP_MS)], return_counts=True)
        self._steps.update(dict(zip(found.tolist(), count.tolist(), strict=True)))
        self._from_ms = int(timed[0]) if self._from_ms is None else self._from_ms
        self._to_ms = int(timed[-1])
