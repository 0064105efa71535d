"""Receivers that print zeros behind the digits they have: the step comes from the values.

Found by the calibration benchmark: eight decimals printed, four meant, the 95 % circle held the truth in 15 % of the sessions;
altitudes of one decimal printed with four: 60 %; a separation of 0.1 m printed to 1 mm: 50 %.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from made_epochs import M_PER_MIN_LAT, M_PER_MIN_LON, SEPARATION_M, make, rtk_errors

from fieldbook.model.epoch import Epoch
from fieldbook.reduce.detectors import detect
from fieldbook.reduce.estimate import Estimate, estimate
from fieldbook.reduce.gates import Limits
from fieldbook.reduce.initialisations import InitialisationJudge
from fieldbook.reduce.quantisation import Digits
from fieldbook.reduce.screening import Screening

OFF_ROUND = (0.0023 * M_PER_MIN_LON, 0.0037 * M_PER_MIN_LAT, 0.0)  # the mark of `made_epochs` stands on a whole minute


def reduced(epochs: list[Epoch], printed: int, altitude: int) -> Estimate:
    for epoch in epochs:
        epoch.latitude_decimals = epoch.longitude_decimals = printed
        epoch.altitude_decimals = altitude
    screening = Screening(Limits((4,)))
    screening.push(epochs)
    screened = screening.evaluate()
    found = estimate(screened, InitialisationJudge().judge(screened))
    assert found is not None
    assert found.kept == len(epochs)
    return found


def digits(values: list[int], decimals: int) -> Digits:
    found = Digits()
    found.add(np.array(values), np.full(len(values), decimals))
    return found


@pytest.mark.parametrize("meant", [4, 5])
def test_coordinates(meant: int) -> None:
    enu = rtk_errors(np.random.default_rng(1), 900) + OFF_ROUND
    found = reduced(make(enu, decimals=meant), 8, 3)
    assert found.resolution.step_enu_m[1] == pytest.approx(1852.2 * 10.0**-meant)
    if meant == 4:
        assert found.resolution.u_enu_m[1] == pytest.approx(0.18522 / math.sqrt(12), rel=1e-3)
    assert detect(found).steps == []


def test_altitude() -> None:
    found = reduced(make(rtk_errors(np.random.default_rng(2), 900), altitude_decimals=1), 7, 4)
    assert found.resolution.step_enu_m[2] == pytest.approx(0.1)
    assert found.resolution.u_enu_m[2] == pytest.approx(0.1 / math.sqrt(12), rel=0.02)


def test_the_step_of_one_decimal_of_height_is_no_step_of_the_antenna() -> None:
    enu = np.zeros((1200, 3))
    enu[600:, 2] = 0.06  # crosses an edge of 0.1 m and stays
    enu += 0.3 * rtk_errors(np.random.default_rng(3), 1200)
    found = reduced(make(enu, altitude_decimals=1), 7, 1)
    assert detect(found).steps == []


def test_separation_of_two_zeros_is_taken_for_coarse_and_of_one_is_not() -> None:
    """Of 4.567 m: '4.600' ends in two zeros (1 in 100 by chance), '4.570' in one (1 in 10)."""
    enu = rtk_errors(np.random.default_rng(4), 60)
    for meant, taken in ((1, 1), (2, 3), (3, 3)):
        epochs = make(enu, separation_decimals=meant)
        for epoch in epochs:
            epoch.separation_decimals = 3
        found = reduced(epochs, 7, 3)
        assert found.resolution.separation_decimals == taken
    assert round(SEPARATION_M, 1) == 4.6


def test_a_separation_is_never_taken_for_coarser_than_its_print_or_a_decimetre() -> None:
    enu = rtk_errors(np.random.default_rng(4), 60)
    for value, printed, taken in ((4_000_000, 3, 1), (4_000_000, 0, 0), (0, 3, 3)):
        epochs = make(enu)
        for epoch in epochs:
            epoch.separation_e5m, epoch.separation_decimals = value, printed
        assert reduced(epochs, 7, 3).resolution.separation_decimals == taken


def test_zeros_that_chance_may_make() -> None:
    assert digits([12_345_678_900], 8).step_units(8) == 100.0  # two zeros: 1 in 100
    assert digits([12_345_678_910], 8).step_units(8) == 1.0  # one: 1 in 10
    assert digits([12_345_678_910, 12_345_678_930], 8).step_units(8) == 10.0
    beside = digits([98_765_432_111], 8)
    assert digits([12_345_678_900], 8).step_units(8, beside) == 1.0  # the same format, and no zeros there
    assert digits([12_345_678_910], 8).step_units(8, digits([98_765_432_110], 8)) == 10.0


def test_few_values_stand_a_gap_apart() -> None:
    """Steps that are no power of ten: of three to five values the smallest gap, of two nothing."""
    assert digits([7, 127, 247], 8).step_units(8) == 120.0
    assert digits([7, 247, 367, 1207], 8).step_units(8) == 120.0
    assert digits([7, 127], 8).step_units(8) == 1.0
