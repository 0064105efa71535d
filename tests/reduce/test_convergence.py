"""The running mean: ends exactly at the printed figures, each instant what a reduction of that beginning prints."""

from __future__ import annotations

import dataclasses
from decimal import Decimal
from typing import Any

import numpy as np
import pytest
from made_sessions import RTK, blocks_of, errors, estimate_of, session
from test_occupation import epochs, occupation, reduced

from fieldbook.clock import utc_ms_of
from fieldbook.model.epoch import Epoch
from fieldbook.reduce.convergence import MOST_INSTANTS, convergence
from fieldbook.reduce.estimate import Estimate
from fieldbook.reduce.fix_classes import RTK_FIXED
from fieldbook.reduce.occupation import reduce_occupation


def rows(seed: int, count: int) -> list[Epoch]:
    """The sample's epochs with correlated errors in place of their own."""
    enu = errors(RTK, seed, 1, count / 60)[0]
    made = epochs(count)
    return [
        dataclasses.replace(
            row,
            latitude_e8min=(made[0].latitude_e8min or 0) + round(north * 5.4e4),
            longitude_e8min=(made[0].longitude_e8min or 0) + round(east * 6.5e4),
            altitude_e5m=21_837_000 + round(up * 1e5),
        )
        for row, (east, north, up) in zip(made, enu.tolist(), strict=True)
    ]


@pytest.mark.parametrize("count", [20, 180, 1500])
def test_the_last_instant_is_the_printed_figure(count: int) -> None:
    result = reduce_occupation(occupation(), rows(1, count), [])
    found = result.convergence()
    lists = (found.times_s, found.east_m, found.north_m, found.up_m, found.horizontal95_m, found.vertical95_m)
    assert {len(item) for item in lists} == {len(found.times_s)}
    assert 1 <= len(found.times_s) <= MOST_INSTANTS
    assert found.times_s == sorted(set(found.times_s))
    assert found.horizontal95_m[-1] == result.reduction.uncertainty.horizontal95_m
    assert found.vertical95_m[-1] == result.reduction.uncertainty.vertical95_m
    assert (found.east_m[-1], found.north_m[-1], found.up_m[-1]) == (0.0, 0.0, 0.0)
    assert found.times_s[-1] == pytest.approx(count - 1)
    assert result.convergence() is found, "made once"


def test_an_instant_is_what_the_reduction_of_that_beginning_prints() -> None:
    """The cuts lie between 10 s blocks, so a reduction of the same epochs must print the same to 1 nm."""
    made = rows(2, 1600)
    whole = reduce_occupation(occupation(), made, [])
    found = whole.convergence()
    for place in (len(found.times_s) // 2, len(found.times_s) - 3):
        until = (made[0].instant_ms or 0) + 1000 * found.times_s[place]
        part = reduce_occupation(occupation(), [row for row in made if (row.instant_ms or 0) < until], [])
        assert found.horizontal95_m[place] == pytest.approx(part.reduction.uncertainty.horizontal95_m, abs=1e-9)
        assert found.vertical95_m[place] == pytest.approx(part.reduction.uncertainty.vertical95_m, abs=1e-9)
        moved = part.mean.east.mean_m - whole.mean.east.mean_m
        assert found.east_m[place] == pytest.approx(moved, abs=1e-9)


def test_in_the_client_frame_the_client_figures_are_shown() -> None:
    result = reduced({"requirement": {"in": "client frame"}}, rows(3, 900))
    assert result.reduction.uncertainty_client is not None
    assert result.convergence().horizontal95_m[-1] == result.reduction.uncertainty_client.horizontal95_m


def test_since_when_it_has_been_inside() -> None:
    made = rows(4, 1800)
    figures = reduce_occupation(occupation(), made, []).convergence()
    place = len(figures.times_s) // 3
    limit = max(figures.horizontal95_m[place:]) * (1 + 1e-9)
    wide = {"horizontal_95_m": str(Decimal(repr(limit))), "vertical_95_m": "1.0"}
    found = reduced({"requirement": wide}, made).convergence()
    first = next(k for k in range(len(figures.times_s)) if max(figures.horizontal95_m[k:]) <= limit)
    assert found.inside_since is not None
    start = utc_ms_of(reduced(None, made).reduction.started or "")
    assert utc_ms_of(found.inside_since) == start + round(1000 * found.times_s[first])
    assert first <= place
    never = reduced({"requirement": {"horizontal_95_m": "0.0001"}}, made).convergence()
    assert never.inside_since is None


def shown(estimates: list[Estimate], values: list[float]) -> Any:
    def figures(part: Estimate) -> tuple[float, float | None]:
        estimates.append(part)
        return values[min(len(estimates), len(values)) - 1], 0.01

    return figures


def test_a_break_begins_the_count_anew() -> None:
    """Inside at instants 2 and 3, out at 4, inside from 5 on: since 5."""
    found = session(RTK, errors(RTK, 5, 1, 4)[0])
    made = convergence(
        found, shown([], [0.05, 0.01, 0.01, 0.05, 0.01]), (0.02, 0.02), lambda ms: f"{ms:.0f}", 28_800_000
    )
    assert made.inside_since == f"{28_800_000 + 1000 * made.times_s[4]:.0f}"
    unknown = convergence(found, lambda _: (0.01, None), (0.02, 0.02), lambda ms: f"{ms:.0f}", 0)
    assert unknown.inside_since is None, "no height, no 'inside'"


def test_no_heights_and_gaps() -> None:
    enu = errors(RTK, 6, 1, 20)[0]
    flat = convergence(
        estimate_of(blocks_of(enu, heights=False), RTK_FIXED), lambda _: (0.01, None), (1, 1), lambda _: None, 0
    )
    assert set(flat.up_m) == {None}
    first, second = blocks_of(enu[:300]), blocks_of(enu[600:], start_s=60_000, initialisation=2)
    gap = convergence(estimate_of(first.joined(second), RTK_FIXED), lambda _: (0.01, 0.01), (1, 1), lambda _: None, 0)
    assert len(gap.times_s) <= 3, "nothing new happened in the gap"
    assert np.isfinite(gap.east_m).all()


def test_class_figures_of_the_receiver_are_named_in_the_budget() -> None:
    stated = {"horizontal_m": "0.006", "vertical_m": "0.012", "correlation_s": "150", "source": "own test, May 2026"}
    result = reduced({"receiver": {"class": stated}})
    lines = [line.source for line in result.reduction.uncertainty.budget if "least uncertainty" in line.source]
    assert len(lines) == 2
    assert all("RTK fixed; stated for this receiver: own test, May 2026" in line for line in lines)
    assert result.convergence().horizontal95_m[-1] == result.reduction.uncertainty.horizontal95_m
