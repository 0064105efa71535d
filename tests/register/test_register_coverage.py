"""Do the stated 95 % hold? Simulated truth: common errors drawn as common, own ones as own, two accuracies judged apart.

The lines are those of a real sample occupation; occupations of several parties share station, antenna, receiver or nothing. A mean's
own u is drawn as its degrees of freedom have it (chi-squared), the rest is normal with the size that is stated. What is not
simulated: that a stated size itself is wrong (the floor's, an operation's), and correlation of a session with the next.
"""

from __future__ import annotations

import math
from collections import defaultdict
from dataclasses import replace

import numpy as np
import pytest

from fieldbook.reduce.budget import combine
from fieldbook.reduce.combine import Input, combine_occupations, linear_form
from fieldbook.register.evidence import Evidence
from fieldbook.register.fold import Held
from fieldbook.register.members import Member, inputs_of

from .made import occupied

HELD = Held("b", 1, 1, "M", "", "", False, None, None, None, None, None, 0.0, None, (0.0, None), (), None)
PARTIES = (
    {"station": "0042", "antenna_serial": "0001", "receiver": "A"},
    {"station": "0042", "antenna_serial": "0002", "receiver": "B"},
    {"station": "0055", "antenna_serial": "0038", "receiver": "C"},
    {"station": None, "antenna_serial": None, "receiver": None},
)
CASES = ((0, 0), (0, 1), (0, 2), (0, 0, 2), (0, 1, 2, 2), (0, 3))
ROUNDS = 300


def members_of(base: Evidence, parties: tuple[int, ...]) -> list[Member]:
    items = [occupied(base, hours=30.0 * n, **PARTIES[party]) for n, party in enumerate(parties)]
    return [Member(HELD, item, item.place, item.budget) for item in items]


class Errors:
    """One draw of the world: an error per scope, nested by size, and per occupation what is its own."""

    def __init__(self, rng: np.random.Generator) -> None:
        self._rng = rng
        self._steps: dict[tuple[str, int], list[tuple[float, float]]] = defaultdict(list)

    def shared(self, scope: str, axis: int, u: float) -> float:
        """The error of size u: that of the next smaller size drawn so far, and what lies beyond it."""
        known = self._steps[scope, axis]
        for size, error in known:
            if size == u:
                return error
        assert all(size <= u for size, _ in known), "sizes come in order here"
        size, error = known[-1] if known else (0.0, 0.0)
        drawn = error + self._rng.normal(0.0, math.sqrt(u * u - size * size))
        known.append((u, drawn))
        return drawn

    def of(self, item: Input) -> tuple[Input, np.ndarray]:
        """An input as it would be observed, with the u that its scatter would give."""
        error, u_mean = np.zeros(3), []
        for axis in range(3):
            dof, u = item.mean.dof_enu[axis], float(item.mean.u_enu_m[axis])
            seen = u * math.sqrt(self._rng.chisquare(dof) / dof) if dof and math.isfinite(dof) else u
            u_mean.append(seen)
            error[axis] = self._rng.normal(0.0, u)
            error[axis] += sum(self._rng.normal(0.0, float(term.u_enu_m[axis] or 0.0)) for term in item.own)
            error[axis] += sum(
                self.shared(one.scope, axis, float(one.term.u_enu_m[axis] or 0.0)) for one in item.shared
            )
        mean = replace(item.mean, u_enu_m=tuple(u_mean), rho_en=0.0)
        return replace(item, enu_m=tuple(error), mean=mean), error


@pytest.mark.slow
@pytest.mark.parametrize("parties", CASES)
def test_relative_to_the_datum(base: Evidence, parties: tuple[int, ...]) -> None:
    rng = np.random.default_rng(len(parties) * 1000 + sum(parties))
    inputs = inputs_of(members_of(base, parties))
    plan = up = 0
    for _ in range(ROUNDS):
        errors = Errors(rng)
        form = combine_occupations([errors.of(item)[0] for item in inputs]).form
        plan += form.plan_m <= form.combined.horizontal95_m
        up += abs(form.enu_m[2]) <= form.combined.vertical95_m
    least = 0.95 - 2 * math.sqrt(0.95 * 0.05 / ROUNDS)
    assert plan / ROUNDS >= least
    assert up / ROUNDS >= least


@pytest.mark.slow
@pytest.mark.parametrize("pair", [((0, 0), (0, 0)), ((0, 1), (0, 2)), ((0,), (2,)), ((3,), (3,))])
def test_between_marks(base: Evidence, pair: tuple[tuple[int, ...], tuple[int, ...]]) -> None:
    """Of the difference, where what both share has dropped out; what was not stated is drawn as each mark's own."""
    rng = np.random.default_rng(99)
    first, second = (members_of(base, parties) for parties in pair)
    inputs = [*inputs_of(first, mark=1), *inputs_of(second, mark=2, first_number=len(first) + 1)]
    weights = [combine_occupations(inputs_of(part)).weights for part in (first, second)]
    coefficients = np.vstack([-weights[0], weights[1]])
    plan = up = 0
    for _ in range(ROUNDS):
        errors = Errors(rng)
        form = linear_form([errors.of(item)[0] for item in inputs], coefficients)
        found = combine(form.terms)
        plan += form.plan_m <= found.horizontal95_m
        up += abs(form.enu_m[2]) <= found.vertical95_m
    least = 0.95 - 2 * math.sqrt(0.95 * 0.05 / ROUNDS)
    assert plan / ROUNDS >= least
    assert up / ROUNDS >= least


def test_averaging_what_is_common_away_would_fail(base: Evidence) -> None:
    """The same draws held against figures that take every line as the occupation's own: the test above can tell."""
    rng = np.random.default_rng(5)
    inputs = inputs_of(members_of(base, (0, 0, 0, 0)))
    inside = 0
    for _ in range(100):
        errors = Errors(rng)
        drawn = [errors.of(item)[0] for item in inputs]
        form = combine_occupations(drawn).form
        apart = [replace(item, own=(*item.own, *(one.term for one in item.shared)), shared=()) for item in drawn]
        naive = combine_occupations(apart).form.combined
        inside += form.plan_m <= naive.horizontal95_m
    assert inside < 85
