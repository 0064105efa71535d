"""The mean of an occupation and its Type A uncertainty when the errors are correlated in time. Never s/sqrt(n).

Strategy. Epochs are summed into at most 32 equal time bins. Per component the bin means z are taken as a Gauss-Markov
process of unknown correlation time tau and unknown variance, a part of it eight times slower (guards against errors of
several scales), plus white noise of share eta:

    C(tau, eta) = 0.9 g(tau) + 0.1 g(8 tau) + eta diag(nbar/n_j)
    g(tau): diagonal 2/h [1 - (1 - e^-h)/h], off it ((1 - e^-h)/h)^2 e^(-(d-1)h), h = b/tau, d bins apart
    a = 1'C^-1 1   mu = 1'C^-1 z / a   SS = (z - mu)'C^-1(z - mu)   nu = nu0 + m - 1
    s^2 = (nu0 sigma0^2 + SS)/nu       u_g^2 = s^2/a

for every point of a grid of tau (13 values about the class's own) and eta (7 values), each weighted by how well it
explains the bins and by the class:

    ln w = -1/2 ln|C| - 1/2 ln a - nu/2 ln(nu0 sigma0^2 + SS) - zeta^2/2,  tau = tau0 exp(0.9 zeta)

mean = sum w mu; the half-width U_A solves sum w [2 F_t(U_A/sqrt(u_g^2 + (mu - mean)^2); nu) - 1] = 0.95, and the same
at 68.27 %; the ratio of both gives nu_A, and u_A = U_A/t_.975(nu_A). In a short occupation the class governs, in a long
one the data: `governed_by` says which.

Ingredients, all published: Gauss-Markov process; generalised least squares; conjugate scaled-inverse-chi-squared
shrinkage of a variance; Type A of GUM 4.2.7's warning. Cost: for each tau ONE symmetric eigenproblem serves all eta
and all components, since C = G + eta D gives D^-1/2 G D^-1/2 = Q L Q'.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy import special

from fieldbook.reduce.fix_classes import PRIOR_DOF, ClassOfFix

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]

MOST_BINS = 32
SLOW_SHARE, SLOW_FACTOR = 0.1, 8.0
LN_SD_TAU = 0.9
ZETAS: Floats = np.linspace(-2.4, 2.4, 13)
ETAS: Floats = np.array([0.003, 0.03, 0.1, 0.3, 1.0, 3.0, 10.0])
LEAST_SHARE_OF_MEDIAN = 0.25  # emptier bins are dropped
ONE_SIGMA_PROBABILITY = 0.6827
LARGEST_DOF = 1e6
_BISECTIONS = 28


@dataclass(frozen=True)
class Bins:
    """Means of one component in equal time bins. Empty bins are not in it; `index` keeps the distance in time."""

    length_s: float
    index: Ints  # shape (m,), increasing
    count: Ints  # shape (m,), epochs in each
    mean_m: Floats  # shape (m,)
    thinned: bool = False

    @property
    def observed_s(self) -> float:
        """Time that is really covered: number of bins x length."""
        return self.length_s * len(self.index)

    def without_thin(self) -> Bins:
        """Without the bins that hold less than a quarter of the median count; a second call changes nothing."""
        if self.thinned:
            return self
        keep = self.count >= LEAST_SHARE_OF_MEDIAN * np.median(self.count)
        return Bins(self.length_s, self.index[keep], self.count[keep], self.mean_m[keep], thinned=True)


@dataclass(frozen=True)
class Component:
    """Result for one axis. u and half-widths in metres; dof of the Type A part; tau, eta: posterior means."""

    mean_m: float
    u_m: float
    dof: float
    half_width_95_m: float
    half_width_68_m: float
    tau_s: float
    eta: float
    class_share: float  # share of the class in the variance: nu0 sigma0^2/(nu0 sigma0^2 + SS), weighted


@dataclass(frozen=True)
class CorrelatedMean:
    """Mean and Type A uncertainty of east, north, up (up None without heights)."""

    east: Component
    north: Component
    up: Component | None
    rho_en: float  # correlation of the Type A parts of east and north
    tau_s: float  # of all components together
    bin_s: float
    observed_s: float
    bins: int

    @property
    def ratio(self) -> float:
        """Observed time in correlation times."""
        return self.observed_s / self.tau_s

    @property
    def governed_by(self) -> str:
        """What the stated uncertainty rests on: 'class', 'class and data' or 'data'."""
        return governed_by(self.observed_s, self.tau_s)

    @property
    def independent_epochs(self) -> float:
        """How many independent epochs the occupation is worth: variance of one over variance of the mean.

        For the fitted process: 1/G(T) of `prediction`'s shape without the white part. Never below 1.
        """
        ratio = self.ratio
        shape = (1 - SLOW_SHARE) * process_variance(ratio) + SLOW_SHARE * process_variance(ratio / SLOW_FACTOR)
        return max(1.0, 1.0 / shape)

    @property
    def components(self) -> tuple[Component, Component, Component | None]:
        """East, north, up."""
        return self.east, self.north, self.up


def governed_by(observed_s: float, tau_s: float) -> str:
    """'class' below 5 correlation times, 'class and data' below 20, then 'data'."""
    ratio = observed_s / tau_s
    if ratio < 5:
        return "class"
    return "class and data" if ratio < 20 else "data"


def process_variance(ratio: float) -> float:
    """Variance of the time average of a unit Gauss-Markov process over T = ratio tau: 2/r [1 - (1 - e^-r)/r]."""
    if ratio < 1e-4:  # series: the formula cancels
        return 1.0 - ratio / 3.0
    return 2.0 / ratio * (1.0 + math.expm1(-ratio) / ratio)


def bin_correlation(index: Ints, length_s: float, tau_s: Floats) -> Floats:
    """g(tau): covariance of the bin means of unit Gauss-Markov processes.

    Args:
        index: bin numbers, shape (m,).
        length_s: bin length in seconds.
        tau_s: correlation times in seconds, shape (k,).

    Returns:
        shape (k, m, m).
    """
    h = length_s / tau_s
    fade = -np.expm1(-h) / h
    diagonal = np.array([process_variance(float(item)) for item in h])
    distance = np.abs(index[:, None] - index[None, :])
    result: Floats = (fade**2)[:, None, None] * np.exp(-(np.maximum(distance, 1) - 1) * h[:, None, None])
    here = np.arange(len(index))
    result[:, here, here] = diagonal[:, None]
    return result


def error_shape(index: Ints, length_s: float, tau_s: Floats) -> Floats:
    """0.9 g(tau) + 0.1 g(8 tau), shape (k, m, m)."""
    fast = bin_correlation(index, length_s, tau_s)
    slow = bin_correlation(index, length_s, SLOW_FACTOR * tau_s)
    return (1 - SLOW_SHARE) * fast + SLOW_SHARE * slow


@dataclass(frozen=True)
class _Grid:
    """All grid points for one set of bins. Shapes: k = 13 tau, l = 7 eta, m bins."""

    tau_s: Floats  # (k,)
    inverse: Floats  # (k, l, m): 1/(lambda + eta)
    ones: Floats  # (k, m): Q' D^-1/2 1
    rotation: Floats  # (k, m, m): D^-1/2 Q
    log_det: Floats  # (k, l)
    a: Floats  # (k, l): 1'C^-1 1


def _grid(bins: Bins, tau0_s: float) -> _Grid:
    tau = tau0_s * np.exp(LN_SD_TAU * ZETAS)
    white = bins.count.mean() / bins.count
    scale = 1.0 / np.sqrt(white)
    shape = error_shape(bins.index, bins.length_s, tau) * scale[:, None] * scale[None, :]
    values, vectors = np.linalg.eigh(shape)
    values = np.maximum(values, 0.0)[:, None, :] + ETAS[None, :, None]
    rotation = scale[None, :, None] * vectors
    ones = rotation.sum(axis=1)
    inverse = 1.0 / values
    log_det = np.log(values).sum(axis=2) + float(np.log(white).sum())
    return _Grid(tau, inverse, ones, rotation, log_det, np.einsum("klm,km,km->kl", inverse, ones, ones))


@dataclass(frozen=True)
class _Fit:
    """One component on the grid, all shapes (k, l)."""

    mu: Floats
    variance: Floats  # u_g^2
    squares: Floats  # nu0 sigma0^2 + SS
    weight: Floats
    residual: Floats  # (k, l, m): Q' D^-1/2 (z - mu)
    nu: float
    prior: float  # nu0 sigma0^2


def _fit(grid: _Grid, z: Floats, sigma0_m: float) -> _Fit:
    turned = np.einsum("kmj,m->kj", grid.rotation, z)
    mu = np.einsum("klm,km,km->kl", grid.inverse, grid.ones, turned) / grid.a
    residual = turned[:, None, :] - mu[:, :, None] * grid.ones[:, None, :]
    prior = PRIOR_DOF * sigma0_m**2
    squares = prior + np.einsum("klm,klm,klm->kl", grid.inverse, residual, residual)
    nu = PRIOR_DOF + len(z) - 1
    logs = -0.5 * grid.log_det - 0.5 * np.log(grid.a) - nu / 2 * np.log(squares) - ZETAS[:, None] ** 2 / 2
    weight = np.exp(logs - logs.max())
    weight /= weight.sum()
    return _Fit(mu, squares / nu / grid.a, squares, weight, residual, nu, prior)


def _component(grid: _Grid, fit: _Fit) -> Component:
    mean = float((fit.weight * fit.mu).sum())
    spread = np.sqrt(fit.variance + (fit.mu - mean) ** 2).ravel()
    wide, narrow = _half_widths(fit.weight.ravel(), spread, fit.nu)
    dof = dof_of_ratio(wide / narrow)
    return Component(
        mean_m=mean,
        u_m=wide / float(special.stdtrit(dof, 0.975)),
        dof=dof,
        half_width_95_m=wide,
        half_width_68_m=narrow,
        tau_s=float((fit.weight * grid.tau_s[:, None]).sum()),
        eta=float((fit.weight * ETAS[None, :]).sum()),
        class_share=float((fit.weight * (fit.prior / fit.squares)).sum()),
    )


def _half_widths(weight: Floats, spread: Floats, nu: float) -> tuple[float, float]:
    """Half-widths of the mixture of t distributions at 95 % and 68.27 %, both bisected together."""
    wanted = np.array([0.95, ONE_SIGMA_PROBABILITY])
    low, high = np.zeros(2), np.full(2, 20.0 * float(spread.max()))  # nu >= 4: t_.975 is below 2.8
    for _ in range(_BISECTIONS):
        middle = (low + high) / 2
        inside = (weight * (2 * special.stdtr(nu, middle[:, None] / spread) - 1)).sum(axis=1)
        below = inside < wanted
        low, high = np.where(below, middle, low), np.where(below, high, middle)
    result = (low + high) / 2
    return float(result[0]), float(result[1])


def dof_of_ratio(ratio: float) -> float:
    """Degrees of freedom of the t whose 95 % and 68.27 % half-widths have this ratio; at most a million."""
    upper = (1 + ONE_SIGMA_PROBABILITY) / 2
    low, high = math.log(1.0), math.log(LARGEST_DOF)
    for _ in range(40):
        middle = (low + high) / 2
        dof = math.exp(middle)
        if float(special.stdtrit(dof, 0.975) / special.stdtrit(dof, upper)) > ratio:
            low = middle
        else:
            high = middle
    return math.exp((low + high) / 2)


def correlated_mean(east: Bins, north: Bins, up: Bins | None, fix_class: ClassOfFix) -> CorrelatedMean:
    """Mean and Type A uncertainty of an occupation.

    Args:
        east, north: bin means in metres, the same bins and counts.
        up: bin means of the epochs that have a height (its own counts), None = no heights.
        fix_class: class of fix: sigmas and correlation time.
    """
    east, north = east.without_thin(), north.without_thin()
    grid = _grid(east, fix_class.correlation_s)
    fits = [_fit(grid, item.mean_m, fix_class.horizontal_m) for item in (east, north)]
    found = [_component(grid, fit) for fit in fits]
    upper: Component | None = None
    if up is not None and len(up.index):
        up = up.without_thin()
        same = np.array_equal(up.index, east.index) and np.array_equal(up.count, east.count)
        up_grid = grid if same else _grid(up, fix_class.correlation_s)
        upper = _component(up_grid, _fit(up_grid, up.mean_m, fix_class.vertical_m))
    times = [item.tau_s for item in (*found, upper) if item is not None]
    return CorrelatedMean(
        found[0], found[1], upper, _rho(grid, fits[0], fits[1]), sum(times) / len(times),
        east.length_s, east.observed_s, len(east.index),
    )  # fmt: skip


def _rho(grid: _Grid, east: _Fit, north: _Fit) -> float:
    """One shrunk matrix for east and north: the raw correlation is 0.99 in the first seconds."""
    cross = np.einsum("klm,klm,klm->kl", grid.inverse, east.residual, north.residual)
    weight = (east.weight + north.weight) / 2
    return float((weight * cross / np.sqrt(east.squares * north.squares)).sum())


def short_uncertainty_m(bins: Bins, sigma0_m: float, tau0_s: float) -> float:
    """u of the mean of a few bins at the class's own correlation time: one matrix instead of 91.

    For comparing initialisations, hundreds of which may have to be judged within a live evaluation.
    """
    shape = error_shape(bins.index, bins.length_s, np.array([tau0_s]))[0]
    shape += 0.3 * np.diag(bins.count.mean() / bins.count)
    solved = np.linalg.solve(shape, np.column_stack([np.ones(len(bins.index)), bins.mean_m]))
    a = float(solved[:, 0].sum())
    residual = bins.mean_m - float(solved[:, 1].sum()) / a
    squares = float(residual @ (solved[:, 1] - float(solved[:, 1].sum()) / a * solved[:, 0]))
    return math.sqrt((PRIOR_DOF * sigma0_m**2 + squares) / (PRIOR_DOF + len(bins.index) - 1) / a)
