"""Several occupations to one: against least squares written out here, published examples, and simulated truth.

The least-squares reference of this file stacks all coordinates of all occupations into one vector and uses the full
3n x 3n block covariance: it shares no line with `fieldbook.reduce.combine`, which works axis by axis and term by term.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import stats

from fieldbook.model.reduction import BudgetLine
from fieldbook.model.session import Antenna, Corrections, Receiver
from fieldbook.reduce.budget import Term, combine, propagated
from fieldbook.reduce.combine import (
    Input,
    Shared,
    against_the_others,
    class_mean_u_m,
    combine_occupations,
    difference,
    gls_weights,
    height_significance,
    linear_form,
    plan_significance,
    printed_lines,
)
from fieldbook.reduce.fix_classes import AUTONOMOUS, FLOOR_DOF, RTK_FIXED
from fieldbook.reduce.shared import equipment_of, split_terms

FLOOR = RTK_FIXED.floor_enu_m


def made(
    number: int,
    enu: tuple[float, float, float | None],
    *,
    kept_s: float = 900.0,
    u_mean: tuple[float, float, float] = (0.005, 0.006, 0.010),
    rho: float = 0.3,
    station: str = "S",
    antenna: str = "A",
    fix_class=RTK_FIXED,
    reading: float = 0.001,
    separation: float = 0.0003,
) -> Input:
    """An occupation with the lines a real one has; floor 0.45 class sigma, a quarter of its variance per half scope."""
    floor = fix_class.floor_enu_m
    up_known = enu[2] is not None
    own = tuple(value / math.sqrt(2) for value in floor)
    quarter = tuple(value / 2 for value in floor)
    dof = (FLOOR_DOF,) * 3

    def triple(values):
        return (values[0], values[1], values[2] if up_known else None)

    return Input(
        number,
        enu,
        Term("mean of the kept epochs", "A", "t", triple(u_mean), (5.0, 6.0, 7.0), rho_en=rho),
        (
            Term("floor own", "B", "normal", triple(own), dof, group="floor"),
            Term("readings", "B", "normal", (0.0, 0.0, reading if up_known else None)),
            Term("centring", "B", "normal", (0.001, 0.001, 0.0)),
        ),
        (
            Shared(Term("floor", "B", "normal", triple(quarter), dof, common=True, group="floor"), f"station {station}"),
            Shared(Term("floor", "B", "normal", triple(quarter), dof, common=True, group="floor"), f"antenna {antenna}"),
            Shared(Term("separation", "B", "rectangular", (0.0, 0.0, separation if up_known else None), common=True), "sep"),
            Shared(Term("phase centre", "B", "normal", (0.002, 0.002, 0.005), common=True), f"pc {antenna}"),
        ),
        class_mean_u_m(fix_class, kept_s),
    )  # fmt: skip


def stacked(inputs: list[Input], *, prior: bool) -> np.ndarray:
    """Full covariance of (e1, n1, u1, e2, ...), written term by term: the reference's own book-keeping."""
    n = len(inputs)
    full = np.zeros((3 * n, 3 * n))
    for i, item in enumerate(inputs):
        if prior:
            block = np.diag(np.square(item.prior_u_enu_m))
        else:
            e, m, u = item.mean.u_enu_m
            block = np.array([[e**2, item.mean.rho_en * e * m, 0], [item.mean.rho_en * e * m, m**2, 0], [0, 0, u**2]])
        for term in item.own:
            block = block + np.diag(np.square(term.u_enu_m))
        full[3 * i : 3 * i + 3, 3 * i : 3 * i + 3] = block
    for i, one in enumerate(inputs):
        for j, two in enumerate(inputs):
            for a in one.shared:
                for b in two.shared:
                    if a.scope == b.scope:
                        same = np.minimum(a.term.u_enu_m, b.term.u_enu_m) ** 2
                        full[3 * i : 3 * i + 3, 3 * j : 3 * j + 3] += np.diag(same)
    return full


