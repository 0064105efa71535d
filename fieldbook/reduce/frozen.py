"""Frozen output: a receiver that repeats its last position as if it were new.

Strategy: in a run of more than 4 epochs with identical received latitude, longitude and altitude (value and number of
digits) all but the first are set aside. Coarse digits repeat honestly; then the limit is ln 1e-6/ln p, p = chance that
all three repeat. p must not be learnt from the frozen stretches themselves: only pairs of neighbours that differ
somewhere are counted. Among them component c repeats with share r_c; if the components repeat independently of one
another with chances p_c, then p_c = r_c (1 - p) + p and p = p_1 p_2 p_3, solved from p = 0 upwards.

Two cases cannot be told from a receiver that stands still honestly, and nothing is set aside here in them: every
step is coarser than half the class sigma, or hardly ever more than one component changes at a time (then p has no
unique solution). Coarse output carries its own line of the budget and its own finding.

Until a run is decided its epochs are held, the first apart: at most 600 of them, beyond which (p > 0.977) the digits
are too coarse to tell frozen from still and nothing is set aside here.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from fieldbook.model.session import FixClass
from fieldbook.reduce.fix_classes import governing_class
from fieldbook.reduce.quantisation import coordinate_quantum_m
from fieldbook.reduce.stream import AT, EMPTY

Ints = NDArray[np.int64]

RUN_LIMIT = 4
CHANCE = 1e-6
LONGEST_HELD = 600
_FEW_PAIRS = 5
_LEAST_CHANGING = 1.25  # components that change, on average, where any does
_KEYS = [
    AT[name]
    for name in (
        "latitude_e8min",
        "longitude_e8min",
        "altitude_e5m",
        "latitude_decimals",
        "longitude_decimals",
        "altitude_decimals",
    )
]


def repeat_chance(pairs: int, repeats: tuple[int, int, int]) -> float:
    """p from the neighbours that differ somewhere: their number, and in how many of them each component repeats."""
    shares = [count / pairs for count in repeats]
    p = 0.0
    for _ in range(500):
        better = math.prod(share * (1 - p) + p for share in shares)
        if better - p < 1e-9:
            break
        p = better
    return p


def run_limit(p: float) -> int | None:
    """Longest run that is still taken for honest; None = cannot be told."""
    if p <= 0.0:
        return RUN_LIMIT
    if p >= 1.0:
        return None
    limit = math.ceil(math.log(CHANCE) / math.log(p))
    return max(RUN_LIMIT, limit) if limit <= LONGEST_HELD else None


@dataclass
class FrozenRuns:
    """Finds frozen runs in the stream. `push` returns the epochs that are decided; `pending` those that are not."""

    override: FixClass | None = None
    pending: Ints = field(default_factory=lambda: EMPTY)  # epochs 2, 3, ... of the open run, while undecided
    _last: Ints | None = None
    _length: int = 0
    _limit: int | None = RUN_LIMIT
    _pairs: int = 0
    _repeats: tuple[int, int, int] = (0, 0, 0)

    def push(self, table: Ints) -> tuple[Ints, Ints]:
        """(released epochs in order, `row` numbers of frozen ones)."""
        if len(table) == 0:
            return EMPTY, EMPTY[:, 0]
        keys = table[:, _KEYS]
        previous = np.vstack([keys[:1] - 1 if self._last is None else self._last[None, :], keys[:-1]])
        equal = keys == previous
        parts = [equal[:, c] & equal[:, c + 3] for c in range(3)]
        same = parts[0] & parts[1] & parts[2]
        if self._last is None:
            same[0] = False
        self._last = keys[-1].copy()
        released: list[Ints] = []
        frozen: list[Ints] = []
        starts = np.flatnonzero(~same)
        self._extend(table[: starts[0]] if starts.size else table, released, frozen)
        if starts.size:
            self._close(released)
            self._runs(table, starts, parts, released, frozen)
        return np.vstack([EMPTY, *released]), np.concatenate([EMPTY[:, 0], *frozen])

    def _extend(self, table: Ints, released: list[Ints], frozen: list[Ints]) -> None:
        """More epochs of the open run."""
        self._length += len(table)
        if self._limit is None:
            released.append(table)
        elif self._length > self._limit:
            frozen += [self.pending[:, AT["row"]], table[:, AT["row"]]]
            self.pending = EMPTY
        else:
            self.pending = np.vstack([self.pending, table])

    def _close(self, released: list[Ints]) -> None:
        """The open run has ended; what is still held was honest."""
        released.append(self.pending)
        self.pending = EMPTY

    def _runs(
        self, table: Ints, starts: Ints, parts: list[NDArray[np.bool_]], released: list[Ints], frozen: list[Ints]
    ) -> None:
        """Runs that begin in this chunk: short ones pass as they are, long ones are judged, the last stays open."""
        # pairs that differ = the starts themselves; counts up to and including each start (a first epoch is no pair)
        first_ever = int(self._pairs == 0 and self._length == 0)
        pairs = self._pairs + np.arange(1, len(starts) + 1) - first_ever
        repeats = [count + np.cumsum(part[starts]) for count, part in zip(self._repeats, parts, strict=True)]
        ends = np.append(starts[1:], len(table))
        keep = np.ones(len(table), dtype=np.bool_)
        for number in np.flatnonzero(ends[:-1] - starts[:-1] > RUN_LIMIT):
            start, end = int(starts[number]), int(ends[number])
            counts = tuple(int(repeat[number]) for repeat in repeats)
            limit = self._limit_at(table[start], int(pairs[number]), (counts[0], counts[1], counts[2]))
            if limit is not None and end - start > limit:
                keep[start + 1 : end] = False
        last = int(starts[-1])
        frozen.append(table[:, AT["row"]][~keep])
        released.append(table[starts[0] : last + 1][keep[starts[0] : last + 1]])
        self._pairs = int(pairs[-1])
        self._repeats = (int(repeats[0][-1]), int(repeats[1][-1]), int(repeats[2][-1]))
        self._limit = self._limit_at(table[last], self._pairs, self._repeats)
        self._length = 1
        self._extend(table[last + 1 :], released, frozen)

    def _limit_at(self, epoch: Ints, pairs: int, repeats: tuple[int, int, int]) -> int | None:
        fix_class = governing_class([int(epoch[AT["quality"]])], self.override)
        horizontal = coordinate_quantum_m(int(epoch[AT["latitude_decimals"]]))
        vertical = 10.0 ** -int(epoch[AT["altitude_decimals"]]) if epoch[AT["altitude_decimals"]] >= 0 else math.inf
        if horizontal >= fix_class.horizontal_m / 2 and vertical >= fix_class.vertical_m / 2:
            return None
        if pairs < _FEW_PAIRS:
            return RUN_LIMIT
        changing = 3 - sum(repeats) / pairs
        return run_limit(repeat_chance(pairs, repeats)) if changing >= _LEAST_CHANGING else None
