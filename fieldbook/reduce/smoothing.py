"""Output that the receiver has smoothed: epochs that say less than they seem.

Strategy: compare the scatter inside 10 s blocks with the steps between neighbouring blocks. For a Gauss-Markov process
much slower than the block (growth rate q, n epochs in a block of length L) both are known:

    mean squared deviation inside      q L (1 - 1/n^2)/6
    mean squared step between two      q L (2 + 1/n^2)/3 = twice the Allan variance at L
    their ratio                        1/4 for large n

White noise, which every unsmoothed receiver has, only raises the ratio; rounding too. A smooth curve, which is what a
low-pass filter makes of a Gauss-Markov process, has v^2 L^2/12 inside and v^2 L^2 between: 1/12. So a ratio below 0.14
cannot come from any first-order process, with or without white noise: the output was filtered. The median over eight
parts of the session and three axes is taken, so that a step or a wave in one of them does not decide.
Ratios: derived here from the two processes, no source.
"""

from __future__ import annotations

import numpy as np

from fieldbook.reduce.allan import allan_deviation
from fieldbook.reduce.series import Series

SMOOTHED_BELOW = 0.14
LEAST_EPOCHS_A_BLOCK = 5
PARTS, LEAST_BLOCKS_A_PART = 8, 6


def inside_ratio(series: Series) -> float | None:
    """Median ratio of scatter inside blocks to steps between them; None without 5 epochs a block or 8 minutes."""
    full = np.flatnonzero(series.counts[:, 0] >= LEAST_EPOCHS_A_BLOCK)
    if full.size < PARTS * LEAST_BLOCKS_A_PART:
        return None
    ratios = []
    for rows in np.array_split(full, PARTS):
        whole = series.index[rows[-1]] - series.index[rows[0]] < 1.5 * len(rows)
        if not whole or series.initialisation[rows[0]] != series.initialisation[rows[-1]]:
            continue
        for axis in range(3):
            if (series.counts[rows, axis] < LEAST_EPOCHS_A_BLOCK).any():
                continue
            between = 2 * allan_deviation(series.means_m[rows, axis]) ** 2
            if between > 0:
                ratios.append(float(series.within_m2[rows, axis].mean()) / between)
    return float(np.median(ratios)) if len(ratios) >= PARTS else None
