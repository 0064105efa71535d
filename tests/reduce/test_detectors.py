"""Detectors: how often each speaks on sound sessions, and whether it finds what was planted.

The simulator is `made_sessions`, which knows nothing of the detectors. False-alarm limits are those the detectors
promise (drift 1 % of sessions, period 3 %, step and burst next to none), plus two binomial standard deviations of the
number of sessions drawn here. A longer run (200 to 300 sessions a regime and length) gave: steps 0 %, bursts 0 %, drift
0 to 2.5 %, period 0 to 4 %.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest
from made_epochs import make, rtk_errors
from made_sessions import DGPS, REGIMES, RTK, Regime, blocks_of, errors, estimate_of, gauss_markov, session

from fieldbook.reduce.blocks import Blocks
from fieldbook.reduce.detectors import Detected, detect
from fieldbook.reduce.drift import settling_index
from fieldbook.reduce.estimate import estimate
from fieldbook.reduce.fix_classes import RTK_FIXED
from fieldbook.reduce.gates import Limits
from fieldbook.reduce.initialisations import InitialisationJudge
from fieldbook.reduce.screening import Screening
from fieldbook.reduce.series import Series
from fieldbook.reduce.smoothing import SMOOTHED_BELOW
from fieldbook.reduce.steps import steps

Plant = Callable[[np.random.Generator, np.ndarray], np.ndarray]


def found_in(plant: Plant, minutes: float, count: int = 24, regime: Regime = RTK, seed: int = 3) -> list[Detected]:
    rng = np.random.default_rng(9)
    made = errors(regime, seed, count, minutes)
    return [detect(session(regime, plant(rng, enu.copy()))) for enu in made]


def most(count: int, rate: float) -> float:
    """Expected number at that rate plus two binomial standard deviations."""
    return count * rate + 2 * (count * rate * (1 - rate)) ** 0.5


@pytest.mark.slow
def test_sound_sessions_are_left_in_peace() -> None:
    """40 sessions each of four regimes at 3, 15 and 60 minutes: 480 in all, fixed seeds."""
    found = [
        item
        for name in REGIMES
        for minutes in (3, 15, 60)
        for item in found_in(lambda _, enu: enu, minutes, 40, REGIMES[name], seed=11)
    ]
    assert len(found) == 480
    assert sum(bool(item.steps) for item in found) <= most(480, 0.001)
    assert sum(item.bursts is not None for item in found) <= most(480, 0.001)
    assert sum(item.drift is not None for item in found) <= most(480, 0.01)
    assert sum(item.periodic is not None for item in found) <= most(480, 0.03)
    assert all(item.inside_ratio is None or item.inside_ratio > SMOOTHED_BELOW for item in found)


@pytest.mark.parametrize(("minutes", "sigmas", "least"), [(15, 4, 0.3), (15, 8, 0.85), (60, 4, 0.4), (60, 8, 0.9)])
def test_drift_is_found_with_its_size(minutes: int, sigmas: float, least: float) -> None:
    """A drift of 4 class sigmas over the session is found in 42 to 99 % of the reference study."""
    axis = 2

    def plant(_: np.random.Generator, enu: np.ndarray) -> np.ndarray:
        enu[:, axis] += np.linspace(0, sigmas * RTK_FIXED.vertical_m, len(enu))
        return enu

    found = [item.drift for item in found_in(plant, minutes)]
    named = [item for item in found if item is not None]
    assert len(named) >= least * len(found)
    assert all(item.axis == "height" for item in named)
    size = np.median([item.change_m for item in named])
    assert size == pytest.approx(sigmas * RTK_FIXED.vertical_m, rel=0.35)


def test_ordinary_regression_would_cry_wolf() -> None:
    """Why the fitted covariance is needed: the same sessions, regression of independent values, 1 %."""
    from fieldbook.reduce.summary_statistics import fit_line

    alarms = 0
    for enu in errors(RTK, 11, 40, 15):
        means = enu[:, 0].reshape(-1, 10).mean(axis=1)
        line = fit_line(np.arange(len(means)), means)
        alarms += abs(line.slope) > 2.63 * line.covariance[1, 1] ** 0.5  # t_.995 of 88 dof
    assert alarms >= 0.6 * 40


@pytest.mark.parametrize(("minutes", "amplitude", "least"), [(30, 0.006, 0.65), (60, 0.006, 0.85), (120, 0.004, 0.85)])
def test_period_is_found_with_period_and_amplitude(minutes: int, amplitude: float, least: float) -> None:
    """6 mm on a Gauss-Markov process of 6 mm: 84 % at 30, 100 % at 60 minutes in the reference study."""
    periods: list[float] = []

    def plant(rng: np.random.Generator, enu: np.ndarray) -> np.ndarray:
        periods.append(rng.uniform(100, 300))
        enu[:, 0] += amplitude * np.sin(2 * np.pi * (np.arange(len(enu)) / periods[-1] + rng.random()))
        return enu

    found = [item.periodic for item in found_in(plant, minutes)]
    pairs = [(item, period) for item, period in zip(found, periods, strict=True) if item is not None]
    assert len(pairs) >= least * len(found)
    near = [item for item, period in pairs if abs(item.period_s / period - 1) < 0.05]
    assert len(near) >= 0.9 * len(pairs)
    assert np.median([item.amplitude_m for item in near]) == pytest.approx(amplitude, rel=0.25)
    assert all(item.periods >= 2.5 for item in near)


def test_a_pure_wave_gives_its_own_figures() -> None:
    """Period and amplitude of 5 mm at 217 s on a trace of noise, to 0.2 % and 1 %."""
    t = np.arange(3600)
    enu = np.random.default_rng(0).normal(0, 0.0005, (3600, 3))
    enu[:, 1] += 0.005 * np.sin(2 * np.pi * t / 217 + 0.3)
    found = detect(session(RTK, enu)).periodic
    assert found is not None
    assert found.axis == "north"
    assert found.period_s == pytest.approx(217, rel=2e-3)
    assert found.amplitude_m == pytest.approx(0.005, rel=0.01)


@pytest.mark.parametrize("minutes", [5, 15, 60])
def test_every_step_is_found_where_and_as_large_as_it_is(minutes: int) -> None:
    """0.1 to 0.6 m in plan without loss of fix: 97 to 100 % in the reference study."""
    planted: list[tuple[int, float]] = []

    def plant(rng: np.random.Generator, enu: np.ndarray) -> np.ndarray:
        at, size = int(rng.integers(int(0.25 * len(enu)), int(0.75 * len(enu)))), rng.uniform(0.1, 0.6)
        planted.append((at, size))
        enu[at:, 0] += size
        return enu

    found = [item.steps for item in found_in(plant, minutes)]
    assert sum(len(item) == 1 for item in found) >= 0.95 * len(found)
    for item, (at, size) in zip(found, planted, strict=True):
        if item:
            assert item[0].axis == "east"
            assert item[0].at_ms == pytest.approx(1000 * (28_800 + at), abs=20_000)
            assert item[0].size_m == pytest.approx(size, abs=0.03)


@pytest.mark.parametrize(("size_m", "least"), [(0.06, 0.85), (0.10, 0.95)])
def test_a_burst_is_a_burst_and_no_step(size_m: float, least: float) -> None:
    """50 s in one axis: more than half a window, so screening lets it through."""

    def plant(rng: np.random.Generator, enu: np.ndarray) -> np.ndarray:
        at = int(rng.integers(100, len(enu) - 150))
        enu[at : at + 50, 0] += size_m
        return enu

    found = found_in(plant, 15)
    assert sum(item.bursts is not None for item in found) >= least * len(found)
    assert sum(bool(item.steps) for item in found) <= 1
    sizes = [item.bursts.largest_m for item in found if item.bursts is not None]
    assert np.median(sizes) == pytest.approx(size_m, rel=0.3)
    assert all(1 <= item.bursts.blocks <= 8 for item in found if item.bursts is not None)


def test_bursts_of_rounded_output_are_measured_against_the_step() -> None:
    """Four decimals of a minute: steps of 0.15 and 0.19 m, MAD zero, yet no block is called a burst."""
    rng = np.random.default_rng(4)
    enu = errors(RTK, 4, 1, 30)[0] + [0.07, 0.09, 0.0]
    enu[:, :2] = np.round(enu[:, :2] / [0.147, 0.185]) * [0.147, 0.185]
    enu[:, 2] += rng.normal(0, 1e-6, len(enu))
    assert detect(estimate_of(blocks_of(enu), RTK_FIXED, (0.147, 0.185, 0.001))).bursts is None


def low_pass(enu: np.ndarray, filter_s: float) -> np.ndarray:
    out = enu.copy()
    for k in range(1, len(enu)):
        out[k] = out[k - 1] + (enu[k] - out[k - 1]) / filter_s
    return np.round(out / 1.85e-4) * 1.85e-4


@pytest.mark.parametrize("filter_s", [30.0, 60.0])
def test_smoothed_output_is_told_from_quiet_output(filter_s: float) -> None:
    smoothed = [item.inside_ratio for item in found_in(lambda _, enu: low_pass(enu, filter_s), 30)]
    assert sum(ratio is not None and ratio < SMOOTHED_BELOW for ratio in smoothed) >= 0.85 * len(smoothed)
    quiet = Regime(RTK_FIXED, (0.006, 0.006, 0.011), (0, 0, 0), (0.0005, 0.0005, 0.001), 200.0, 60.0)
    ratios = [item.inside_ratio for item in found_in(lambda _, enu: enu, 30, regime=quiet)]
    assert all(ratio is not None and ratio > SMOOTHED_BELOW for ratio in ratios), "white noise of 0.5 mm is enough"


def test_the_ratio_of_a_pure_gauss_markov_process_is_a_quarter() -> None:
    """(1 - 1/n^2)/(4 + 2/n^2) = 0.246 for n = 10, whatever the size; 1/12 (1 - 1/n^2) for straight flight."""
    rng = np.random.default_rng(2)
    enu = gauss_markov(rng, 1, 36_000, np.array([[2000.0]]), np.array([[0.01, 0.3, 5.0]]))[0]
    assert detect(session(DGPS, enu)).inside_ratio == pytest.approx(0.246, abs=0.015)
    line = np.outer(np.arange(3600.0), [1e-3, 2e-3, -1e-3])
    assert detect(session(DGPS, line)).inside_ratio == pytest.approx(0.99 / 12, rel=1e-3)


def test_settling_index_of_known_processes() -> None:
    """Independent parts: 0.25. One slow wave over the session: near 1. Short sessions: not said."""
    rng = np.random.default_rng(5)
    white = Series.of(blocks_of(rng.normal(size=(32_000, 3))))
    assert settling_index(white, RTK_FIXED) == pytest.approx(0.25, abs=0.12)
    slow = Series.of(blocks_of(np.outer(np.cos(np.linspace(0, np.pi, 3200)), [1.0, 1.0, 1.0])))
    assert settling_index(slow, RTK_FIXED) > 0.95  # type: ignore[operator]
    assert settling_index(Series.of(blocks_of(rng.normal(size=(300, 3)))), RTK_FIXED) is None


def test_no_heights_gaps_and_tiny_sessions_raise_nothing() -> None:
    enu = errors(RTK, 8, 1, 30)[0]
    flat = detect(estimate_of(blocks_of(enu, heights=False), RTK_FIXED))
    assert flat.periodic is None or flat.periodic.axis != "height"
    whole = blocks_of(enu)
    keep = np.r_[0:40, 90:180]  # 500 s missing
    assert detect(estimate_of(Blocks(10, whole.whole[keep], whole.m2[keep]), RTK_FIXED)).steps == []
    for seconds in (10, 20, 70):
        assert detect(session(RTK, enu[:seconds])).steps == []
    still = detect(estimate_of(blocks_of(np.zeros((3600, 3))), RTK_FIXED, (0.185, 0.185, 0.1)))
    assert (still.steps, still.drift, still.periodic, still.bursts, still.inside_ratio) == ([], None, None, None, None)


def test_a_step_between_initialisations_is_not_a_step_within_one() -> None:
    enu = errors(RTK, 8, 1, 20)[0]
    enu[600:, 0] += 0.3
    first, second = blocks_of(enu[:600]), blocks_of(enu[600:], start_s=29_400, initialisation=2)
    assert steps(Series.of(first.joined(second)), RTK_FIXED) == []
    assert len(steps(Series.of(blocks_of(enu)), RTK_FIXED)) == 1


def test_the_whole_way_from_epochs() -> None:
    """Cleaned by screening first: outliers and a step of 80 mm up, from epochs as received."""
    rng = np.random.default_rng(6)
    enu = rtk_errors(rng, 1200)
    enu[rng.integers(0, 1200, 12)] += 0.3
    enu[700:, 2] += 0.3
    screening = Screening(Limits((4,)))
    screening.push(make(enu))
    state = screening.evaluate()
    result = estimate(state, InitialisationJudge().judge(state))
    assert result is not None
    found = detect(result)
    assert [item.axis for item in found.steps] == ["height"]
    assert found.steps[0].size_m == pytest.approx(0.3, abs=0.04)
    assert found.drift is None
    assert (state.stations, state.station_changes) == (("0042",), 0)
