"""Repeats: both tests, the odd one, independence. Limits by hand beside each case.

The tolerances of 20 mm and 30 mm and the 2 mm of a changed height are common practice, no source. The repeat of the GPS
sky, 247 s less than a day: Agnew and Larson, GPS Solutions 11 (2007) 71-76, doi 10.1007/s10291-006-0038-4.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from fieldbook.check.repeats import (
    SKY_REPEAT_S,
    Circumstance,
    compare,
    grade,
    hours_apart,
    repeat_findings,
    sky_apart_h,
    tolerances_m,
)
from fieldbook.clock import utc_text
from fieldbook.model.session import Requirement
from fieldbook.reduce.budget import Term
from fieldbook.reduce.combine import Input, Shared, class_mean_u_m
from fieldbook.reduce.fix_classes import RTK_FIXED

DAY_MS = 86_400_000
START_MS = 1_804_122_600_000
REQUIRED = Requirement(0.05, 0.10, (4,), 2)


def at(number: int, start_s: float, length_s: float = 1200.0, **other: object) -> Circumstance:
    first = START_MS + round(start_s * 1000)
    made = Circumstance(
        number, utc_text(first), utc_text(first + round(length_s * 1000)), 0.008, 0.015, True,
        arp_height_m=1.5, tribrach="T-7", antenna="A 1", observer="R. Kell", station="0042", receiver="R 1", entry_seq=10 * number,
    )  # fmt: skip
    return replace(made, **other)


def occupation(number: int, enu: tuple[float, float, float | None], u_m: float = 0.009) -> Input:
    """Wide honest figures: 9 mm per axis of its own with 6 dof, 3 mm that all share."""
    up = None if enu[2] is None else u_m
    mean = Term("mean", "A", "t", (u_m, u_m, up), (6.0, 6.0, 6.0))
    common = Shared(Term("c", "B", "normal", (0.003, 0.003, 0.003), common=True), "c")
    return Input(number, enu, mean, (), (common,), class_mean_u_m(RTK_FIXED, 900.0))


def judged(*enu: tuple[float, float, float | None], requirement: Requirement = REQUIRED):
    inputs = [occupation(number, item) for number, item in enumerate(enu, 1)]
    circumstances = [
        at(number, 6 * 3600.0 * number, arp_height_m=1.5 + number / 10) for number in range(1, len(enu) + 1)
    ]
    found = compare(inputs, circumstances, requirement)
    return found, repeat_findings(found, circumstances)


def test_honest_occupations_agree() -> None:
    found, findings = judged((0.0, 0.0, 0.0), (0.008, -0.006, 0.012))
    assert [item.agrees for item in found.repeats] == [True]
    assert found.repeats[0].plan_m == pytest.approx(0.010)
    assert found.repeats[0].u_enu_m[0] == pytest.approx(0.009 * math.sqrt(2))  # the shared 3 mm has dropped out
    assert found.repeats[0].dof_enu[0] == pytest.approx(12.0)  # Welch-Satterthwaite of two of 6
    assert findings == []


@pytest.mark.parametrize("bust", [(0.030, 0.0, 0.0), (0.0, -0.030, 0.0), (0.0, 0.0, 0.031)])
def test_a_bust_of_30_mm_passes_the_statistics_and_fails_the_tolerance(bust) -> None:
    """30 mm over 12.7 mm with 12 dof: t = 2.4, probability 0.035, level 0.025: the test alone lets it pass."""
    found, findings = judged((0.0, 0.0, 0.0), bust)
    pair = found.repeats[0]
    assert pair.plan_significance > pair.level
    assert (pair.height_significance or 0.0) > pair.level
    assert not pair.agrees
    assert "tolerance" in pair.text
    assert findings[0].code == "occupations_disagree"
    assert findings[0].severity == "stop"
    assert "third time" in findings[0].text
    assert found.odd_one is None


def test_tight_figures_fail_the_statistics_inside_the_tolerance() -> None:
    inputs = [occupation(1, (0.0, 0.0, 0.0), 0.002), occupation(2, (0.015, 0.0, 0.0), 0.002)]
    found = compare(inputs, [at(1, 0.0), at(2, 30_000.0)], REQUIRED)
    assert found.repeats[0].plan_m < found.repeats[0].plan_tolerance_m
    assert "uncertainties" in found.repeats[0].text
    assert not found.repeats[0].agrees


@pytest.mark.parametrize("odd", [0, 1, 2])
def test_of_three_the_odd_one_is_named_with_its_entry(odd: int) -> None:
    places: list[tuple[float, float, float | None]] = [(0.002, 0.0, 0.001), (-0.002, 0.003, 0.0), (0.0, -0.002, 0.004)]
    east, north, up = places[odd]
    places[odd] = (east + 0.035, north, up)
    found, findings = judged(*places)
    assert found.odd_one == odd + 1
    assert f"Occupation {odd + 1} is the odd one" in findings[0].text
    assert f"entry {10 * (odd + 1)}" in findings[0].text
    assert findings[0].figures["odd_one"] == odd + 1


def test_three_that_all_differ_name_nobody() -> None:
    found, findings = judged((0.0, 0.0, 0.0), (0.05, 0.0, 0.0), (0.1, 0.0, 0.0))
    assert found.odd_one is None
    assert "No single one" in findings[0].text


def test_a_chain_of_three_names_nobody_when_two_explain_it_equally() -> None:
    """1 and 3 differ, 2 lies between and agrees with both: leaving out 1 or 3 are equally good explanations."""
    found, _ = judged((0.0, 0.0, 0.0), (0.0125, 0.0, 0.0), (0.025, 0.0, 0.0))
    assert [item.agrees for item in found.repeats] == [True, False, True]
    assert found.odd_one is None


def test_without_height_only_the_plan_is_judged() -> None:
    found, _ = judged((0.0, 0.0, None), (0.001, 0.0, 5.0))
    assert found.repeats[0].difference_enu_m[2] is None
    assert found.repeats[0].height_significance is None
    assert found.repeats[0].agrees


def test_tolerances_follow_the_worse_kind_of_fix_and_the_requirement() -> None:
    one, two = at(1, 0.0), at(2, 0.0)
    assert tolerances_m(one, two, REQUIRED) == (pytest.approx(0.020), pytest.approx(0.030))
    tight = Requirement(0.015, 0.025, (4,), 2)
    assert tolerances_m(one, two, tight) == (0.015, 0.025)
    poor = at(2, 0.0, sigma_plan_m=2.5, sigma_height_m=4.0, meets=False)
    assert tolerances_m(one, poor, tight) == (pytest.approx(6.25), pytest.approx(8.0))


def test_false_alarms_of_the_statistics_stay_at_the_level() -> None:
    """Three occupations, errors drawn as stated (t with 6 dof through a drawn scale), 1500 marks: at most 5 % + 2 se.

    The fixed tolerance is out of the way: class sigmas of a metre.
    """
    rng = np.random.default_rng(5)
    marks, alarms = 1500, 0
    for _ in range(marks):
        inputs = []
        for number in range(3):
            scale = 0.009 * math.sqrt(rng.chisquare(6) / 6)  # the session's estimate of a true 9 mm
            east, north, up = rng.normal(0, 0.009, 3)
            inputs.append(occupation(number, (east, north, up), scale))
        where = [at(n, 1e5 * n, sigma_plan_m=1.0, sigma_height_m=1.0, meets=False) for n in range(3)]
        alarms += any(not item.agrees for item in compare(inputs, where, REQUIRED).repeats)
    assert alarms / marks <= 0.05 + 2 * math.sqrt(0.05 * 0.95 / marks)
    assert alarms > 0


def test_same_hour_next_day_is_the_same_sky() -> None:
    """24 h later, 247 s of it gone: two 20-minute occupations overlap on the dial, though 23.7 h apart."""
    one = at(1, 0.0)
    next_day = at(2, 86_400.0, arp_height_m=1.6)
    assert hours_apart(one, next_day) == pytest.approx((86_400 - 1200) / 3600)
    assert sky_apart_h(one, next_day) == 0.0
    found = grade(one, next_day, 4.0)
    assert found.grade == "partly independent"
    assert "sky repeats" in found.text
    repeat = at(2, SKY_REPEAT_S)
    assert sky_apart_h(one, repeat) == 0.0
    assert grade(one, repeat, 4.0).grade == "not independent"
    ten_days = at(2, 10 * SKY_REPEAT_S + 5 * 3600.0)
    assert sky_apart_h(one, ten_days) == pytest.approx(5 - 1200 / 3600)
    assert sky_apart_h(ten_days, one) == pytest.approx(5 - 1200 / 3600)


def test_grades() -> None:
    one = at(1, 0.0)
    later = at(2, 6 * 3600.0, arp_height_m=1.61, observer="J. Ambrey")
    found = grade(one, later, 4.0)
    assert found.grade == "independent"
    assert found.changed == ["antenna height", "observer"]
    assert found.same == ["tribrach", "antenna", "station", "receiver"]
    assert grade(one, at(2, 6 * 3600.0), 4.0).grade == "partly independent"
    assert grade(one, at(2, 1800.0, arp_height_m=1.61), 4.0).grade == "partly independent"
    assert grade(one, at(2, 1800.0), 4.0).grade == "not independent"


@pytest.mark.parametrize(("moved_m", "counts"), [(0.0015, False), (-0.0015, False), (0.0025, True), (-0.03, True)])
def test_the_same_height_to_2_mm_is_no_new_setup(moved_m: float, counts: bool) -> None:
    found = grade(at(1, 0.0), at(2, 6 * 3600.0, arp_height_m=1.5 + moved_m), 4.0)
    assert ("antenna height" in found.changed) is counts
    assert (found.grade == "independent") is counts


def test_what_is_not_stated_is_not_counted_as_changed() -> None:
    found = grade(at(1, 0.0), at(2, 6 * 3600.0, arp_height_m=None, tribrach=None, antenna=None, started=None), 4.0)
    assert found.not_known == ["antenna height", "tribrach", "antenna"]
    assert found.grade == "not independent"
    assert found.hours_apart is None
    assert "not known" in found.text


def test_lack_of_independence_is_said_once() -> None:
    inputs = [occupation(n, (0.0, 0.0, 0.0)) for n in (1, 2, 3)]
    where = [at(1, 0.0), at(2, 1800.0), at(3, 3600.0)]
    findings = repeat_findings(compare(inputs, where, REQUIRED), where)
    assert [item.code for item in findings] == ["occupations_not_independent"]
    assert findings[0].severity == "caution"
