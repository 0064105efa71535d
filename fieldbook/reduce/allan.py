"""Averages of m neighbours and what they tell of a series: their standard deviation and their Allan deviation.

Strategy: a position series is the analogue of frequency (not of phase), so it goes in as it is. The Allan deviation at
m of a white series equals the standard deviation of its m-averages; a floor or a rise with m is the honest sign that
averaging longer gains nothing.

Source: W. J. Riley, Handbook of Frequency Stability Analysis, NIST Special Publication 1065 (2008), 5.2.2 (Allan) and
5.2.4 (overlapping Allan).
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]


def averages(values: ArrayLike, m: int) -> Floats:
    """Means of m neighbours each, not overlapping; what is left over at the end is dropped. Shape (n // m,).

    Raises:
        ValueError: m below 1, or fewer than m values.
    """
    series = np.asarray(values, dtype=np.float64)
    count = series.size // m if m >= 1 else 0
    if count == 0:
        raise ValueError(f"{series.size} values make no average of {m}")
    means: Floats = series[: count * m].reshape(count, m).mean(axis=1)
    return means


def sd_of_averages(values: ArrayLike, m: int) -> float:
    """Standard deviation (n - 1) of the m-averages, in the unit of the values.

    Raises:
        ValueError: fewer than two averages.
    """
    means = averages(values, m)
    if means.size < 2:
        raise ValueError("a standard deviation needs two averages")
    return float(means.std(ddof=1))


def allan_deviation(values: ArrayLike, m: int = 1, *, overlapping: bool = False) -> float:
    """sqrt(1/2 mean (y_{k+1} - y_k)^2) of the m-averages y, in the unit of the values.

    Args:
        values: evenly spaced series, shape (n,).
        m: values in one average.
        overlapping: averages begin at every value instead of at every m-th.

    Raises:
        ValueError: fewer than two averages.
    """
    series = np.asarray(values, dtype=np.float64)
    if m < 1 or series.size < 2 * m:
        raise ValueError(f"{series.size} values make no two averages of {m}")
    if overlapping:
        shifted = series - series[0]  # large values with a small scatter
        sums = np.concatenate([[0.0], np.cumsum(shifted)])
        means = (sums[m:] - sums[:-m]) / m
        steps = means[m:] - means[:-m]
    else:
        steps = np.diff(averages(series, m))
    return math.sqrt(float(steps @ steps) / steps.size / 2)
