"""A second look at initialisations that pass for one place: each against what the others say of its own time.

Strategy. Two places are compared by their distance; a wrong initialisation 0.1 m higher, in a noisy quarter of an hour, comes
within the tolerance of a single one now and then. The errors of a static antenna run on across a loss of fix (multipath,
atmosphere; only the ambiguities are new), so the seconds before and after say more of an initialisation than the mean of
the hour does. The others' blocks are taken in eight pieces: before and after, up to 30 s, 2 min, 8 min away, and the rest. With
the class's Gauss-Markov covariance, as in `correlated_mean`, the best unbiased prediction of the initialisation's mean from
these pieces is the ordinary kriging of

    cov of the means over [a, b] and [c, d] = [f(b - c) + f(a - d) - f(a - c) - f(b - d)]/((b - a)(d - c))
    f(x) = tau |x| + tau^2 (e^(-|x|/tau) - 1)

and the residual's standard deviation is about two thirds of that of a difference of two places. It is wrong beyond 40 mm in
plan or 50 mm in height (RTK fixed), or beyond 3 standard deviations where a stated class makes these larger. Of those
the least probable one goes first (the one whose leaving explains most), then the rest are looked at again: a wrong one
spoils what is said of its neighbours.

Sources: kriging: G. Matheron, Economic Geology 58 (1963) 1246-1266 (from memory, high); limits and pieces: own choice, from
a simulation study for this program.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from fieldbook.reduce.blocks import Blocks
from fieldbook.reduce.correlated_mean import SLOW_FACTOR, SLOW_SHARE
from fieldbook.reduce.fix_classes import FLOOR_SHARE, ClassOfFix
from fieldbook.reduce.local_frame import UNITS_PER_M

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

LIMIT_M = (0.040, 0.040, 0.050)
LIMIT_SIGMAS = 3.0
LEAST_TO_LOOK_AGAIN = 3  # of two nobody says which is wrong
REACHES_S = (30.0, 120.0, 480.0)
WHITE_SHARE = 0.1  # variance of one second's noise in that of the process
_MISSING = 1e6  # variance of a piece that is empty, in that of the process: it gets no weight


def wrong_ones(blocks: Blocks, fix_class: ClassOfFix) -> list[int]:
    """Numbers of the initialisations that the others speak against, the worst first.

    Args:
        blocks: of the initialisations that pass for one place, in order of arrival.
        fix_class: class of fix; only RTK fixed has wrong initialisations of a size of their own.
    """
    found: list[int] = []
    while fix_class.is_rtk_fixed:
        numbers = blocks.column("initialisation")
        first = np.flatnonzero(np.diff(numbers, prepend=-1))  # in order of arrival: each in one piece
        members = numbers[first]
        if len(members) < LEAST_TO_LOOK_AGAIN:
            break
        excess, improbability = _residuals(blocks, first, fix_class)
        if excess.max() <= 1.0:
            break
        worst = int(np.where(excess > 1.0, improbability, 0.0).argmax())
        found.append(int(members[worst]))
        blocks = blocks.where(numbers != members[worst])
    return found


def _residuals(blocks: Blocks, first: Ints, fix_class: ClassOfFix) -> tuple[Floats, Floats]:
    """Per initialisation, shape (n,): largest |residual| / limit of the three axes, and the sum of squares of the
    residuals in their standard deviations. `first`: row where each begins."""
    count, last = len(first), np.append(first[1:], len(blocks))
    edges = _edges(blocks, first, last)
    mean, span = _pieces(blocks, edges[:, :-1].ravel(), edges[:, 1:].ravel())
    mean, span = mean.reshape(count, -1, 3), span.reshape(count, -1, 2)
    residual, variance = np.empty((count, 3)), np.empty((count, 3))
    own = len(REACHES_S) + 1
    covariance = _covariance(span, fix_class.correlation_s)
    for axis in range(3):
        residual[:, axis], variance[:, axis] = _predicted(covariance, mean[:, :, axis], own)
    sigma = np.array(fix_class.sigma_enu_m)
    deviation = sigma * np.sqrt(variance)
    limit = np.maximum(np.array(LIMIT_M), LIMIT_SIGMAS * deviation)
    excess = np.nan_to_num(np.abs(residual) / limit).max(axis=1)
    return np.asarray(excess), np.asarray(np.nan_to_num((residual / deviation) ** 2).sum(axis=1))


def _edges(blocks: Blocks, first: Ints, last: Ints) -> Ints:
    """Rows where the pieces before, the initialisation and the pieces after begin and end, shape (n, 10)."""
    # a corrected date may set the clock back: rows stay in the order of arrival
    time_s = np.maximum.accumulate(blocks.column("index")) * float(blocks.block_s)
    begin, end = time_s[first], time_s[last - 1]
    reaches = np.array(REACHES_S)
    before = np.searchsorted(time_s, begin[:, None] - reaches[::-1], side="left")
    after = np.searchsorted(time_s, end[:, None] + reaches, side="right")
    zeros, whole = np.zeros(len(first), dtype=np.int64), np.full(len(first), len(time_s))
    before, after = np.minimum(before, first[:, None]), np.maximum(after, last[:, None])
    return np.column_stack([zeros, before, first, last, after, whole]).astype(np.int64)


def _pieces(blocks: Blocks, start: Ints, stop: Ints) -> tuple[Floats, Floats]:
    """Mean of the epochs in rows start <= r < stop, shape (k, 3), NaN if none; time covered in seconds, shape (k, 2)."""
    names = ("count", "count", "count_up", "sum_east", "sum_north", "sum_up")
    running = np.zeros((len(blocks) + 1, len(names)), dtype=np.int64)
    np.cumsum(np.column_stack([blocks.column(name) for name in names]), axis=0, out=running[1:])
    total = running[stop] - running[start]
    with np.errstate(invalid="ignore", divide="ignore"):
        mean = total[:, 3:] / total[:, :3] / UNITS_PER_M
    index = np.append(blocks.column("index"), 0)
    empty = start == stop
    from_s = np.where(empty, 0, index[start]) * float(blocks.block_s)
    to_s = np.where(empty, 1, index[np.maximum(stop, 1) - 1] + 1) * float(blocks.block_s)
    return mean, np.column_stack([from_s, np.maximum(to_s, from_s + blocks.block_s)])


def _covariance(span: Floats, tau_s: float) -> Floats:
    """Covariance of the means over these spans of time, shape (n, p, 2) -> (n, p, p), variance of the process 1."""
    a, b = span[:, :, None, 0], span[:, :, None, 1]
    c, d = span[:, None, :, 0], span[:, None, :, 1]
    total = np.zeros((len(span), span.shape[1], span.shape[1]))
    for share, tau in ((1 - SLOW_SHARE, tau_s), (SLOW_SHARE, SLOW_FACTOR * tau_s)):
        total += share * (_f(b - c, tau) + _f(a - d, tau) - _f(a - c, tau) - _f(b - d, tau)) / ((b - a) * (d - c))
    here = np.arange(span.shape[1])
    # each initialisation may have a bias of its own within the least uncertainty claimed
    total[:, here, here] += FLOOR_SHARE**2 + WHITE_SHARE / (span[:, :, 1] - span[:, :, 0])
    return total


def _f(x: Floats, tau_s: float) -> Floats:
    return np.asarray(tau_s * np.abs(x) + tau_s**2 * np.expm1(-np.abs(x) / tau_s))


def _predicted(covariance: Floats, mean: Floats, own: int) -> tuple[Floats, Floats]:
    """(own mean minus its prediction from the other pieces, variance of that in the process's own)."""
    others = np.delete(np.arange(mean.shape[1]), own)
    lacking = np.isnan(mean[:, others])
    size = len(others) + 1
    system, right = np.ones((len(mean), size, size)), np.ones((len(mean), size, 1))
    system[:, :-1, :-1] = covariance[:, others][:, :, others]
    here = np.arange(size - 1)
    system[:, here, here] += np.where(lacking, _MISSING, 0.0)
    system[:, -1, -1] = 0.0
    right[:, :-1, 0] = np.where(lacking, 0.0, covariance[:, others, own])
    solved = np.linalg.solve(system, right)
    weight = solved[:, :-1, 0]
    known = np.where(lacking, 0.0, mean[:, others])
    variance = covariance[:, own, own] - (weight * right[:, :-1, 0]).sum(axis=1) - solved[:, -1, 0]
    return mean[:, own] - (weight * known).sum(axis=1), np.maximum(variance, 0.0)
