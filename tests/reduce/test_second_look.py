"""Wrong initialisations within the tolerance of a single place, found by what the others say of their own time.

Found by the calibration benchmark: of 2384 simulated sessions with a wrong initialisation off by exactly 0.10 m in a random
direction, 9 used it (eight of them nearly straight up, inside 80 mm of a right one), after the second look none did.
"""

from __future__ import annotations

import numpy as np
import pytest
from made_epochs import rtk_errors
from made_sessions import blocks_of
from test_initialisations import HERE, judged, occupation

from fieldbook.model.session import FixClass
from fieldbook.reduce.blocks import Blocks
from fieldbook.reduce.fix_classes import DIFFERENTIAL, RTK_FIXED, governing_class
from fieldbook.reduce.second_look import _covariance, wrong_ones

UP = (0.0, 0.0, 0.075)  # within the tolerance of 80 mm between two short ones


def pieces_of(enu: np.ndarray, lengths_s: list[int]) -> Blocks:
    edges = np.cumsum([0, *lengths_s])
    parts = [
        blocks_of(enu[edges[k] : edges[k + 1]], start_s=28_800 + int(edges[k]), initialisation=k + 1)
        for k in range(len(lengths_s))
    ]
    whole = parts[0]
    for part in parts[1:]:
        whole = whole.joined(part)
    return whole


def test_covariance_of_means_over_time_against_the_sum() -> None:
    """Two spans, against the mean of the covariances of their seconds; sd 1, tau 200 s and a tenth of 1600 s."""
    span = np.array([[[0.0, 60.0], [100.0, 400.0]]])
    found = _covariance(span, 200.0)[0]
    lag = np.abs((np.arange(60) + 0.5)[:, None] - (100.5 + np.arange(300))[None, :])
    wanted = np.mean(0.9 * np.exp(-lag / 200) + 0.1 * np.exp(-lag / 1600))
    assert found[0, 1] == pytest.approx(wanted, rel=1e-4)
    assert found[0, 1] == found[1, 0]
    assert np.all(np.linalg.eigvalsh(found) > 0)


@pytest.mark.parametrize("wrong", [0, 1, 2])
@pytest.mark.parametrize("length", [20, 120])
def test_a_wrong_one_straight_up_within_the_tolerance_is_found(wrong: int, length: int) -> None:
    for seed in range(10):
        pieces = [(300, HERE), (300, HERE)]
        pieces.insert(wrong, (length, UP))
        result = judged(occupation(seed, pieces, scale=0.4))
        assert [item.number for item in result.wrong] == [wrong + 1]
        assert result.used == [number for number in (1, 2, 3) if number != wrong + 1]
        assert result.disagreement_enu_m is None
        assert [item.cluster for item in result.initialisations if item.used] == [1, 1]


def test_the_least_probable_goes_first_and_its_neighbours_stay() -> None:
    """The one in the middle spoils what is said of both others."""
    enu = 0.3 * rtk_errors(np.random.default_rng(2), 900)
    enu[300:600] += UP
    assert wrong_ones(pieces_of(enu, [300, 300, 300]), RTK_FIXED) == [2]


def test_sound_sessions_lose_nothing() -> None:
    """100 sessions of quiet RTK in four pieces, one of them 30 s: none is spoken against."""
    for seed in range(100):
        enu = rtk_errors(np.random.default_rng(seed), 900)
        assert wrong_ones(pieces_of(enu, [300, 30, 400, 170]), RTK_FIXED) == []


def test_of_two_nobody_says_which_and_other_kinds_of_fix_are_left_alone() -> None:
    enu = np.zeros((600, 3))
    enu[300:] += (0.0, 0.0, 0.2)
    assert wrong_ones(pieces_of(enu, [300, 300]), RTK_FIXED) == []
    assert wrong_ones(pieces_of(enu, [200, 100, 300]), DIFFERENTIAL) == []
    assert wrong_ones(Blocks.empty(), RTK_FIXED) == []


def test_a_stated_class_widens_the_limits() -> None:
    enu = np.zeros((900, 3))
    enu[300:600] += (0.0, 0.0, 0.08)
    assert wrong_ones(pieces_of(enu, [300, 300, 300]), RTK_FIXED) == [2]
    coarse = governing_class([4], FixClass(0.03, 0.06, 200.0, "own field test"))
    assert wrong_ones(pieces_of(enu, [300, 300, 300]), coarse) == []


def test_without_heights_and_with_a_clock_set_back() -> None:
    enu = np.zeros((900, 3))
    enu[300:600] += (0.06, 0.0, 0.0)
    parts = pieces_of(enu, [300, 300, 300])
    flat = Blocks(parts.block_s, parts.whole.copy(), parts.m2)
    flat.whole[:, [3, 6]] = 0
    assert wrong_ones(flat, RTK_FIXED) == [2]
    back = Blocks(parts.block_s, parts.whole.copy(), parts.m2)
    back.whole[30:, 1] -= 60
    assert wrong_ones(back, RTK_FIXED) == [2]


def test_the_operator_is_heard() -> None:
    pieces = [(300, HERE), (120, UP), (300, HERE)]
    result = judged(occupation(1, pieces, scale=0.4), {2: (True, "levelled from a bench mark")})
    assert 2 in result.used
