"""Combining budget lines: unknown is not zero, groups are one quantity, correlation reaches the region."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from fieldbook.reduce.budget import Term, combine, erring_together, welch_satterthwaite
from fieldbook.reduce.region import coverage_factor_95

MEAN = Term("mean", "A", "t", (0.004, 0.005, 0.009), (6.0, 7.0, 8.0), rho_en=0.6)
FLOOR = Term("floor", "B", "normal", (0.0036, 0.0036, 0.00675), (8.0, 8.0, 8.0))
CENTRING = Term("centring", "B", "normal", (0.001, 0.001, 0.0))


def test_hand_computed_combination() -> None:
    """u = sqrt(4^2 + 3.6^2 + 1^2) mm; nu = u^4/(4^4/6 + 3.6^4/8); by hand."""
    result = combine([MEAN, FLOOR, CENTRING])
    u_east = math.sqrt(16 + 12.96 + 1) * 1e-3
    assert result.u_enu_m[0] == pytest.approx(u_east, rel=1e-12)
    dof = (16 + 12.96 + 1) ** 2 / (256 / 6 + 3.6**4 / 8)
    assert result.dof_enu[0] == pytest.approx(dof, rel=1e-12)
    assert result.k95_enu[0] == pytest.approx(coverage_factor_95(dof), rel=1e-9)
    assert result.cov_en_m2[0][1] == pytest.approx(0.6 * 0.004 * 0.005, rel=1e-12)
    assert result.rho_en == pytest.approx(result.cov_en_m2[0][1] / (result.u_enu_m[0] * result.u_enu_m[1]), rel=1e-12)
    assert result.vertical95_m == pytest.approx(result.k95_enu[2] * result.u_enu_m[2], rel=1e-12)


def test_unknown_height_term_makes_the_vertical_unknown() -> None:
    heights = Term("height readings", "B", "normal", (0.0, 0.0, None))
    result = combine([MEAN, heights])
    assert result.vertical95_m is None
    assert result.dof_enu[2] is None
    assert result.horizontal95_m > 0


def test_two_halves_of_the_floor_are_one_quantity_of_eight_dof() -> None:
    half = tuple(u / math.sqrt(2) for u in (0.0036, 0.0036, 0.00675))
    halves = [
        Term(name, "B", "normal", half, (8.0, 8.0, 8.0), common=common, group="floor")  # type: ignore[arg-type]
        for name, common in (("common half", True), ("half of this occupation", False))
    ]
    whole, split = combine([MEAN, FLOOR]), combine([MEAN, *halves])
    assert split.u_enu_m == pytest.approx(whole.u_enu_m, rel=1e-12)
    assert split.dof_enu == pytest.approx(whole.dof_enu, rel=1e-12)


def test_all_infinite_dof_and_unsorted_sizes() -> None:
    assert welch_satterthwaite([(3.0, None), (4.0, math.inf)]) == (5.0, None)
    u, dof = welch_satterthwaite([(3e-90, 5.0), (0.0, 1.0)])
    assert u == pytest.approx(3e-90)
    assert dof == pytest.approx(5.0)


def test_printed_dof_is_the_smallest_of_the_axes_it_touches() -> None:
    assert MEAN.line().dof == 6.0
    assert CENTRING.line().dof is None
    assert Term("x", "B", "normal", (0.0, 0.0, 0.001), (2.0, 2.0, 9.0)).line().dof == 9.0


def test_a_budget_without_terms_or_without_east_is_refused() -> None:
    with pytest.raises(ValueError, match="east and north"):
        combine([])
    with pytest.raises(ValueError, match="east and north"):
        combine([Term("x", "B", "normal", (None, 0.1, 0.1))])


def test_variances_that_err_together_do_not_add_degrees_of_freedom() -> None:
    """Drawn: two equal parts whose variances are ONE scaled chi-squared of 5 dof; the sum's variance has 5, not 10.

    From the moments of the estimated variance: nu = 2 mean^2/variance (GUM G.4.1, the relation behind eq. G.2b).
    """
    rng = np.random.default_rng(1)
    shared = rng.chisquare(5, 400_000) / 5
    other = rng.chisquare(12, 400_000) / 12
    together_s2, apart_s2 = 9 * shared + 4 * shared, 9 * shared + 4 * other
    for s2, (u, dof) in (
        (together_s2, erring_together([(3.0, 5.0), (2.0, 5.0)])),
        (apart_s2, welch_satterthwaite([(3.0, 5.0), (2.0, 12.0)])),
    ):
        assert u == pytest.approx(math.sqrt(13))
        assert dof == pytest.approx(2 * s2.mean() ** 2 / s2.var(), rel=0.02)
    assert erring_together([(1.0, None), (1.0, None)])[1] is None
    assert erring_together([(0.0, 3.0), (2.0, 7.0)]) == (2.0, pytest.approx(7.0))


def test_terms_of_one_group_count_as_one_quantity() -> None:
    part = Term("mean", "A", "t", (0.003, 0.003, 0.006), (6.0, 6.0, 6.0), group="mean")
    single = combine([part, part])
    assert single.u_enu_m[2] == pytest.approx(0.006 * math.sqrt(2))
    assert single.dof_enu[2] == pytest.approx(6.0)
    assert combine([replace(part, group=None), replace(part, group=None)]).dof_enu[2] == pytest.approx(12.0)
    unknown = combine([part, replace(part, u_enu_m=(0.003, 0.003, None))])
    assert unknown.u_enu_m[2] is None
