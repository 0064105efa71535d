"""Steps without loss of fix, and bursts: what the 60 s windows of screening let through.

Step: with m(k) the 10 s means, a place where m(k+1) - m(k-1) exceeds max(6 MAD of all such differences, the tolerance
of two initialisations of this kind of fix: 30 mm in plan and 60 mm in height for RTK; 1.5 received steps, since
coarse output moves by one when the position crosses an edge), and where the medians of the
minutes before and after differ by as much, without a block of one minute reaching into the other's half: a burst of
less than a minute has its edges, but does not last. Looked for within one initialisation only:
between initialisations the comparison of their places speaks. It runs on cleaned blocks: on raw ones it fires at the
edges of bursts.

A step beside a stretch of at most 120 s that was set aside (`apart`) and from which the position came back is none: the
mean does not lie between two places then, and the stretch is reported as a burst.

Burst: 10 s means beyond 6 MAD of their initialisation's median that come back, the MAD never below half a received step
(rounded output has a MAD of zero) nor half a class sigma. `apart` has set most of them aside. Both look at all blocks, those set aside included: a step that holds for a small part of the
time would vanish otherwise.

MAD = 1.4826 x median |x - median|. Limits: from a simulation study for this program.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fieldbook.reduce.apart import LEAST_BLOCKS, Triple, medians, runs_of, scale_of
from fieldbook.reduce.estimate import Estimate
from fieldbook.reduce.fix_classes import ClassOfFix
from fieldbook.reduce.initialisations import tolerances_m
from fieldbook.reduce.series import AXES, Series
from fieldbook.reduce.windows import MAD_TO_SIGMA

Floats = NDArray[np.float64]

LIMIT_MADS = 6.0
RECEIVED_STEPS = 1.5
LONGEST_BURST_BLOCKS = 12
MINUTE_BLOCKS = 6
_LONGEST_REACH = 9  # places of 10 s that six blocks may cover when some are missing


@dataclass(frozen=True)
class Step:
    """A lasting change within one initialisation. Instant in ms of the occupation's clock; size of the axis, metres."""

    axis: str
    at_ms: int
    size_m: float


@dataclass(frozen=True)
class Bursts:
    """10 s blocks that lie apart and come back: their number, that of all blocks, the largest distance in metres."""

    blocks: int
    of: int
    axis: str
    largest_m: float


def steps(series: Series, fix_class: ClassOfFix, received_m: Triple = (None, None, None)) -> list[Step]:
    """Steps in order of time, one per place (the axis that exceeds its limit most)."""
    if len(series) < 2 * MINUTE_BLOCKS:
        return []
    horizontal, vertical = tolerances_m(fix_class)
    toggling = [RECEIVED_STEPS * (step or 0.0) for step in received_m]
    least = np.maximum(np.array([horizontal, horizontal, vertical]), toggling)
    means, index, number = series.means_m, series.index, series.initialisation
    near = (number[2:] == number[:-2]) & (index[2:] - index[:-2] <= 4)
    change = np.where(near[:, None], means[2:] - means[:-2], np.nan)
    limit = np.maximum(_mads(change) * LIMIT_MADS, least)
    with np.errstate(invalid="ignore"):
        excess = np.abs(change) / limit
    candidates = np.flatnonzero((np.nan_to_num(excess) > 1.0).any(axis=1)) + 1
    found: list[tuple[float, Step]] = []
    for row in candidates[:200]:
        size = _lasting(series, int(row))
        if size is None:
            continue
        with np.errstate(invalid="ignore"):
            ratio = np.where(np.abs(size) > limit, np.nan_to_num(excess[row - 1]), 0.0)
        axis = int(ratio.argmax())
        if ratio[axis] > 1.0:
            step = Step(AXES[axis], int(index[row]) * series.length_s * 1000, float(size[axis]))
            found.append((float(ratio[axis]), step))
    return _one_per_place(found)


