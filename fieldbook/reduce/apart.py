"""Blocks that lie apart from the rest of their initialisation and are not used: bursts that the 60 s windows let pass.

Strategy: a burst that fills more than half a window is that window's majority; against the whole session it is a few
blocks of many. A block is set aside when its mean lies beyond 6 scales of its initialisation's median in any axis. Scale
= 1.4826 MAD of all used blocks about their own initialisation's median, never below half a received step (rounded output
has a MAD of zero). Nothing within 4 class sigmas is set aside: what a kind of fix does by itself is no burst, however
still the rest of a short session stands. Measured about the OWN median, so a right initialisation with a bias of its own
is never lost. What comes back is a burst as long as more than half of the blocks stay. What lasts to the beginning or the
end may be a second place: it is set aside only while it holds no more than 40 %, the share below which an initialisation
is taken for wrong; beyond, nothing decides, all blocks stay and the figure is as wide as the two places are apart. The
finding on steps looks at all blocks either way. Made anew at every evaluation from the blocks alone: live equals batch.

Source: median and MAD as in `windows`; limit and floor: from a simulation study for this program.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from fieldbook.reduce.blocks import Blocks
from fieldbook.reduce.windows import MAD_TO_SIGMA

Floats = NDArray[np.float64]
Flags = NDArray[np.bool_]

LIMIT_SCALES, LEAST_SIGMAS = 6.0, 4.0
LEAST_BLOCKS = 12  # of an initialisation: fewer have no median worth judging by
MOST_SHARE = 0.50
MOST_SHARE_AT_EDGE = 0.40  # beyond it a cluster of initialisations does not decide either

Triple = tuple[float | None, float | None, float | None]


def apart(blocks: Blocks, sigma_enu_m: tuple[float, float, float], steps: Callable[[], Triple]) -> Flags:
    """Which blocks of the used initialisations lie apart, shape (n,).

    Args:
        blocks: of the used initialisations.
        sigma_enu_m: class sigmas.
        steps: gives the received steps, None without heights; asked only where something lies apart at all, since
            the digits of hundreds of initialisations take milliseconds to put together.
    """
    runs = [rows for rows in runs_of(blocks.column("initialisation")) if len(rows) >= LEAST_BLOCKS]
    result = np.zeros(len(blocks), dtype=np.bool_)
    if not runs:
        return result
    means = blocks.means_m()
    distances = [np.abs(means[rows] - medians(means[rows])) for rows in runs]
    mads = MAD_TO_SIGMA * medians(np.vstack(distances))
    least = LEAST_SIGMAS * np.array(sigma_enu_m)
    limit = np.maximum(LIMIT_SCALES * scale_of(mads, sigma_enu_m, (None, None, None)), least)
    if not any((distance > limit).any() for distance in distances):
        return result
    limit = np.maximum(LIMIT_SCALES * scale_of(mads, sigma_enu_m, steps()), least)
    for rows, distance in zip(runs, distances, strict=True):
        far = np.asarray((distance > limit).any(axis=1))
        if far.sum() < MOST_SHARE * len(rows) and _at_edge(far) <= MOST_SHARE_AT_EDGE * len(rows):
            result[rows] = far
    return result


def _at_edge(far: Flags) -> int:
    """Number of blocks apart without a break from the beginning or to the end, the larger; one that stays exists."""
    return int(max(far.argmin(), far[::-1].argmin()))


def scale_of(mads_m: Floats, sigma_enu_m: tuple[float, float, float], step_enu_m: Triple) -> Floats:
    """MADs (scaled to sigma), never below half a step nor half a class sigma, shape (3,)."""
    floors = [max((step or 0.0) / 2, sigma / 2) for step, sigma in zip(step_enu_m, sigma_enu_m, strict=True)]
    scale: Floats = np.maximum(mads_m, np.array(floors))
    return scale


def rows_of(blocks: Blocks) -> NDArray[np.int64]:
    """Places in the order of hearing from each block's first epoch to its last, all blocks one after the other."""
    first, last = blocks.column("first_row"), blocks.column("last_row")
    sizes = last - first + 1
    before = np.cumsum(sizes) - sizes
    return np.repeat(first - before, sizes) + np.arange(int(sizes.sum()))


def runs_of(initialisation: NDArray[np.int64]) -> list[NDArray[np.int64]]:
    """Rows of each initialisation."""
    order = np.argsort(initialisation, kind="stable")
    edges = np.flatnonzero(np.diff(initialisation[order])) + 1
    return list(np.split(order, edges)) if len(order) else []


def medians(values: Floats) -> Floats:
    """Median per column, NaN ignored, 0 for an empty column; values (n, 3)."""
    result = np.zeros(values.shape[1])
    for column in range(values.shape[1]):
        known = values[np.isfinite(values[:, column]), column]
        if known.size:
            result[column] = np.median(known)
    return result
