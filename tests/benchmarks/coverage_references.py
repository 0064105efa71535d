"""What the product is measured against: the mean with the covariance known, the naive figure, and usual means.

The known-covariance mean forms averages over runs of good epochs without a hole, with their exact covariance: with F
the function whose second difference is the autocovariance r (F even, F(0) = 0), the covariance sum of the runs
[a, b) and [c, d) is F(b-c) + F(a-d) - F(a-c) - F(b-d).
"""

from __future__ import annotations

import numpy as np
from coverage_simulator import Made
from numpy.typing import NDArray

Floats = NDArray[np.float64]
MOST_RUNS = 160
HUBER = 1.345
MAD = 1.4826


def known_covariance(made: Made) -> tuple[Floats, Floats, float]:
    """(error of the mean, its standard deviation, T/tau of east): shapes (3,), (3,). Rounding is not in it."""
    rows = np.flatnonzero(made.clean)
    runs = _runs(made, rows)
    count = int(made.index[-1] - made.index[0]) + 2
    errors, sds = np.empty(3), np.empty(3)
    for axis in range(3):
        covariance = _run_covariance(made, runs, made.covariance(axis, count))
        bias = made.regime.bias_m[1 if axis == 2 else 0]
        number = made.number[runs[:, 0]]
        covariance += bias**2 * (number[:, None] == number[None, :])
        means = np.array([made.errors_m[a:b, axis].mean() for a, b in runs])
        solved = np.linalg.solve(covariance, np.ones(len(runs)))
        errors[axis], sds[axis] = solved @ means / solved.sum(), 1 / np.sqrt(solved.sum())
    return errors + made.floor_m, sds, _ratio(made)


def _ratio(made: Made) -> float:
    """T over the true correlation time, from the exact variance of the mean of T: tau = T var(mean)/(2 var)."""
    count = int(made.index[-1] - made.index[0]) + 1
    covariance = made.covariance(0, count)
    weight = 2.0 * (count - np.arange(count))
    weight[0] = count
    share = float(weight @ covariance) / count**2 / covariance[0]
    # solve 2/r [1 - (1 - e^-r)/r] = share for r: exact for one process, an equivalent for the others
    low, high = 1e-6, 1e7
    for _ in range(80):
        middle = np.sqrt(low * high)
        value = 2 / middle * (1 + np.expm1(-middle) / middle) if middle > 1e-4 else 1 - middle / 3
        low, high = (middle, high) if value > share else (low, middle)
    return float(low)


def _runs(made: Made, rows: NDArray[np.int64]) -> NDArray[np.int64]:
    """Runs [a, b) of rows without a hole, of one initialisation, none longer than a share of the session."""
    index, number = made.index[rows], made.number[rows]
    most = max(1, -(-len(rows) // MOST_RUNS))
    breaks = np.flatnonzero((np.diff(index) != 1) | (np.diff(number) != 0)) + 1
    found = []
    for start, stop in zip(np.append(0, breaks), np.append(breaks, len(rows)), strict=True):
        for first in range(int(start), int(stop), most):
            last = min(first + most, int(stop))
            found.append((int(rows[first]), int(rows[last - 1]) + 1))
    return np.array(found)


def _run_covariance(made: Made, runs: NDArray[np.int64], r: Floats) -> Floats:
    f = np.zeros(len(r) + 1)
    f[1] = r[0] / 2
    f[1:] = r[0] / 2 + np.concatenate([[0.0], np.cumsum(r[0] / 2 + np.cumsum(r[1:]))])
    a, b = made.index[runs[:, 0]], made.index[runs[:, 1] - 1] + 1

    def at(first: NDArray[np.int64], second: NDArray[np.int64]) -> Floats:
        return f[np.abs(first[:, None] - second[None, :])]

    length = (b - a).astype(float)
    return (at(b, a) + at(a, b) - at(a, a) - at(b, b)) / np.outer(length, length)


def accepted(made: Made) -> Floats:
    """Errors of all epochs of the accepted quality: what a plain mean would use."""
    return (made.errors_m + made.floor_m)[made.quality == made.regime.quality]


def naive(made: Made) -> tuple[Floats, Floats]:
    """(error, s/sqrt(n)) of the plain mean, shapes (3,)."""
    x = accepted(made)
    return x.mean(axis=0), x.std(axis=0, ddof=1) / np.sqrt(len(x))


def usual_means(made: Made) -> dict[str, Floats]:
    """Errors of plain mean, median, Huber and 3-MAD rejection, each shape (3,)."""
    x = accepted(made)
    centre = np.median(x, axis=0)
    scale = np.maximum(MAD * np.median(np.abs(x - centre), axis=0), 1e-12)
    near = np.abs(x - centre) <= 3 * scale
    huber = centre.copy()
    for _ in range(30):
        weight = np.minimum(1.0, HUBER * scale / np.maximum(np.abs(x - huber), 1e-15))
        huber = (weight * x).sum(axis=0) / weight.sum(axis=0)
    return {
        "mean": x.mean(axis=0),
        "median": centre,
        "Huber": huber,
        "3 MAD": (near * x).sum(axis=0) / near.sum(axis=0),
    }
