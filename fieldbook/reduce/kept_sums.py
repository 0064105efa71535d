"""What is remembered of kept epochs: sums in blocks, and per initialisation its span, qualities, digits and GST.

Strategy: added window by window, when a window is final. A look ahead adds the open window to copies. All counters
are bounded: GST sigmas are counted by value to three significant digits, so that their median is exact to that.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from fieldbook.reduce.blocks import LONG_SESSION_MS, SHORT_BLOCK_S, Blocks
from fieldbook.reduce.columns import MISSING
from fieldbook.reduce.quantisation import Digits
from fieldbook.reduce.stream import AT

Ints = NDArray[np.int64]

_FIELDS = {
    "latitude": ("latitude_e8min", "latitude_decimals"),
    "longitude": ("longitude_e8min", "longitude_decimals"),
    "altitude": ("altitude_e5m", "altitude_decimals"),
    "separation": ("separation_e5m", "separation_decimals"),
}
_DECADES = np.array([10**k for k in range(3, 12)], dtype=np.int64)


def _no_digits() -> dict[str, Digits]:
    return {name: Digits() for name in _FIELDS}


@dataclass
class InitialisationSums:
    """Kept epochs of one initialisation. Instants in ms of the occupation's clock, sigmas in 1e-5 m."""

    number: int
    independent: bool
    first_ms: int
    last_ms: int
    kept: int = 0
    with_height: int = 0
    qualities: Counter[int] = field(default_factory=Counter)
    gst_horizontal: Counter[int] = field(default_factory=Counter)
    gst_up: Counter[int] = field(default_factory=Counter)
    digits: dict[str, Digits] = field(default_factory=_no_digits)

    def copy(self) -> InitialisationSums:
        """An independent copy."""
        return InitialisationSums(
            self.number, self.independent, self.first_ms, self.last_ms, self.kept, self.with_height,
            self.qualities.copy(), self.gst_horizontal.copy(), self.gst_up.copy(),
            {name: item.copy() for name, item in self.digits.items()},
        )  # fmt: skip

    def add(self, table: Ints) -> None:
        """Kept epochs of one window, at least one."""
        instants = table[:, AT["instant_ms"]]
        self.first_ms, self.last_ms = min(self.first_ms, int(instants.min())), max(self.last_ms, int(instants.max()))
        self.kept += len(table)
        self.with_height += int(np.count_nonzero(table[:, AT["up"]] != MISSING))
        _count(self.qualities, table[:, AT["quality"]])
        _count(self.gst_horizontal, _three_digits(table[:, AT["sigma_horizontal_e5m"]]))
        _count(self.gst_up, _three_digits(table[:, AT["sigma_up_e5m"]]))
        for name, (value, decimals) in _FIELDS.items():
            values = table[:, AT[value]]
            known = values != MISSING
            self.digits[name].add(values[known], table[known, AT[decimals]])


def _count(counter: Counter[int], values: Ints) -> None:
    found, count = np.unique(values[values != MISSING], return_counts=True)
    for value, number in zip(found.tolist(), count.tolist(), strict=True):
        counter[value] += number


def _three_digits(values: Ints) -> Ints:
    step = 10 ** np.searchsorted(_DECADES, values, side="right").astype(np.int64)
    return np.where(values == MISSING, MISSING, values // step * step)


def median_of(counter: Counter[int]) -> int | None:
    """Median (the lower one of two) of counted values; None if there are none."""
    half, seen = (sum(counter.values()) + 1) // 2, 0
    for value in sorted(counter):
        seen += counter[value]
        if seen >= half:
            return value
    return None


def median_gst_m(items: Iterable[InitialisationSums]) -> tuple[float | None, float | None]:
    """Median of the receiver's own estimates over all epochs of these, horizontal and vertical, metres; None = none."""
    horizontal: Counter[int] = Counter()
    up: Counter[int] = Counter()
    for item in items:
        horizontal.update(item.gst_horizontal)
        up.update(item.gst_up)
    medians = [median_of(total) for total in (horizontal, up)]
    found = [None if median is None else median * 1e-5 for median in medians]
    return found[0], found[1]


@dataclass
class KeptSums:
    """Blocks and per-initialisation sums of all closed windows."""

    by_number: dict[int, InitialisationSums] = field(default_factory=dict)
    _pieces: list[Blocks] = field(default_factory=list)
    _block_s: int = SHORT_BLOCK_S
    _span_ms: tuple[int, int] | None = None

    def add(self, table: Ints, *, independent: bool) -> None:
        """Kept epochs of one window (one initialisation)."""
        if len(table) == 0:
            return
        number, first = int(table[0, AT["initialisation"]]), int(table[0, AT["instant_ms"]])
        if number not in self.by_number:
            self.by_number[number] = InitialisationSums(number, independent, first, first)
        item = self.by_number[number]
        item.add(table)
        low, high = self._span_ms or (first, first)
        self._span_ms = (min(low, item.first_ms), max(high, item.last_ms))
        blocks = Blocks.of_stream(table)
        if self._block_s != SHORT_BLOCK_S:
            blocks = blocks.lengthened()
        self._pieces.append(blocks)
        if self._block_s == SHORT_BLOCK_S and self._span_ms[1] - self._span_ms[0] >= LONG_SESSION_MS:
            self._pieces = [self.blocks().lengthened()]
            self._block_s = self._pieces[0].block_s
        if len(self._pieces) > 64:  # joined now and then: the cost per window stays flat
            self._pieces = [self.blocks()]

    def blocks(self) -> Blocks:
        """All blocks in order of arrival."""
        if not self._pieces:
            return Blocks.empty()
        return Blocks(
            self._block_s,
            np.vstack([item.whole for item in self._pieces]),
            np.vstack([item.m2 for item in self._pieces]),
        )

    def branch(self) -> KeptSums:
        """A copy to add a look ahead to; the initialisations touched by it must be copied first: see `add_ahead`."""
        return KeptSums(dict(self.by_number), [self.blocks()] if self._pieces else [], self._block_s, self._span_ms)

    def add_ahead(self, table: Ints, *, independent: bool) -> None:
        """As `add`, on a branch: leaves the original's initialisation alone."""
        if len(table):
            number = int(table[0, AT["initialisation"]])
            if number in self.by_number:
                self.by_number[number] = self.by_number[number].copy()
            self.add(table, independent=independent)
