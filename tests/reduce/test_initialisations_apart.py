"""Two right initialisations a little too far apart must not let a wrong one, longer than either, take the lead.

Found by the calibration benchmark: right ones 30.2 mm apart in a noisy session, the wrong one 0.6 m away with 37 % of the
time; none had the majority, and the longest, which was the wrong one, was reduced.
"""

from __future__ import annotations

import pytest
from test_initialisations import HERE, judged, occupation

FAR = (0.3, 0.1, 0.4)


@pytest.mark.parametrize("order", [(0, 1, 2), (0, 2, 1), (2, 0, 1)])
def test_right_ones_apart_decide_against_a_wrong_one_far_away(order: tuple[int, int, int]) -> None:
    pieces = [(200, HERE), (200, (0.0, 0.045, 0.0)), (240, FAR)]
    wrong = order.index(2) + 1
    result = judged(occupation(3, [pieces[place] for place in order], scale=0.3))
    assert [item.number for item in result.wrong] == [wrong]
    assert wrong not in result.used
    assert len(result.used) == 2
    assert result.clusters == 2
    assert result.disagreement_enu_m is None


def test_two_that_disagree_by_as_much_are_still_undecided() -> None:
    """Nothing lies farther away, so there is nothing to decide against: the disagreement stays in the open."""
    result = judged(occupation(3, [(200, HERE), (200, (0.0, 0.045, 0.0))], scale=0.3))
    assert result.clusters == 2
    assert result.disagreement_enu_m is not None


def test_a_chain_is_not_made_one() -> None:
    """0, 45 and 90 mm: the widest tolerance would link all of them and hide the disagreement."""
    pieces = [(200, HERE), (200, (0.0, 0.045, 0.0)), (200, (0.0, 0.09, 0.0))]
    result = judged(occupation(3, pieces, scale=0.3))
    assert result.clusters == 3
    assert result.disagreement_enu_m is not None


def test_one_right_against_one_wrong_beside_it_stays_undecided() -> None:
    """Widened or not, nobody has two that agree and 60 % of the epochs."""
    pieces = [(150, HERE), (150, (0.0, 0.045, 0.0)), (300, FAR)]
    result = judged(occupation(3, pieces, scale=0.3))
    assert result.disagreement_enu_m is not None
