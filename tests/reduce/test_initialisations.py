"""Wrong fixes: never used, always named; ties are not decided; the operator is heard."""

from __future__ import annotations

import numpy as np
import pytest
from made_epochs import make, rtk_errors

from fieldbook.model.epoch import Epoch
from fieldbook.model.session import FixClass
from fieldbook.reduce.fix_classes import AUTONOMOUS, RTK_FIXED, governing_class
from fieldbook.reduce.gates import Limits
from fieldbook.reduce.initialisations import InitialisationJudge, Judgement, tolerances_m
from fieldbook.reduce.screening import Screening

Piece = tuple[int, tuple[float, float, float]]


def occupation(seed: int, pieces: list[Piece], *, quality: int = 4, scale: float = 1.0) -> list[Epoch]:
    """Pieces of RTK positions with an offset each, one epoch of lost fix between them."""
    n = sum(length for length, _ in pieces)
    enu = scale * rtk_errors(np.random.default_rng(seed), n)
    row, starts = 0, []
    for length, offset in pieces:
        enu[row : row + length] += offset
        starts.append(row)
        row += length
    epochs: list[Epoch] = []
    for number, epoch in enumerate(make(enu, quality=quality)):
        if number in starts[1:]:
            lost = make(enu[:1], quality=0)[0]  # without fix and without time, as receivers send it
            lost.day = lost.time_ms = None
            epochs.append(lost)
        epochs.append(epoch)
    return epochs


def judged(epochs: list[Epoch], decisions: dict[int, tuple[bool, str]] | None = None, quality: int = 4) -> Judgement:
    screening = Screening(Limits((quality,)))
    screening.push(epochs)
    return InitialisationJudge().judge(screening.evaluate(), decisions)


HERE = (0.0, 0.0, 0.0)


def test_one_initialisation_is_used_and_undisputed() -> None:
    result = judged(occupation(1, [(120, HERE)]))
    assert result.used == [1]
    assert (result.clusters, result.agreeing, result.leading_share) == (1, 1, 1.0)
    assert result.disagreement_enu_m is None
    assert result.wrong == []


def test_the_wrong_one_in_the_middle_is_named_and_its_epochs_coded() -> None:
    result = judged(occupation(2, [(200, HERE), (150, (0.25, -0.1, 0.3)), (220, HERE)]))
    assert result.used == [1, 3]
    assert [item.number for item in result.wrong] == [2]
    assert result.set_aside["initialisation"] == result.wrong[0].kept
    offset = result.wrong[0].offset_enu_m
    assert offset == (pytest.approx(0.25, abs=0.03), pytest.approx(-0.1, abs=0.03), pytest.approx(0.3, abs=0.06))
    assert result.disagreement_enu_m is None
    assert result.agreeing == 2


@pytest.mark.parametrize("length", [6, 20, 90])
def test_wrong_fixes_of_a_decimetre_and_more_are_always_found(length: int) -> None:
    """60 sessions a length: off by 0.1 to 0.6 m in a random horizontal direction, beside two right ones."""
    rng = np.random.default_rng(length)
    for seed in range(60):
        size, angle = rng.uniform(0.1, 0.6), rng.uniform(0, 2 * np.pi)
        offset = (size * np.cos(angle), size * np.sin(angle), rng.normal(0, 0.1))
        right = max(60, length)
        pieces: list[Piece] = [(right, HERE), (right, HERE)]
        pieces.insert(int(rng.integers(0, 3)), (length, offset))
        bad = next(i for i, (_, o) in enumerate(pieces, start=1) if o is not HERE)
        result = judged(occupation(seed, pieces))
        assert bad not in result.used
        assert bad in [item.number for item in result.wrong]


def test_good_initialisations_are_rarely_lost() -> None:
    """120 quiet sessions of four good initialisations of a minute: the study lost 0 to 11 % of sessions."""
    whole = sum(len(judged(occupation(seed, [(60, HERE)] * 4)).used) == 4 for seed in range(120))
    assert whole >= 114


def test_a_tie_is_not_decided() -> None:
    result = judged(occupation(3, [(200, HERE), (190, (0.3, 0.0, 0.0))]))
    assert result.used == [1]
    assert result.clusters == 2
    assert result.disagreement_enu_m is not None
    assert result.disagreement_enu_m[0] == pytest.approx(0.3, abs=0.03)


def test_sixty_percent_of_the_time_need_two_that_agree() -> None:
    alone = judged(occupation(4, [(300, HERE), (60, (0.3, 0.0, 0.0))]))
    assert alone.disagreement_enu_m is not None
    together = judged(occupation(4, [(150, HERE), (60, (0.3, 0.0, 0.0)), (150, HERE)]))
    assert together.disagreement_enu_m is None
    too_short = judged(occupation(4, [(60, HERE), (100, (0.3, 0.0, 0.0)), (60, HERE)]))
    assert too_short.disagreement_enu_m is not None  # 120 of 220 epochs are 55 %


def test_resumed_after_silence_is_not_independent() -> None:
    epochs = make(rtk_errors(np.random.default_rng(5), 300))
    result = judged([*epochs[:100], *epochs[130:250], *epochs[280:]])
    assert [item.root for item in result.initialisations] == [1, 1, 1]
    assert result.agreeing == 1
    assert result.used == [1, 2, 3]


def test_fewer_than_five_epochs_are_not_used_nor_called_wrong() -> None:
    result = judged(occupation(6, [(100, HERE), (4, (0.4, 0.0, 0.0)), (100, HERE)]))
    assert result.used == [1, 3]
    assert result.wrong == []
    assert result.initialisations[1].reason.startswith("fewer than 5")
    assert result.set_aside["initialisation"] == 4


def test_the_operator_decides() -> None:
    epochs = occupation(3, [(200, HERE), (190, (0.3, 0.0, 0.0))])
    aside = judged(epochs, {1: (False, "base had moved")})
    assert aside.used == [2]
    assert aside.set_aside["operator"] == aside.initialisations[0].kept > 180
    assert aside.initialisations[0].reason == "base had moved"
    named = judged(epochs, {2: (True, "agrees with the total station")})
    assert named.used == [2]
    assert named.disagreement_enu_m is None
    assert [item.number for item in named.wrong] == [1]
    assert judged(epochs, {1: (False, "a"), 2: (False, "b")}).used == []


def test_tolerance_follows_the_class() -> None:
    assert tolerances_m(RTK_FIXED) == (0.030, 0.060)
    assert tolerances_m(AUTONOMOUS) == (pytest.approx(9.375), pytest.approx(16.0))
    wide = governing_class([4], FixClass(0.02, 0.03, 200.0, "test"))
    assert tolerances_m(wide) == (pytest.approx(0.075), pytest.approx(0.12))
    metres = judged(occupation(7, [(200, HERE), (200, (3.0, 2.0, 4.0))], quality=1, scale=150.0), quality=1)
    assert metres.used == [1, 2]  # autonomous positions wander by metres
    wild = judged(occupation(7, [(200, HERE), (100, (90.0, 0.0, 0.0)), (200, HERE)], quality=1, scale=150.0), quality=1)
    assert wild.used == [1, 3]
