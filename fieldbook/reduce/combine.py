"""Several occupations of one mark to one position: weights from class and length, what is common stays common.

Strategy: every result is a linear form of the occupations' positions, sum of c_i x_i per axis: the combined position
(c = the weights), the difference of two (1 and -1), a residual (1 - w_i and -w_j). One function, `linear_form`, turns
coefficients into a budget, and everything else calls it, so the combination, its residuals and the tests of differences
cannot disagree about what is common.

    weights      generalised least squares, w = W^-1 1 / (1' W^-1 1) per axis, with the matrix W that the KIND of fix and
                 the LENGTH give: sigma^2 G(T) of the class + the occupation's other lines + what is common. A session's
                 own scatter does not enter: of two short sessions the one that happened to look quiet is not better
                 (weights from the scatter cover 83 % where 95 % is stated).
    uncertainty  c' V c with the full matrix V of what is STATED: Type A as the sessions have it, every other line as in
                 its budget. A line that two occupations share has the covariance min(u_i, u_j)^2: the smaller error is
                 in both, what the larger has beyond it is its own. (u_i u_j instead gives negative weights as soon as
                 the two differ much, the effect known as Peelle's puzzle: a mean outside of both values.)
    dof          Welch-Satterthwaite over the same lines; all parts of the least uncertainty claimed for a kind of fix
                 are one quantity with one number of degrees of freedom (`Term.group`), and so are the means of those
                 occupations that the class of fix still governs in part: a class too good is too good for all of them.

Sources: generalised least squares and its covariance: A. C. Aitken, Proc. R. Soc. Edinburgh 55 (1935) 42-48 (from
memory, high); JCGM 100:2008, 5.2 (correlated input), G.4 (dof); t and F regions: `region`.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy import special

from fieldbook.model.reduction import BudgetLine
from fieldbook.reduce.budget import Combined, Term, Triple, combine, together, welch_satterthwaite
from fieldbook.reduce.correlated_mean import SLOW_FACTOR, SLOW_SHARE, process_variance
from fieldbook.reduce.fix_classes import ClassOfFix

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Shared:
    """A line that other occupations may share: wherever `scope` is the same, it is the same error."""

    term: Term
    scope: str


@dataclass(frozen=True)
class Input:
    """One occupation as the combination sees it.

    enu_m: the mark, in metres east, north, up of one point that is the same for all; up None = no height.
    mean: the Type A line as the session has it. own: its other lines that belong to it alone. shared: the others.
    prior_u_enu_m: what kind of fix and length give for the mean, `class_mean_u_m`; it governs the weights only.
    """

    occupation: int
    enu_m: Triple
    mean: Term
    own: tuple[Term, ...]
    shared: tuple[Shared, ...]
    prior_u_enu_m: tuple[float, float, float]


@dataclass(frozen=True)
class LinearForm:
    """sum of c_i x_i: its value, its lines (scaled, the shared ones merged) and their combination."""

    enu_m: Triple
    terms: tuple[Term, ...]
    combined: Combined

    @property
    def plan_m(self) -> float:
        """Length of the horizontal part."""
        return math.hypot(self.enu_m[0] or 0.0, self.enu_m[1] or 0.0)


@dataclass(frozen=True)
class Residual:
    """One occupation minus the combination, and how probable a larger one is if nothing is wrong."""

    occupation: int
    form: LinearForm
    plan_significance: float
    height_significance: float | None


@dataclass(frozen=True)
class Combination:
    """Several occupations as one. `weights` has shape (n, 3), each axis summing to one; up is 0 without heights."""

    inputs: tuple[Input, ...]
    weights: Floats
    form: LinearForm
    residuals: tuple[Residual, ...]


def class_mean_u_m(fix_class: ClassOfFix, kept_s: float) -> tuple[float, float, float]:
    """Standard uncertainty of a mean of `kept_s` seconds as the class alone has it, east, north, up in metres.

    sigma sqrt(0.9 g(T/tau) + 0.1 g(T/8 tau)), g the variance of the mean of a Gauss-Markov process: the shape that the
    mean itself assumes (`correlated_mean`), without white noise.
    """
    ratio = max(kept_s, 1.0) / fix_class.correlation_s
    shape = (1 - SLOW_SHARE) * process_variance(ratio) + SLOW_SHARE * process_variance(ratio / SLOW_FACTOR)
    east, north, up = (sigma * math.sqrt(shape) for sigma in fix_class.sigma_enu_m)
    return east, north, up


def gls_weights(covariance: ArrayLike) -> Floats:
    """w = W^-1 1 / (1' W^-1 1), shape (n,), of repeated measurements of one quantity.

    Raises:
        ValueError: the matrix is not positive definite.
    """
    matrix = np.asarray(covariance, dtype=np.float64)
    try:
        lower = np.linalg.cholesky(matrix)
    except np.linalg.LinAlgError as error:
        raise ValueError("weights need a positive definite covariance") from error
    solved = np.linalg.solve(lower.T, np.linalg.solve(lower, np.ones(len(matrix))))
    return np.asarray(solved / solved.sum(), dtype=np.float64)


def weights_of(inputs: Sequence[Input]) -> Floats:
    """Weights from class and length, shape (n, 3). Occupations without height have none in height."""
    found = np.zeros((len(inputs), 3))
    for axis in range(3):
        rows = [number for number, item in enumerate(inputs) if _has(item, axis)]
        if rows:
            found[rows, axis] = gls_weights(prior_covariance([inputs[number] for number in rows], axis))
    return found


def prior_covariance(inputs: Sequence[Input], axis: int) -> Floats:
    """W of one axis, shape (n, n), m^2. Axis 0, 1, 2 = east, north, up."""
    own = [
        item.prior_u_enu_m[axis] ** 2 + math.fsum((term.u_enu_m[axis] or 0.0) ** 2 for term in item.own)
        for item in inputs
    ]
    total = np.diag(np.asarray(own, dtype=np.float64))
    for scope in _scopes(inputs):
        total += _kernel([_of_scope(item, scope) for item in inputs], axis)
    return total


def combine_occupations(inputs: Sequence[Input]) -> Combination:
    """The combined position with its residuals.

    Raises:
        ValueError: no input at all.
    """
    if not inputs:
        raise ValueError("there is no occupation to combine")
    weights = weights_of(inputs)
    residuals = []
    for number, item in enumerate(inputs):
        one = unit(inputs, number)
        form = linear_form(inputs, one - np.where(one.any(axis=0), weights, 0.0))
        residuals.append(Residual(item.occupation, form, plan_significance(form), height_significance(form)))
    return Combination(tuple(inputs), weights, linear_form(inputs, weights), tuple(residuals))


def difference(inputs: Sequence[Input], first: int, second: int) -> LinearForm:
    """Input number `second` minus number `first`: what they share to the same size drops out."""
    one, two = unit(inputs, first), unit(inputs, second)
    both = one.any(axis=0) & two.any(axis=0)
    return linear_form(inputs, (two - one) * both)


def against_the_others(inputs: Sequence[Input], number: int) -> LinearForm:
    """One input minus the combination of all others; there must be others."""
    others = [item for place, item in enumerate(inputs) if place != number]
    coefficients = np.insert(-weights_of(others), number, 0.0, axis=0)
    one = unit(inputs, number)
    return linear_form(inputs, (one + coefficients) * (one.any(axis=0) & coefficients.any(axis=0)))


def unit(inputs: Sequence[Input], number: int) -> Floats:
    """Coefficients of one input alone, shape (n, 3); 0 in height where it has none."""
    found = np.zeros((len(inputs), 3))
    found[number] = [1.0 if _has(inputs[number], axis) else 0.0 for axis in range(3)]
    return found


def linear_form(inputs: Sequence[Input], coefficients: ArrayLike) -> LinearForm:
    """sum of c_i x_i with its full budget.

    Args:
        inputs: n occupations.
        coefficients: shape (n, 3), per axis; an axis whose coefficients are all zero has value None if it is the height.

    Raises:
        ValueError: a shared line whose east and north are correlated (there is none in this program).
    """
    c = np.asarray(coefficients, dtype=np.float64)
    terms = [_scaled(term, c[number]) for number, item in enumerate(inputs) for term in (item.mean, *item.own)]
    terms += [_merged([_of_scope(item, scope) for item in inputs], c) for scope in _scopes(inputs)]
    height = bool(c[:, 2].any())
    if not height:
        terms = [replace(term, u_enu_m=(term.u_enu_m[0], term.u_enu_m[1], None)) for term in terms]
    value = [
        math.fsum(c[number, axis] * (item.enu_m[axis] or 0.0) for number, item in enumerate(inputs))
        for axis in range(3)
    ]
    return LinearForm((value[0], value[1], value[2] if height else None), tuple(terms), combine(terms))


def plan_significance(form: LinearForm) -> float:
    """Probability of a larger horizontal form by chance: F(2, nu - 1) of d' S'^-1 d / 2, as in `region`."""
    d = np.array([form.enu_m[0] or 0.0, form.enu_m[1] or 0.0])
    scale = np.asarray(form.combined.cov_en_m2)
    nu = form.combined.region.dof
    if not np.linalg.det(scale) > 0.0:
        return 1.0 if float(np.abs(d).max()) < 1e-12 else 0.0
    if nu is None:
        return math.exp(-float(d @ np.linalg.solve(scale, d)) / 2)
    squared = float(d @ np.linalg.solve(scale * (nu / (nu - 1)), d))
    return math.exp(-(nu - 1) / 2 * math.log1p(squared / (nu - 1)))


def height_significance(form: LinearForm) -> float | None:
    """Probability of a larger height by chance, two-sided t with the effective dof; None without height."""
    d, u, dof = form.enu_m[2], form.combined.u_enu_m[2], form.combined.dof_enu[2]
    if d is None or u is None:
        return None
    if u == 0.0:
        return 1.0 if abs(d) < 1e-12 else 0.0
    lower = special.ndtr(-abs(d) / u) if dof is None else special.stdtr(dof, -abs(d) / u)
    return float(2 * lower)


def printed_lines(terms: Sequence[Term]) -> list[BudgetLine]:
    """The lines of a combination for people: one per source, own ones of several occupations taken together."""
    found: dict[tuple[str, bool], list[Term]] = {}
    for term in terms:
        found.setdefault((term.source, term.common), []).append(term)
    lines = []
    for same in found.values():
        if same[0].group is not None:
            lines.append(together(same).line())
            continue
        axes = [_together([(term.u_enu_m[axis], term.dof_enu[axis]) for term in same]) for axis in range(3)]
        u, dof = tuple(item[0] for item in axes), tuple(item[1] for item in axes)
        lines.append(replace(same[0], u_enu_m=(u[0], u[1], u[2]), dof_enu=(dof[0], dof[1], dof[2])).line())
    return lines


def _together(parts: Sequence[tuple[float | None, float | None]]) -> tuple[float | None, float | None]:
    known = [(u, dof) for u, dof in parts if u is not None]
    return welch_satterthwaite(known) if len(known) == len(parts) else (None, None)


def _has(item: Input, axis: int) -> bool:
    return item.enu_m[axis] is not None


def _scopes(inputs: Sequence[Input]) -> list[str]:
    return list(dict.fromkeys(shared.scope for item in inputs for shared in item.shared))


def _of_scope(item: Input, scope: str) -> Term | None:
    return next((shared.term for shared in item.shared if shared.scope == scope), None)


def _kernel(terms: Sequence[Term | None], axis: int) -> Floats:
    """min(u_i, u_j)^2, shape (n, n): the covariance of nested errors, positive semidefinite whatever the sizes."""
    u = np.array([0.0 if term is None else (term.u_enu_m[axis] or 0.0) for term in terms])
    return np.asarray(np.minimum.outer(u, u) ** 2, dtype=np.float64)


def _scaled(term: Term, c: Floats) -> Term:
    """A term of one occupation times its coefficients; the sign matters only for its correlation."""
    u = [_times(value, float(factor)) for value, factor in zip(term.u_enu_m, c, strict=True)]
    sign = -1.0 if c[0] * c[1] < 0 else 1.0
    return replace(term, u_enu_m=(u[0], u[1], u[2]), rho_en=sign * term.rho_en)


def _times(u: float | None, factor: float) -> float | None:
    """What an occupation does not know cannot spoil an axis it has no part in."""
    if factor == 0.0:
        return 0.0
    return None if u is None else abs(factor) * u


def _merged(terms: Sequence[Term | None], c: Floats) -> Term:
    known = [term for term in terms if term is not None]
    if any(term.rho_en for term in known):
        raise ValueError("a shared line with correlated east and north is not provided for")
    u: list[float | None] = []
    for axis in range(3):
        lost = any(t is not None and t.u_enu_m[axis] is None and f != 0 for t, f in zip(terms, c[:, axis], strict=True))
        square = float(c[:, axis] @ _kernel(terms, axis) @ c[:, axis])
        u.append(None if lost else math.sqrt(max(square, 0.0)))
    dof = [_smallest([term.dof_enu[axis] for term in known]) for axis in range(3)]
    return replace(known[0], u_enu_m=(u[0], u[1], u[2]), dof_enu=(dof[0], dof[1], dof[2]))


def _smallest(dof: Sequence[float | None]) -> float | None:
    return min((value for value in dof if value is not None), default=None)
