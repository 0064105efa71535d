"""A position near the edge of two received steps: the values toggle, and their scatter is not noise.

Found by the calibration benchmark: RTK with four decimals of a minute, 4 h, the 95 % ellipse held the truth in 85 % of
the sessions. Two values that toggle scatter with up to half a step however small the noise is, and the formula of u_q
took that scatter for noise that averages the rounding away.
"""

from __future__ import annotations

import math

import numpy as np
import pytest
from made_epochs import gauss_markov, make, rtk_errors

from fieldbook.reduce.estimate import estimate
from fieldbook.reduce.gates import Limits
from fieldbook.reduce.initialisations import InitialisationJudge
from fieldbook.reduce.quantisation import mean_resolution_u_m
from fieldbook.reduce.screening import Screening


@pytest.mark.parametrize("noise", [0.03, 0.1, 0.2, 0.3, 0.4])
def test_rounding_error_of_the_mean_is_covered_wherever_the_mark_lies(noise: float) -> None:
    """Step 1, mark anywhere in a step, noise in steps: 300 means, 95 % within 1.96 u_q less two binomial errors."""
    rng = np.random.default_rng(7)
    inside = 0
    for _ in range(300):
        x = rng.random() + gauss_markov(rng, 600, 1.0, 30.0, noise)
        z = np.rint(x)
        u = mean_resolution_u_m(1.0, float(z.std()), len(np.unique(z)))
        inside += abs(z.mean() - x.mean()) <= 1.96 * u + 1e-12
    assert inside >= 0.925 * 300


def test_two_values_say_nothing_about_the_noise() -> None:
    assert mean_resolution_u_m(0.185, 0.0925, 2) == pytest.approx(0.185 / math.sqrt(12))
    assert mean_resolution_u_m(0.185, 0.0, 1) == pytest.approx(0.185 / math.sqrt(12))


def test_six_values_and_more_change_nothing() -> None:
    """The noise is then at least as large as the step."""
    for sd in (0.7, 1.0, 3.0):
        assert mean_resolution_u_m(1.0, sd, 64) == mean_resolution_u_m(1.0, sd)
    assert mean_resolution_u_m(1.0, 1.0, 6) < 1e-3


def test_the_estimate_counts_the_received_values() -> None:
    """Four decimals: 185 mm a step of latitude, the mark 20 mm beside an edge, so that both values occur."""
    enu = rtk_errors(np.random.default_rng(1), 900)
    half_step_m = 0.5e-4 * 1849.84
    screening = Screening(Limits((4,)))
    screening.push(make(enu + np.array([0.0, half_step_m - 0.005, 0.0]), decimals=4))
    screened = screening.evaluate()
    found = estimate(screened, InitialisationJudge().judge(screened))
    assert found is not None
    assert found.resolution.distinct["latitude"] == 2
    assert found.sd_enu_m[1] is not None
    assert found.sd_enu_m[1] > 0.06
    assert found.resolution.u_enu_m[1] == pytest.approx(0.18522 / math.sqrt(12), rel=1e-3)