def without_bursts(found: list[Step], series: Series, kept: Series) -> list[Step]:
    """Those steps that are not the edge of a stretch of up to 120 s that was set aside and came back.

    Args:
        found: steps of `series`.
        series: 10 s means of all blocks. kept: of those the mean is made of.
    """
    if not found or len(kept) == len(series):
        return found
    stays = np.isin(_keys(series), _keys(kept))
    edges = np.flatnonzero(np.diff(np.concatenate([[True], stays, [True]]).astype(np.int8)))
    excused: list[tuple[int, int]] = []
    for start, stop in zip(edges[::2].tolist(), edges[1::2].tolist(), strict=True):
        inside = start > 0 and stop < len(series) and stop - start <= LONGEST_BURST_BLOCKS
        if inside and series.initialisation[start - 1] == series.initialisation[stop]:
            excused.append((int(series.index[start]) - 2, int(series.index[stop - 1]) + 2))
    places = [step.at_ms // (series.length_s * 1000) for step in found]
    return [
        step
        for step, place in zip(found, places, strict=True)
        if not any(first <= place <= last for first, last in excused)
    ]


def _keys(series: Series) -> NDArray[np.int64]:
    return series.initialisation * (1 << 40) + series.index


def _one_per_place(found: list[tuple[float, Step]]) -> list[Step]:
    """Of neighbouring places, within a minute, the one that exceeds its limit most."""
    result: list[tuple[float, Step]] = []
    for ratio, step in found:
        if result and step.at_ms - result[-1][1].at_ms <= 60_000:
            if ratio > result[-1][0]:
                result[-1] = (ratio, step)
        else:
            result.append((ratio, step))
    return [step for _, step in result]


def _lasting(series: Series, row: int) -> Floats | None:
    """Median of the minute after a row minus median of the minute before; 0 where the minutes are not apart.

    None when either minute is not whole, or belongs to another initialisation.
    """
    before, after = slice(row - MINUTE_BLOCKS, row), slice(row + 1, row + 1 + MINUTE_BLOCKS)
    if before.start < 0 or after.stop > len(series):
        return None
    rows = series.index[before.start], series.index[row], series.index[after.stop - 1]
    whole = series.initialisation[before.start] == series.initialisation[after.stop - 1]
    if not whole or rows[1] - rows[0] > _LONGEST_REACH or rows[2] - rows[1] > _LONGEST_REACH:
        return None
    old, new = series.means_m[before], series.means_m[after]
    difference: Floats = np.median(new, axis=0) - np.median(old, axis=0)
    gap = np.where(difference > 0, new.min(axis=0) - old.max(axis=0), old.min(axis=0) - new.max(axis=0))
    apart: Floats = np.where(gap > 0.5 * np.abs(difference), difference, 0.0)
    return apart


def bursts(series: Series, found: Estimate) -> Bursts | None:
    """Blocks beyond 6 MAD of their initialisation's median; None if there are none."""
    apart, of = np.zeros((len(series), 3), dtype=np.bool_), 0
    distance = np.zeros((len(series), 3))
    for rows in runs_of(series.initialisation):
        if len(rows) < LEAST_BLOCKS:
            continue
        of += len(rows)
        off = series.means_m[rows] - medians(series.means_m[rows])
        distance[rows] = np.nan_to_num(off)
        scale = scale_of(_mads(off), found.fix_class.sigma_enu_m, found.resolution.step_enu_m)
        apart[rows] = np.abs(distance[rows]) > LIMIT_MADS * scale
    count = int(apart.any(axis=1).sum())
    if count == 0:
        return None
    size = np.where(apart, np.abs(distance), 0.0)
    axis = int((size / np.array(found.fix_class.sigma_enu_m)).max(axis=0).argmax())
    return Bursts(count, of, AXES[axis], float(size[:, axis].max()))


def _mads(values: Floats) -> Floats:
    """1.4826 x median |x - median| per column, NaN ignored, 0 for an empty column."""
    return MAD_TO_SIGMA * medians(np.abs(values - medians(values)))
