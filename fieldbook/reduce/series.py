"""The kept epochs as a series of 10 s means: what the detectors look at.

Strategy: detectors never see epochs. A 72 h occupation is 26 000 rows; what needs an evenly spaced series of bounded
length gets one by summing neighbours.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fieldbook.reduce.blocks import Blocks

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

AXES = ("east", "north", "height")


@dataclass(frozen=True)
class Series:
    """10 s means in order of time. index: number of the 10 s block; means_m (n, 3), NaN without height.

    counts (n, 3): epochs in each; within_m2 (n, 3): mean squared deviation of the epochs from their block's mean.
    """

    length_s: int
    index: Ints
    initialisation: Ints
    counts: Ints
    means_m: Floats
    within_m2: Floats

    @classmethod
    def of(cls, blocks: Blocks) -> Series:
        """Of the blocks of the used initialisations."""
        long = blocks.lengthened()
        counts = long.whole[:, [2, 2, 3]]
        within = long.m2 / np.maximum(counts, 1)
        return cls(long.block_s, long.column("index"), long.column("initialisation"), counts, long.means_m(), within)

    def __len__(self) -> int:
        return len(self.index)

    @property
    def span(self) -> int:
        """Number of 10 s blocks from the first to the last, empty ones included."""
        return int(self.index.max() - self.index.min()) + 1 if len(self) else 0

    def even(self, axis: int, most: int, least_filled: float) -> tuple[float, Floats] | None:
        """(spacing in seconds, evenly spaced means of one axis, at most `most` of them), gaps bridged by a line.

        None when less than `least_filled` of the places hold an epoch.
        """
        has = self.counts[:, axis] > 0
        if not has.any():
            return None
        first, factor = int(self.index[has].min()), 1
        span = int(self.index[has].max()) - first + 1
        while -(-span // factor) > most:
            factor *= 2
        size = -(-span // factor)
        place, weight = (self.index[has] - first) // factor, self.counts[has, axis].astype(np.float64)
        total = np.bincount(place, weights=weight, minlength=size)
        summed = np.bincount(place, weights=weight * self.means_m[has, axis], minlength=size)
        filled = np.flatnonzero(total)
        if filled.size < least_filled * size:
            return None
        means = summed[filled] / total[filled]
        if filled.size < size:
            means = np.interp(np.arange(size), filled, means)
        return float(factor * self.length_s), means
