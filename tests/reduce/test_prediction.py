"""Time still needed: consistent with the figures that are printed, and right on what it promises."""

from __future__ import annotations

import math
from collections.abc import Callable
from itertools import pairwise

import numpy as np
import pytest
from made_epochs import gauss_markov

from fieldbook.reduce.budget import Term, combine
from fieldbook.reduce.correlated_mean import Bins, CorrelatedMean, correlated_mean
from fieldbook.reduce.fix_classes import FLOOR_DOF, RTK_FIXED
from fieldbook.reduce.prediction import LONGEST_S, TypeA, predicted_type_a, time_to_go, type_a

FLOOR = Term("floor", "B", "normal", RTK_FIXED.floor_enu_m, (FLOOR_DOF,) * 3)


def printed(axis: str) -> Callable[[TypeA], float | None]:
    def figure(part: TypeA) -> float | None:
        mean = Term("mean", "A", "t", part.u_enu_m, part.dof_enu, rho_en=part.rho_en)
        result = combine([mean, FLOOR])
        return result.horizontal95_m if axis == "horizontal" else result.vertical95_m

    return figure


def session(minutes: int, seed: int = 1, up: bool = True) -> CorrelatedMean:
    rng = np.random.default_rng(seed)
    n = 60 * minutes
    length = 1
    while n / length > 32:
        length *= 2
    count = n // length
    bins = [
        Bins(float(length), np.arange(count), np.full(count, length),
             gauss_markov(rng, n, 1.0, 200.0, s)[: count * length].reshape(count, length).mean(axis=1))
        for s in (0.008, 0.008, 0.015)
    ]  # fmt: skip
    return correlated_mean(bins[0], bins[1], bins[2] if up else None, RTK_FIXED)


def test_prediction_starts_from_the_present_and_falls() -> None:
    mean = session(10)
    now = type_a(mean)
    assert now.u_enu_m == (mean.east.u_m, mean.north.u_m, mean.up.u_m)  # type: ignore[union-attr]
    assert predicted_type_a(mean, mean.observed_s * (1 + 1e-9)).u_enu_m[0] == pytest.approx(mean.east.u_m, rel=1e-6)
    times = np.geomspace(mean.observed_s, LONGEST_S, 40)
    series = [predicted_type_a(mean, float(t)) for t in times]
    for axis in range(3):
        u = [item.u_enu_m[axis] for item in series]
        dof = [item.dof_enu[axis] for item in series]
        assert all(b <= a for a, b in pairwise(u))  # type: ignore[operator]
        assert all(b >= a for a, b in pairwise(dof))  # type: ignore[operator]


def test_long_times_follow_the_asymptote() -> None:
    """u_A^2 -> 2 tau_eff s^2/T with tau_eff = (0.9 + 0.8) tau = 1.7 tau: ratio over a doubling of long T is 2."""
    mean = session(60)
    u = [predicted_type_a(mean, t).u_enu_m[0] for t in (4e6, 8e6)]
    assert (u[0] / u[1]) ** 2 == pytest.approx(2, rel=0.02)


def test_zero_exactly_when_the_figure_meets_the_requirement() -> None:
    mean = session(10)
    for axis in ("horizontal", "vertical"):
        have = printed(axis)(type_a(mean))
        assert have is not None
        reached = time_to_go(mean, have, printed(axis), 1.05)
        assert (reached.state, reached.seconds) == ("reached", 0.0)
        short = time_to_go(mean, have * (1 - 1e-6), printed(axis), 1.05)
        assert short.state == "predicted"
        assert short.seconds is not None
        assert short.seconds > 0


@pytest.mark.parametrize("axis", ["horizontal", "vertical"])
def test_the_predicted_figure_at_the_answer_is_the_requirement_over_the_margin(axis: str) -> None:
    mean, wanted = session(5), {"horizontal": 0.017, "vertical": 0.024}[axis]
    answer = time_to_go(mean, wanted, printed(axis), 1.05)
    assert answer.state == "predicted"
    assert answer.seconds is not None
    assert answer.from_s is not None
    assert answer.from_s < answer.seconds == answer.to_s
    at = printed(axis)(predicted_type_a(mean, mean.observed_s + answer.seconds))
    assert at == pytest.approx(wanted / 1.05, rel=1e-3)
    bare = printed(axis)(predicted_type_a(mean, mean.observed_s + answer.from_s))
    assert bare == pytest.approx(wanted, rel=1e-3)


def test_below_the_limit_of_the_class_it_cannot_be_reached() -> None:
    """Limit of one RTK occupation, however long: circle 3.29 u_B = 11.8 mm, vertical 2.31 u_B = 15.6 mm."""
    mean = session(10)
    never = TypeA((1e-9, 1e-9, 1e-9), (100.0, 100.0, 100.0), 0.0)
    horizontal, vertical = printed("horizontal")(never), printed("vertical")(never)
    assert horizontal == pytest.approx(0.0118, abs=5e-5)
    assert vertical == pytest.approx(0.0156, abs=5e-5)
    assert time_to_go(mean, 0.0115, printed("horizontal"), 1.05).state == "cannot reach"
    answer = time_to_go(mean, 0.0115, printed("horizontal"), 1.05)
    assert answer.seconds is None
    assert answer.longest_m is not None
    assert answer.longest_m > 0.0115
    assert time_to_go(session(10, up=False), 1.0, printed("vertical"), 1.05).state == "cannot reach"


def test_reachable_but_not_with_the_margin() -> None:
    mean = session(10)
    longest = printed("horizontal")(predicted_type_a(mean, LONGEST_S))
    assert longest is not None
    answer = time_to_go(mean, longest * 1.02, printed("horizontal"), 1.05)
    assert answer.state == "not safely reachable"
    assert answer.seconds is None
    assert answer.from_s is not None
    assert math.isfinite(answer.from_s)


@pytest.mark.slow
def test_the_promised_figure_is_met_when_the_session_is_extended() -> None:
    """Goal of the design: the requirement met in 70 to 95 % of extended sessions; 60 of them, so 55 to 100 % here."""
    met = asked = 0
    for seed in range(60):
        mean = session(8, seed)
        answer = time_to_go(mean, 0.0165, printed("horizontal"), 1.05)
        if answer.state != "predicted" or answer.seconds is None or answer.seconds > 6 * 3600:
            continue
        asked += 1
        later = session(8 + math.ceil(answer.seconds / 60), seed)
        figure = printed("horizontal")(type_a(later))
        met += figure is not None and figure <= 0.0165
    assert asked >= 40
    assert 0.55 <= met / asked <= 1.0
