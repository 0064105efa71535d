"""Combining the lines of an uncertainty budget: JCGM 100:2008 (GUM), 5.1, 5.2 and annex G.

Strategy: a Term is one line with its standard uncertainty and degrees of freedom per axis. 0.0 = it does not touch
this axis; None = not known, and then the combined figure of that axis is not known either: a missing line never
makes an uncertainty smaller. Terms that share a `group` (the two halves of the least uncertainty claimed for a kind
of fix; the means of several occupations that rest on one class of fix) stand as separate lines, but what is not known of
their sizes is ONE thing: their variances err together, so they do not add degrees of freedom to one another.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike, NDArray

from fieldbook.model.reduction import BudgetLine
from fieldbook.reduce.region import Region, coverage_factor_95, region_95

Triple = tuple[float | None, float | None, float | None]


@dataclass(frozen=True)
class Term:
    """One line: u in metres and dof per axis (east, north, up); dof None = infinite."""

    source: str
    type: str  # "A" or "B"
    distribution: str  # "t", "normal", "rectangular", "as stated"
    u_enu_m: Triple
    dof_enu: Triple = (None, None, None)
    common: bool = False  # the same error in every mark or occupation it is combined with
    rho_en: float = 0.0  # correlation of its east and north
    group: str | None = None
    note: str = ""

    def line(self) -> BudgetLine:
        """As printed: one number of degrees of freedom, the smallest of the axes it touches."""
        used = [dof for u, dof in zip(self.u_enu_m, self.dof_enu, strict=True) if u and dof is not None]
        return BudgetLine(
            self.source,
            self.type,
            self.distribution,
            list(self.u_enu_m),
            min(used) if used else None,
            self.common,
            self.note,
        )


@dataclass(frozen=True)
class Combined:
    """Combined standard uncertainty, effective dof (None = infinite), k and U at 95 % per axis, and the region."""

    u_enu_m: Triple
    dof_enu: Triple
    k95_enu: Triple
    cov_en_m2: tuple[tuple[float, float], tuple[float, float]]
    region: Region

    @property
    def rho_en(self) -> float:
        """Correlation of east and north."""
        (ee, en), (_, nn) = self.cov_en_m2
        return en / math.sqrt(ee * nn) if ee > 0 and nn > 0 else 0.0

    @property
    def horizontal95_m(self) -> float:
        """Radius of the exact 95 % circle."""
        return self.region.radius_m

    @property
    def vertical95_m(self) -> float | None:
        """Half-width of the 95 % interval of the height; None without heights."""
        u, k = self.u_enu_m[2], self.k95_enu[2]
        return None if u is None or k is None else k * u


def rectangular(half_width: float) -> float:
    """Standard uncertainty of a quantity anywhere within +- half_width: a/sqrt(3) (GUM 4.3.7)."""
    return half_width / math.sqrt(3)


def triangular(half_width: float) -> float:
    """a/sqrt(6) (GUM 4.3.9)."""
    return half_width / math.sqrt(6)


def arcsine(half_width: float) -> float:
    """a/sqrt(2): U-shaped, for a quantity that swings like a sine within +- half_width (GUM H.1.3.4)."""
    return half_width / math.sqrt(2)


def sd_of_experimental_sd(n: int) -> float:
    """Relative standard deviation of a standard deviation from n independent normal readings (GUM E.4.3, E.1).

    Exact form, sqrt((n-1)/2 (Gamma((n-1)/2)/Gamma(n/2))^2 - 1) relative to its own mean.
    """
    ratio = math.exp(math.lgamma((n - 1) / 2) - math.lgamma(n / 2))
    return math.sqrt((n - 1) / 2 * ratio**2 - 1)


def welch_satterthwaite(parts: Iterable[tuple[float, float | None]]) -> tuple[float, float | None]:
    """(u, effective dof) of independent parts (u_i, dof_i): nu = u^4 / sum u_i^4/nu_i (GUM G.4.1, eq. G.2b).

    dof None = infinite, in and out.
    """
    pairs = [(u, dof) for u, dof in parts if u != 0.0]
    variance = math.fsum(u * u for u, _ in pairs)
    # relative to the total, so that the fourth powers of micrometres do not underflow
    weighted = math.fsum((u * u / variance) ** 2 / dof for u, dof in pairs if dof is not None and math.isfinite(dof))
    return math.sqrt(variance), (1 / weighted if weighted > 0 else None)


def combine(terms: Sequence[Term]) -> Combined:
    """All terms together. East and north must be known; up may be None.

    Raises:
        ValueError: no term, or a term whose east or north is not known.
    """
    if not terms or any(term.u_enu_m[axis] is None for term in terms for axis in (0, 1)):
        raise ValueError("a budget needs terms whose east and north are known")
    merged = _grouped(terms)
    pairs = [_axis(merged, axis) for axis in range(3)]
    u = tuple(pair[0] for pair in pairs)
    dof = tuple(pair[1] for pair in pairs)
    k = tuple(None if pair[0] is None else coverage_factor_95(pair[1]) for pair in pairs)
    en = math.fsum(term.rho_en * (term.u_enu_m[0] or 0.0) * (term.u_enu_m[1] or 0.0) for term in terms)
    cov = (((u[0] or 0.0) ** 2, en), (en, (u[1] or 0.0) ** 2))
    return Combined(
        (u[0], u[1], u[2]), (dof[0], dof[1], dof[2]), (k[0], k[1], k[2]), cov, region_95(cov, dof[0], dof[1])
    )


def erring_together(parts: Iterable[tuple[float, float | None]]) -> tuple[float, float | None]:
    """(u, dof) of parts (u_i, dof_i) whose variance estimates err in the same sense: nu = u^4 / (sum u_i^2/sqrt(nu_i))^2.

    As `welch_satterthwaite`, where the relative standard deviations sqrt(2/nu_i) of the variances add instead of their
    squares: equal parts of nu degrees of freedom have nu together, not nu times their number.
    """
    pairs = [(u, dof) for u, dof in parts if u != 0.0]
    variance = math.fsum(u * u for u, _ in pairs)
    spread = math.fsum(u * u / variance / math.sqrt(dof) for u, dof in pairs if dof is not None and math.isfinite(dof))
    return math.sqrt(variance), (1 / spread**2 if spread > 0 else None)


def _grouped(terms: Sequence[Term]) -> list[Term]:
    groups: dict[str, list[Term]] = {}
    for number, term in enumerate(terms):
        groups.setdefault(f"#{number}" if term.group is None else term.group, []).append(term)
    return [same[0] if len(same) == 1 else together(same) for same in groups.values()]


def together(same: Sequence[Term]) -> Term:
    """Terms of one group as one, with the first one's name."""
    u: list[float | None] = []
    dof: list[float | None] = []
    for axis in range(3):
        known = [(value, term.dof_enu[axis]) for term in same if (value := term.u_enu_m[axis]) is not None]
        found = erring_together(known) if len(known) == len(same) else (None, None)
        u.append(found[0])
        dof.append(found[1])
    return replace(same[0], u_enu_m=(u[0], u[1], u[2]), dof_enu=(dof[0], dof[1], dof[2]))


def _axis(terms: Sequence[Term], axis: int) -> tuple[float | None, float | None]:
    parts: list[tuple[float, float | None]] = []
    for term in terms:
        u = term.u_enu_m[axis]
        if u is None:
            return None, None
        parts.append((u, term.dof_enu[axis]))
    return welch_satterthwaite(parts)


def propagated(jacobian: ArrayLike, covariance: ArrayLike) -> NDArray[np.float64]:
    """J C J': covariance of quantities computed from correlated inputs (GUM 5.2.2, eq. (13), and H.2.3)."""
    matrix = np.asarray(jacobian, dtype=np.float64)
    result: NDArray[np.float64] = matrix @ np.asarray(covariance, dtype=np.float64) @ matrix.T
    return result
