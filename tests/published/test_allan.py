"""Allan deviations and standard deviations of averages against published values.

Source: W. J. Riley, Handbook of Frequency Stability Analysis, NIST Special Publication 1065 (2008), pages 107-108: the
nine-value set of NBS Monograph 140 and the set of 1000 pseudo-random values. Tolerance: the last printed digit
(7 significant digits), 6e-7 relative. Slope, lag-1 autocorrelation of the nine values: computed, not printed there.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from fieldbook.reduce.allan import allan_deviation, averages, sd_of_averages
from fieldbook.reduce.summary_statistics import fit_line, summarise

DATA = Path(__file__).parent / "data"
PRINTED = 6e-7


def nbs14(count: int) -> np.ndarray:
    return np.loadtxt(DATA / f"nbs14_{count}_frequency.txt")


SETS = [  # values, m, sample sd, Allan, overlapping Allan
    (9, 1, 100.9770, 91.22945, 91.22945),
    (9, 2, 102.6039, 115.8082, 85.95287),
    (1000, 1, 2.884664e-1, 2.922319e-1, 2.922319e-1),
    (1000, 10, 9.296352e-2, 9.965736e-2, 9.159953e-2),
    (1000, 100, 3.206656e-2, 3.897804e-2, 3.241343e-2),
]


@pytest.mark.parametrize(("count", "m", "sd", "allan", "overlapping"), SETS)
def test_sp_1065(count: int, m: int, sd: float, allan: float, overlapping: float) -> None:
    series = nbs14(count)
    assert sd_of_averages(series, m) == pytest.approx(sd, rel=PRINTED)
    assert allan_deviation(series, m) == pytest.approx(allan, rel=PRINTED)
    assert allan_deviation(series, m, overlapping=True) == pytest.approx(overlapping, rel=PRINTED)


def test_the_large_set_is_what_its_rule_makes() -> None:
    """n(i+1) = 16807 n(i) mod 2147483647 from 1234567890; the first three successors as printed."""
    number, made = 1234567890, []
    for _ in range(1000):
        made.append(number / 2147483647)
        number = 16807 * number % 2147483647
    assert [round(value * 2147483647) for value in made[1:4]] == [395529916, 1209410747, 633705974]
    series = nbs14(1000)
    assert series == pytest.approx(made, abs=5e-10)
    assert (series.max(), series.min(), series.mean()) == pytest.approx(
        (9.957453e-1, 1.371760e-3, 4.897745e-1), rel=PRINTED
    )


def test_slope_and_neighbours_of_both_sets() -> None:
    """Computed figures: slope -10.2 and r1 0.04183939 of the small set, slope 6.490910e-6 of the large one."""
    small, large = nbs14(9), nbs14(1000)
    assert fit_line(np.arange(9), small).slope == pytest.approx(-10.2, abs=1e-9)
    assert summarise(small).lag1 == pytest.approx(0.04183939, abs=5e-9)
    assert fit_line(np.arange(1000), large).slope == pytest.approx(6.490910e-6, rel=5e-7)


@pytest.mark.parametrize("m", [1, 4, 25])
def test_an_offset_of_the_size_of_the_earth_changes_nothing(m: int) -> None:
    series = nbs14(1000)
    moved = series + 6_378_137.0
    assert allan_deviation(moved, m, overlapping=True) == pytest.approx(
        allan_deviation(series, m, overlapping=True), rel=1e-7
    )
    assert sd_of_averages(moved, m) == pytest.approx(sd_of_averages(series, m), rel=1e-7)


def test_too_few_values_are_refused() -> None:
    for call in (
        lambda: averages([1.0], 2),
        lambda: sd_of_averages([1.0, 2.0], 2),
        lambda: allan_deviation([1.0, 2.0, 3.0], 2),
        lambda: allan_deviation([1.0, 2.0], 0),
    ):
        with pytest.raises(ValueError, match="average"):
            call()