def least_squares(inputs: list[Input], weight_matrix: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """(x, H): x = (A' W^-1 A)^-1 A' W^-1 y, A = stacked unit matrices, y in metres."""
    design = np.vstack([np.eye(3)] * len(inputs))
    y = np.concatenate([item.enu_m for item in inputs])
    inverse = np.linalg.inv(weight_matrix)
    gain = np.linalg.inv(design.T @ inverse @ design) @ design.T @ inverse
    return gain @ y, gain


SETS = {
    "two alike": [made(1, (0.010, -0.004, 0.020)), made(2, (-0.002, 0.008, -0.015))],
    "short and long": [made(1, (0.01, 0, 0.02), kept_s=120), made(2, (0, 0.01, -0.01), kept_s=7200, u_mean=(0.002, 0.002, 0.004), rho=-0.6)],
    "two stations, one antenna": [
        made(1, (0.01, 0.0, 0.02)),
        made(2, (0.0, 0.01, -0.01), station="T"),
        made(3, (0.004, -0.003, 0.006), station="T", antenna="B", kept_s=3600),
    ],
    "autonomous beside RTK": [
        made(1, (0.01, 0.0, 0.02)),
        made(2, (0.0, 0.01, -0.01)),
        made(3, (1.4, -0.8, 3.0), fix_class=AUTONOMOUS, u_mean=(1.1, 1.2, 2.0), station="none"),
    ],
    "coarse separation in one": [made(1, (0.01, 0.0, 0.02), separation=0.029), made(2, (0.0, 0.01, -0.01))],
}  # fmt: skip


@pytest.mark.parametrize("name", list(SETS))
def test_equals_least_squares_with_the_full_block_covariance(name: str) -> None:
    """Position to 1e-9 m; covariance, residuals and their covariance to 1e-12 m2 (both sides are double precision)."""
    inputs = SETS[name]
    found = combine_occupations(inputs)
    x, gain = least_squares(inputs, stacked(inputs, prior=True))
    assert np.allclose(found.form.enu_m, x, rtol=0, atol=1e-9)
    stated = stacked(inputs, prior=False)
    covariance = gain @ stated @ gain.T
    assert np.allclose(found.form.combined.cov_en_m2, covariance[:2, :2], rtol=0, atol=1e-12)
    assert found.form.combined.u_enu_m[2] == pytest.approx(math.sqrt(covariance[2, 2]), abs=1e-9)
    y = np.concatenate([item.enu_m for item in inputs])
    for number, residual in enumerate(found.residuals):
        row = np.zeros((3, 3 * len(inputs)))
        row[:, 3 * number : 3 * number + 3] = np.eye(3)
        row -= gain
        assert np.allclose(residual.form.enu_m, row @ y, rtol=0, atol=1e-9)
        expected = row @ stated @ row.T
        assert np.allclose(residual.form.combined.cov_en_m2, expected[:2, :2], rtol=0, atol=1e-12)
        assert residual.form.combined.u_enu_m[2] == pytest.approx(math.sqrt(expected[2, 2]), abs=1e-9)
    apart = difference(inputs, 0, 1)
    row = np.hstack([-np.eye(3), np.eye(3), *[np.zeros((3, 3))] * (len(inputs) - 2)])
    assert np.allclose(apart.enu_m, row @ y, rtol=0, atol=1e-12)
    assert np.allclose(apart.combined.cov_en_m2, (row @ stated @ row.T)[:2, :2], rtol=0, atol=1e-12)


def test_weights_are_positive_and_sum_to_one() -> None:
    for inputs in SETS.values():
        weights = combine_occupations(inputs).weights
        assert (weights > 0).all()
        assert np.allclose(weights.sum(axis=0), 1.0, rtol=0, atol=1e-12)


def test_an_autonomous_occupation_weighs_next_to_nothing() -> None:
    found = combine_occupations(SETS["autonomous beside RTK"])
    assert (found.weights[2] < 1e-4).all()


def test_own_scatter_does_not_move_the_weights() -> None:
    quiet, loud = [made(1, (0.01, 0, 0)), made(2, (0, 0, 0), u_mean=(0.001, 0.001, 0.001))], SETS["two alike"]
    assert np.array_equal(combine_occupations(quiet).weights, combine_occupations(loud).weights)


def test_one_occupation_stays_as_it_is() -> None:
    """Weights 1, and the budget of the occupation alone, where the halves of the floor stand in one line (8 dof)."""
    item = made(1, (0.01, -0.02, 0.03))
    found = combine_occupations([item])
    alone = combine([item.mean, *item.own[1:], Term("floor", "B", "normal", FLOOR, (FLOOR_DOF,) * 3),
                     *[shared.term for shared in item.shared[2:]]])  # fmt: skip
    assert found.form.enu_m == item.enu_m
    assert found.form.combined.u_enu_m == pytest.approx(alone.u_enu_m, rel=1e-12)
    assert found.form.combined.dof_enu == pytest.approx(alone.dof_enu, rel=1e-9)
    assert found.form.combined.horizontal95_m == pytest.approx(alone.horizontal95_m, rel=1e-9)
    assert found.residuals[0].plan_significance == 1.0


def test_common_lines_never_average_away() -> None:
    """A hundred occupations of the same equipment: what is left is the common half of the floor and the antenna."""
    many = [made(number, (0.0, 0.0, 0.0), kept_s=36_000, u_mean=(1e-4, 1e-4, 1e-4)) for number in range(100)]
    u = combine_occupations(many).form.combined.u_enu_m
    assert u[0] == pytest.approx(math.sqrt(FLOOR[0] ** 2 / 2 + 0.002**2), rel=0.02)
    assert u[2] == pytest.approx(math.sqrt(FLOOR[2] ** 2 / 2 + 0.005**2), rel=0.02)
    other = [made(n, (0.0, 0.0, 0.0), station=str(n), antenna=str(n), u_mean=(1e-4, 1e-4, 1e-4)) for n in range(100)]
    assert (combine_occupations(other).form.combined.u_enu_m[0] or 1.0) < 0.1 * FLOOR[0] + 0.0005


def test_an_occupation_without_height_counts_in_plan_only() -> None:
    inputs = [made(1, (0.01, 0.0, 0.02)), made(2, (0.0, 0.0, None))]
    found = combine_occupations(inputs)
    assert found.weights[1, 2] == 0.0
    assert found.weights[0, 2] == 1.0
    assert found.form.enu_m[2] == 0.02
    assert found.form.combined.u_enu_m[2] == pytest.approx(combine_occupations(inputs[:1]).form.combined.u_enu_m[2])
    assert difference(inputs, 0, 1).enu_m[2] is None
    assert found.residuals[1].height_significance is None
    none = combine_occupations([inputs[1]])
    assert none.form.enu_m[2] is None
    assert none.form.combined.vertical95_m is None


def test_peelles_puzzle() -> None:
    """1.5 and 1.0, 10 % independent and 20 % common: least squares gives 0.88 +- 0.22, below both values.

    R. W. Peelle, Oak Ridge memorandum of 1987; the example as discussed in T. Burr and others, Algorithms 4 (2011) 28-39,
    doi 10.3390/a4010028 (figures from memory, high; recomputed). `gls_weights` must reproduce it, and the combination
    must not walk into it: with the smaller of both errors as the common one the mean stays between the values.
    """
    full = np.array([[0.15**2 + 0.3**2, 0.3 * 0.2], [0.3 * 0.2, 0.1**2 + 0.2**2]])
    weights = gls_weights(full)
    assert weights @ [1.5, 1.0] == pytest.approx(0.88, abs=0.005)
    assert math.sqrt(weights @ full @ weights) == pytest.approx(0.22, abs=0.005)
    pair = [
        Input(n, (x, x, x), Term("m", "A", "t", (own, own, own)), (),
              (Shared(Term("c", "B", "normal", (common, common, common), common=True), "c"),), (own, own, own))
        for n, (x, own, common) in enumerate([(1.5, 0.15, 0.3), (1.0, 0.10, 0.2)])
    ]  # fmt: skip
    assert 1.0 < (combine_occupations(pair).form.enu_m[0] or 0.0) < 1.5


def test_gum_h2_covariance_of_correlated_inputs_is_kept() -> None:
    """JCGM 100:2008, 5.2.2 eq. (13) and H.2: C_y = J C_x J'. Without the correlation the figures are wrong.

    The difference of two occupations of unlike correlation, as a matrix product of the budget's `propagated`.
    """
    one, two = made(1, (0.0, 0.0, 0.0), rho=0.8), made(2, (0.0, 0.0, 0.0), rho=-0.5, u_mean=(0.003, 0.007, 0.01))
    lone = [made_without_shared(item) for item in (one, two)]
    blocks = np.zeros((4, 4))
    for k, item in enumerate(lone):
        e, n, _ = item.mean.u_enu_m
        blocks[2 * k : 2 * k + 2, 2 * k : 2 * k + 2] = [
            [e * e, item.mean.rho_en * e * n],
            [item.mean.rho_en * e * n, n * n],
        ]
    jacobian = np.array([[-1.0, 0.0, 1.0, 0.0], [0.0, -1.0, 0.0, 1.0]])
    expected = propagated(jacobian, blocks)
    found = difference(lone, 0, 1).combined.cov_en_m2
    assert np.allclose(found, expected, rtol=1e-12, atol=0)
    assert abs(expected[0, 1]) > 0.1 * expected[0, 0]


def made_without_shared(item: Input) -> Input:
    return Input(item.occupation, item.enu_m, item.mean, (), (), item.prior_u_enu_m)


def test_degrees_of_freedom_by_welch_and_satterthwaite() -> None:
    """GUM G.2b written out for the height of two alike occupations; all of the floor is one quantity of 8 dof."""
    inputs = SETS["two alike"]
    found = combine_occupations(inputs).form.combined
    mean = 2 * (0.5 * 0.010) ** 4 / 7.0
    floor = FLOOR[2] ** 2 * (0.5 / 2 + 0.5)  # own halves average, the common half stays
    rest = 0.5 * 0.001**2 + 0.0003**2 + 0.005**2
    total = 0.5 * 0.010**2 + floor + rest
    assert found.u_enu_m[2] == pytest.approx(math.sqrt(total), rel=1e-12)
    assert found.dof_enu[2] == pytest.approx(total**2 / (mean + floor**2 / FLOOR_DOF), rel=1e-9)


def test_significances_are_t_and_f_probabilities() -> None:
    """scipy.stats as the table: two-sided t, and F(2, nu - 1) of the scaled quadratic form."""
    apart = difference(SETS["two alike"], 0, 1)
    combined = apart.combined
    nu = combined.region.dof
    assert nu is not None
    assert combined.u_enu_m[2] is not None
    assert height_significance(apart) == pytest.approx(
        2 * stats.t.sf(abs(apart.enu_m[2] or 0.0) / combined.u_enu_m[2], combined.dof_enu[2]), rel=1e-9
    )
    d = np.array(apart.enu_m[:2], dtype=float)
    squared = d @ np.linalg.inv(np.array(combined.cov_en_m2) * nu / (nu - 1)) @ d
    assert plan_significance(apart) == pytest.approx(stats.f.sf(squared / 2, 2, nu - 1), rel=1e-9)


def test_against_the_others_leaves_the_one_out() -> None:
    inputs = SETS["two stations, one antenna"]
    form = against_the_others(inputs, 1)
    rest = combine_occupations([inputs[0], inputs[2]])
    assert form.enu_m[0] == pytest.approx((inputs[1].enu_m[0] or 0.0) - (rest.form.enu_m[0] or 0.0), abs=1e-12)
    assert (form.combined.u_enu_m[0] or 0.0) > 0.005


def test_printed_lines_add_up_and_keep_their_names() -> None:
    found = combine_occupations(SETS["two alike"])
    lines = printed_lines(found.form.terms)
    assert len({(line.source, line.common) for line in lines}) == len(lines)
    total = math.sqrt(sum((line.u_enu_m[2] or 0.0) ** 2 for line in lines))
    assert total == pytest.approx(found.form.combined.u_enu_m[2], rel=1e-12)
    mean = next(line for line in lines if line.source == "mean of the kept epochs")
    assert mean.u_enu_m[2] == pytest.approx(0.010 / math.sqrt(2), rel=1e-12)
    assert mean.dof == pytest.approx(10.0, rel=1e-9)  # two of 5 in east, equal weights


def test_what_cannot_be_combined_is_refused() -> None:
    with pytest.raises(ValueError, match="no occupation"):
        combine_occupations([])
    with pytest.raises(ValueError, match="positive definite"):
        gls_weights([[1.0, 2.0], [2.0, 1.0]])
    tilted = Shared(Term("s", "B", "normal", (1.0, 1.0, 1.0), rho_en=0.5), "s")
    item = Input(1, (0.0, 0.0, 0.0), Term("m", "A", "t", (1.0, 1.0, 1.0)), (), (tilted,), (1.0, 1.0, 1.0))
    with pytest.raises(ValueError, match="correlated"):
        linear_form([item], np.ones((1, 3)))


def equipment(*stated: tuple[str, str | None, str | None, str | None]):
    return equipment_of(
        [
            (Corrections(kind, station=station), Antenna("DEMO-A1", serial=serial), Receiver("x", serial=receiver))
            for kind, station, serial, receiver in stated
        ]
    )


def test_what_is_not_stated_cannot_be_shown_to_differ() -> None:
    one, two, three = equipment(
        ("own base on known mark", "0042", "1", "R1"),
        ("own base on known mark", None, "2", "R2"),
        ("own base on known mark", "0043", None, None),
    )
    assert one.station == two.station == three.station
    assert one.antenna == two.antenna == three.antenna
    assert one.receiver == two.receiver == three.receiver
    known = equipment(("network", "A", "1", "R1"), ("network", "B", "2", "R2"), ("none", None, "1", "R1"))
    assert len({item.station for item in known}) == 3
    assert known[0].antenna == known[2].antenna != known[1].antenna
    assert known[0].antenna_type == known[1].antenna_type
    assert known[0].receiver == known[2].receiver != known[1].receiver


def test_budget_lines_are_told_apart() -> None:
    (where,) = equipment(("own base on known mark", "0042", "1", "R1"))
    mean = Term("mean of the kept epochs", "A", "t", (0.005, 0.005, 0.01), (5.0, 5.0, 5.0))
    lines = [
        BudgetLine("mean of the kept epochs", "A", "t", [0.005, 0.005, 0.01], 5.0, False),
        BudgetLine("least uncertainty claimed (x): of this occupation", "B", "normal", [0.004, 0.004, 0.008], 8.0, False),
        BudgetLine("least uncertainty claimed (x): of station and antenna", "B", "normal", [0.004, 0.004, 0.008], 8.0, True),
        BudgetLine("a line nobody has met yet", "B", "normal", [0.001, 0.001, 0.0], None, True),
    ]  # fmt: skip
    found, own, shared = split_terms(lines, mean, where)
    assert found is mean
    assert [term.group for term in own] == ["floor"]
    assert [item.scope for item in shared] == [
        "floor of station 0042",
        "floor of antenna DEMO-A1 1",
        "mark: a line nobody has met yet",
    ]
    assert math.hypot(*[item.term.u_enu_m[0] or 0.0 for item in shared[:2]]) == pytest.approx(0.004)
    with pytest.raises(ValueError, match="no line"):
        split_terms(lines[1:], mean, where)
