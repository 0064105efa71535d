"""The calibration benchmark's own ground: are its errors what it says they are, and is its best mean the best?

Checked by direct sums and by drawing; all formulas from textbooks (second differences, generalised least squares),
common practice, no source. If these fail, nothing the benchmark prints means anything.
"""

from __future__ import annotations

import sys
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

sys.path.append(str(Path(__file__).parents[1] / "benchmarks"))  # at the end: coverage.py there hides nothing

import coverage_references as references
from coverage_regimes import REGIMES, RTK
from coverage_simulator import Part, Place, epochs_of, simulate

PARTS = [
    Part("white", 1.0),
    Part("gm", 1.0, 20.0),
    Part("sine", 1.0, 50.0),
    Part("flicker", 1.0),
    Part("fgn", 1.0, 0.92),
]


@pytest.mark.parametrize("part", PARTS, ids=lambda part: part.kind)
def test_series_have_the_covariance_that_is_written_down(part: Part) -> None:
    """8000 series of 40: an element of the sample covariance has a standard deviation of at most 1.6 %, 5 of them."""
    rng = np.random.default_rng(5)
    drawn = np.array([part.draw(rng, 40, 1.0) for _ in range(8000)])
    lag = np.abs(np.arange(40)[:, None] - np.arange(40)[None, :])
    assert np.abs(drawn.T @ drawn / 8000 - part.autocovariance(40, 1.0)[lag]).max() < 0.08


def test_covariance_of_run_means_equals_the_direct_double_sum() -> None:
    made = simulate(REGIMES["rtk_outliers"], 400, np.random.default_rng(2))
    runs = references._runs(made, np.flatnonzero(made.clean))
    lag = np.abs(made.index[:, None] - made.index[None, :])
    r = made.covariance(1, 402)
    share = np.zeros((len(runs), len(made.index)))
    for row, (first, last) in enumerate(runs):
        share[row, first:last] = 1 / (last - first)
    assert np.abs(share @ r[lag] @ share.T - references._run_covariance(made, runs, r)).max() < 1e-13
    assert sum(last - first for first, last in runs) == made.clean.sum()


def test_known_covariance_mean_is_generalised_least_squares_of_every_epoch() -> None:
    """Runs of 3 epochs against all 400 one by one: the standard deviation is at most 1 % larger, never smaller."""
    made = simulate(RTK, 400, np.random.default_rng(3))
    _, sd, _ = references.known_covariance(made)
    lag = np.abs(made.index[:, None] - made.index[None, :])
    for axis in range(3):
        exact = 1 / np.sqrt(np.linalg.solve(made.covariance(axis, 400)[lag], np.ones(400)).sum())
        assert exact <= sd[axis] * (1 + 1e-12)
        assert sd[axis] <= 1.01 * exact


def test_its_errors_are_as_large_as_it_says() -> None:
    """2000 sessions: the mean square in its own standard deviations is 1 within 5 of its own sd of sqrt(2/6000)."""
    squares = []
    for seed in range(2000):
        made = simulate(replace(RTK, initialisations=2, bias_m=(0.005, 0.01)), 60, np.random.default_rng(seed))
        error, sd, _ = references.known_covariance(made)
        squares.append((error / sd) ** 2)
    assert np.mean(squares) == pytest.approx(1.0, abs=5 * np.sqrt(2 / 6000))


def test_the_ratio_of_one_process_is_its_length_over_its_correlation_time() -> None:
    regime = replace(RTK, horizontal=(Part("gm", 0.008, 200.0),))
    made = simulate(regime, 2000, np.random.default_rng(4))
    _, _, ratio = references.known_covariance(made)
    assert ratio == pytest.approx(2000 / made.horizontal[0].time_s, rel=0.01)


def test_rounding_loses_the_truth_by_no_more_than_half_a_step() -> None:
    regime = replace(RTK, horizontal=(Part("white", 0.0),), vertical=(Part("white", 0.0),), separation_decimals=1)
    for seed in range(200):
        rng = np.random.default_rng(seed)
        made = simulate(regime, 2, rng, Place.drawn(rng))
        epoch = epochs_of(made)[0]
        assert epoch.latitude_e8min is not None
        assert epoch.longitude_e8min is not None
        assert epoch.height_e5m is not None
        gap = made.place.gap_m(
            epoch.latitude_e8min / 60e8, epoch.longitude_e8min / 60e8, epoch.height_e5m * 1e-5
        )  # fmt: skip
        assert abs(gap[0]) <= 0.5 * 1862e-7
        assert abs(gap[1]) <= 0.5 * 1862e-7
        assert abs(gap[2]) <= 0.0505 + 1e-9
