"""Does the position drift, and does the average settle: both judged against the errors' own correlation in time.

Drift: a straight line through the bins by generalised least squares, with the covariance of the mean's own model
(`correlated_mean`), fitted anew with the line in it: were it taken from the fit without a line, a drift would pass for
a long correlation time and hide itself. Per point of the grid of correlation times and white shares, X = (1, t):

    b = (X'C^-1 X)^-1 X'C^-1 z   SS = (z - X b)'C^-1(z - X b)   nu = nu0 + m - 2   s^2 = (nu0 sigma0^2 + SS)/nu
    ln w = -1/2 ln|C| - 1/2 ln|X'C^-1 X| - nu/2 ln(nu0 sigma0^2 + SS) - zeta^2/2

the slope's two-sided p by t is averaged with w, and tested at 1 % for the three axes together (Sidak). Ordinary
regression of a correlated series finds a drift in 78 to 98 % of sound sessions, so it is never used.

Settling: variance of the means of 8 equal parts over that of 32. Independent parts give 0.25; above 0.7 the parts are
still of one piece, and the average of the session is mostly the error of its time of day (index and limit: from a
simulation study for this program; RTK of 5 minutes 0.7 and more in nine of ten, of an hour in one of ten).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import special

from fieldbook.reduce.allan import sd_of_averages
from fieldbook.reduce.correlated_mean import LN_SD_TAU, ZETAS, Bins, error_shape
from fieldbook.reduce.estimate import Estimate
from fieldbook.reduce.fix_classes import PRIOR_DOF, ClassOfFix
from fieldbook.reduce.series import AXES, Series

Floats = NDArray[np.float64]

DRIFT_ALPHA = 0.01  # of a session, all axes together
LEAST_BINS = 12
INDEX_PARTS, INDEX_GROUP = 32, 4
NOT_SETTLED = 0.7
_LEAST_FILLED = 0.9
_ETAS: Floats = np.array([0.01, 0.1, 0.5, 3.0])


@dataclass(frozen=True)
class Drift:
    """A slope that the correlation does not explain: change over the session with its standard uncertainty, metres."""

    axis: str
    change_m: float
    u_m: float
    span_s: float
    p: float


def drift(found: Estimate) -> Drift | None:
    """The axis with the most significant slope, if it is one at 1 % for the session."""
    best: Drift | None = None
    axes = [axis for axis, item in enumerate(found.mean.components) if item is not None]
    grids: list[_Grid] = []
    for axis in axes:
        bins = found.all_blocks.bins(axis)
        if bins is None:
            continue
        bins = bins.without_thin()
        if len(bins.index) < LEAST_BINS:
            continue
        if not grids or not grids[-1].serves(bins):
            grids.append(_Grid.of(bins, found.fix_class.correlation_s))
        line = grids[-1].line(AXES[axis], bins, found.fix_class.sigma_enu_m[axis])
        if best is None or line.p < best.p:
            best = line
    limit = 1 - (1 - DRIFT_ALPHA) ** (1 / len(axes))
    return best if best is not None and best.p < limit else None


@dataclass(frozen=True)
class _Grid:
    """What a line through the same bins shares between axes. g grid points, m bins, X = (1, t), t from -1/2 to 1/2."""

    bins: Bins
    inverse: Floats  # (g, m, m): C^-1
    design: Floats  # (m, 2)
    projected: Floats  # (g, 2, m): X'C^-1
    normal_inverse: Floats  # (g, 2, 2)
    logs: Floats  # (g,): what does not depend on z

    @classmethod
    def of(cls, bins: Bins, tau0_s: float) -> _Grid:
        zetas = np.repeat(ZETAS, len(_ETAS))
        shape = np.repeat(error_shape(bins.index, bins.length_s, tau0_s * np.exp(LN_SD_TAU * ZETAS)), len(_ETAS), 0)
        here = np.arange(len(bins.index))
        shape[:, here, here] += np.outer(np.tile(_ETAS, len(ZETAS)), bins.count.mean() / bins.count)
        inverse = np.asarray(np.linalg.inv(shape), dtype=np.float64)
        t: Floats = (bins.index - bins.index[0]) / float(bins.index[-1] - bins.index[0]) - 0.5
        design: Floats = np.column_stack([np.ones(len(t)), t])
        projected: Floats = design.T @ inverse
        normal = projected @ design
        normal_inverse = np.asarray(np.linalg.inv(normal), dtype=np.float64)
        log_dets = np.linalg.slogdet(shape)[1] + np.linalg.slogdet(normal)[1]
        return cls(bins, inverse, design, projected, normal_inverse, -0.5 * log_dets - zetas**2 / 2)

    def serves(self, bins: Bins) -> bool:
        """The same places and counts."""
        return np.array_equal(self.bins.index, bins.index) and np.array_equal(self.bins.count, bins.count)

    def line(self, axis: str, bins: Bins, sigma0_m: float) -> Drift:
        """The line through one axis, tested or not."""
        z = bins.mean_m - bins.mean_m.mean()
        b = np.einsum("gij,gj->gi", self.normal_inverse, self.projected @ z)
        residual = z - b @ self.design.T
        squares = PRIOR_DOF * sigma0_m**2 + np.einsum("gi,gij,gj->g", residual, self.inverse, residual)
        nu = PRIOR_DOF + len(z) - 2
        logs = self.logs - nu / 2 * np.log(squares)
        weight = np.exp(logs - logs.max())
        weight /= weight.sum()
        u = np.sqrt(squares / nu * self.normal_inverse[:, 1, 1])
        p = float((weight * 2 * special.stdtr(nu, -np.abs(b[:, 1]) / u)).sum())
        change = float((weight * b[:, 1]).sum())
        spread = float(np.sqrt((weight * (u**2 + (b[:, 1] - change) ** 2)).sum()))
        return Drift(axis, change, spread, float(bins.index[-1] - bins.index[0]) * bins.length_s, p)


def settling_index(series: Series, fix_class: ClassOfFix) -> float | None:
    """All axes together, each in units of its class sigma; None under 32 places of 10 s, or with large gaps."""
    if series.span < INDEX_PARTS:
        return None
    few = many = 0.0
    for axis, sigma in enumerate(fix_class.sigma_enu_m):
        found = series.even(axis, 1 << 30, _LEAST_FILLED)
        if found is None or len(found[1]) < INDEX_PARTS:
            continue
        edges = np.linspace(0, len(found[1]), INDEX_PARTS + 1).astype(np.int64)
        means = np.add.reduceat(found[1], edges[:-1]) / np.diff(edges)
        few += (sd_of_averages(means, INDEX_GROUP) / sigma) ** 2
        many += (sd_of_averages(means, 1) / sigma) ** 2
    return few / many if many > 0 else None
