"""The leave check on reductions made by hand: every line, every verdict, and what a line says.

Times and figures beside each case are worked out by hand. The rules are those of the project's design (scopes, verdicts,
'come back from' = end of this occupation + hours_between, rounded up to a minute so that nobody is early).
"""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest

from fieldbook.check.leave import Figures, OtherOccupation, leave_check
from fieldbook.check.mark_leave import reaches_accuracy
from fieldbook.model.reduction import (
    AntennaHeight,
    Ellipse95,
    Finding,
    Geodetic,
    Initialisation,
    Leave,
    LeaveLine,
    Operation,
    Reduction,
    Uncertainty,
)
from fieldbook.model.session import Requirement
from fieldbook.reduce.gate_reports import GateTally
from fieldbook.reduce.prediction import TimeToGo

REQUIRED = Requirement(horizontal_95_m=0.020, vertical_95_m=0.040, accept_quality=(4,), occupations=1)
ALL = replace(REQUIRED, minimum_time_s=300.0, initialisations=2, occupations=2, hours_between=4.0)
REACHED = TimeToGo("reached", 0.0, 0.0, 0.0, 0.01)
NEVER = TimeToGo("cannot reach", None, None, None, 0.03)
SOON = TimeToGo("predicted", 430.0, 95.0, 430.0, 0.012)
PERHAPS = TimeToGo("not safely reachable", None, 80_000.0, None, 0.0199)
BOTH_REACHED = Figures(REACHED, REACHED)


def uncertainty(horizontal_m: float, vertical_m: float | None) -> Uncertainty:
    return Uncertainty(
        [0.005, 0.005, None if vertical_m is None else vertical_m / 2], [[25e-6, 0.0], [0.0, 25e-6]], [10.0] * 3,
        [2.2] * 3, Ellipse95(horizontal_m, horizontal_m, 0.0), horizontal_m, vertical_m, 200.0, "data", "by hand", [],
    )  # fmt: skip


def reduction(
    horizontal_m: float = 0.015,
    vertical_m: float | None = 0.030,
    *,
    client_m: tuple[float, float] | None = None,
    initialisations: int = 2,
    before_m: float | None = 1.5,
    after_m: float | None = 1.5,
    **more: Any,
) -> Reduction:
    """An occupation of KR-07 from 01:10:00 to 01:29:59.500, kept 1200 s; everything met unless changed."""
    made = Reduction(
        mark="KR-07", occupation=1, open=True, ended_by=None,
        started="2027-03-04T01:10:00.000Z", ended="2027-03-04T01:29:59.500Z",
        heard_from=None, heard_to=None, kept_s=1200.0, heard=1200, kept=1200, without_height=0, set_aside={},
        initialisations=[Initialisation(k + 1, None, None, 600, True, None) for k in range(initialisations)],
        receiver=Geodetic("EPSG:7912", "ITRF2014", 2027.17, -34.0, 146.0, 200.0), client=None, grid=None, height=None,
        antenna=AntennaHeight(1.5, 0.001, "phase centre", before_m=before_m, after_m=after_m),
        uncertainty=uncertainty(horizontal_m, vertical_m),
        uncertainty_client=None if client_m is None else uncertainty(*client_m),
        operation=Operation("none", [], None, True, []),
    )  # fmt: skip
    return replace(made, **more)


def other(number: int, started: str, ended: str, *, counts: bool = True) -> OtherOccupation:
    return OtherOccupation(number, started, ended, counts)


LATER = other(2, "2027-03-04T06:00:00.000Z", "2027-03-04T06:20:00.000Z")


def lines(leave: Leave) -> dict[str, LeaveLine]:
    assert len({line.line for line in leave.lines}) == len(leave.lines)
    return {line.line: line for line in leave.lines}


def check(
    requirement: Requirement = REQUIRED,
    made: Reduction | None = None,
    figures: Figures = BOTH_REACHED,
    others: tuple[OtherOccupation, ...] = (),
    gates: dict[str, GateTally] | None = None,
) -> tuple[str, dict[str, LeaveLine]]:
    leave = leave_check(requirement, made or reduction(), figures, others, gates or {})
    return leave.verdict, lines(leave)


def test_everything_met() -> None:
    verdict, found = check(ALL, others=(LATER,))
    assert verdict == "good to leave"
    assert list(found) == [
        "horizontal_95_m", "vertical_95_m", "minimum_time_s", "initialisations", "accept_quality", "height_readings",
        "occupations", "hours_between",
    ]  # fmt: skip
    assert all(line.met and line.time_to_go_s == 0.0 for line in found.values())
    assert {name for name, line in found.items() if line.scope == "mark"} == {"occupations", "hours_between"}


def test_lines_that_are_not_stated_are_not_judged() -> None:
    bare = replace(REQUIRED, height_readings=None, initialisations=None)
    assert list(check(bare)[1]) == ["horizontal_95_m", "vertical_95_m", "accept_quality"]
    code = replace(REQUIRED, accept_quality=(1, 2), initialisations=2)
    assert "initialisations" not in check(code)[1], "only where quality 4 is accepted"


def test_wanted_and_have_are_the_figures_that_are_printed() -> None:
    line = check()[1]["horizontal_95_m"]
    assert (line.wanted, line.have, line.unit, line.text) == (0.020, 0.015, "m", "reached")


def test_an_accuracy_just_met_is_met_and_just_missed_is_not() -> None:
    assert check(made=reduction(horizontal_m=0.020))[0] == "good to leave"
    verdict, found = check(made=reduction(horizontal_m=0.0200001), figures=Figures(SOON, REACHED))
    assert (verdict, found["horizontal_95_m"].met) == ("not yet", False)


def test_time_to_go_with_its_range() -> None:
    """430 s is 8 min (rounded up), 95 s is 2 min."""
    verdict, found = check(made=reduction(horizontal_m=0.025), figures=Figures(SOON, REACHED))
    assert verdict == "not yet"
    assert found["horizontal_95_m"].time_to_go_s == 430.0
    assert found["horizontal_95_m"].text == "about 8 min more, at the least 2 min"
    short = TimeToGo("predicted", 42.0, 7.5, 42.0, 0.01)
    text = check(made=reduction(vertical_m=0.05), figures=Figures(REACHED, short))[1]["vertical_95_m"].text
    assert text == "about 42 s more, at the least 8 s"
    long = TimeToGo("predicted", 7_300.0, 3_700.0, 7_300.0, 0.01)
    text = check(made=reduction(vertical_m=0.05), figures=Figures(REACHED, long))[1]["vertical_95_m"].text
    assert text == "about 2 h 02 min more, at the least 1 h 02 min"


def test_cannot_reach_names_the_line_that_forbids() -> None:
    figures = Figures(NEVER, REACHED, "coordinates of station 0042", "")
    verdict, found = check(made=reduction(horizontal_m=0.025), figures=figures)
    assert verdict == "cannot reach"
    assert "coordinates of station 0042" in found["horizontal_95_m"].text
    assert found["horizontal_95_m"].time_to_go_s is None
    figures = Figures(REACHED, NEVER, "", "resolution of the received geoid separation")
    verdict, found = check(made=reduction(vertical_m=0.05), figures=figures)
    assert verdict == "cannot reach"
    assert "geoid separation" in found["vertical_95_m"].text


def test_reachable_but_not_safely_is_not_yet() -> None:
    verdict, found = check(made=reduction(horizontal_m=0.025), figures=Figures(PERHAPS, REACHED))
    assert verdict == "not yet"
    assert found["horizontal_95_m"].time_to_go_s is None
    assert "second occupation" in found["horizontal_95_m"].text


def test_cannot_reach_outweighs_what_is_only_open() -> None:
    made = reduction(horizontal_m=0.025, initialisations=1)
    assert check(made=made, figures=Figures(NEVER, REACHED))[0] == "cannot reach"


def test_without_a_height_it_is_not_yet_and_says_what_is_missing() -> None:
    verdict, found = check(made=reduction(vertical_m=None), figures=Figures(REACHED, NEVER))
    line = found["vertical_95_m"]
    assert (verdict, line.have, line.met) == ("not yet", None, False)
    assert "antenna height" in line.text


def test_in_the_client_frame_the_clients_uncertainty_is_judged() -> None:
    made = reduction(client_m=(0.024, 0.035))
    assert check(made=made)[0] == "good to leave", "the receiver's frame unless told otherwise"
    client = replace(REQUIRED, in_frame="client frame")
    verdict, found = check(client, made, Figures(SOON, REACHED))
    assert (verdict, found["horizontal_95_m"].have) == ("not yet", 0.024)
    assert found["vertical_95_m"].have == 0.035


def test_the_receivers_figure_never_stands_in_for_the_clients() -> None:
    client = replace(REQUIRED, in_frame="client frame")
    made = reduction(vertical_m=None)
    assert made.uncertainty_client is None
    assert made.uncertainty.horizontal95_m <= REQUIRED.horizontal_95_m
    verdict, found = check(client, made, Figures(REACHED, NEVER))
    line = found["horizontal_95_m"]
    assert (verdict, line.have, line.met) == ("not yet", None, False)
    assert "client's frame" in line.text
    assert "antenna height" in line.text


def test_minimum_time_counts_what_was_kept() -> None:
    verdict, found = check(ALL, reduction(kept_s=260.5), others=(LATER,))
    line = found["minimum_time_s"]
    assert (verdict, line.met, line.have, line.time_to_go_s) == ("not yet", False, 260.5, 39.5)
    assert line.text == "40 s more"


def test_only_independent_and_used_initialisations_count() -> None:
    made = reduction(initialisations=3)
    made.initialisations[1].independent = False
    made.initialisations[2].used = False
    verdict, found = check(replace(REQUIRED, initialisations=2), made)
    assert (verdict, found["initialisations"].have, found["initialisations"].wanted) == ("not yet", 1, 2)
    assert "break the fix" in found["initialisations"].text
    assert found["initialisations"].time_to_go_s is None, "an act, not a wait"


@pytest.mark.parametrize(
    ("rule", "before_m", "after_m", "met", "said"),
    [
        ("before and after", 1.5, 1.5, True, "they agree"),
        ("before and after", 1.5, None, False, "after"),
        ("before and after", None, None, False, "before, after"),
        ("once", 1.5, None, True, "they agree"),
        ("once", None, None, False, "once"),
    ],
)
def test_height_readings(rule: str, before_m: float | None, after_m: float | None, met: bool, said: str) -> None:
    requirement = replace(REQUIRED, height_readings=rule)
    verdict, found = check(requirement, reduction(before_m=before_m, after_m=after_m))
    line = found["height_readings"]
    assert (line.met, verdict) == (met, "good to leave" if met else "not yet")
    assert said in line.text
    assert line.wanted == rule


def test_readings_that_disagree_keep_the_line_open_in_their_own_words() -> None:
    said = Finding("heights_differ_between", "stop", "Readings before and after differ by 12.0 mm.")
    verdict, found = check(made=reduction(findings=[said]))
    assert (verdict, found["height_readings"].text) == ("not yet", said.text)
    assert "findings" not in found, "said once, by the line it belongs to"
    explained = replace(said, severity="info")
    assert check(made=reduction(findings=[explained]))[0] == "good to leave"


def test_a_stop_blocks_and_a_caution_does_not() -> None:
    stop, caution = Finding("step", "stop", "The position stepped."), Finding("drift", "caution", "It drifted.")
    assert check(made=reduction(findings=[caution]))[0] == "good to leave"
    verdict, found = check(made=reduction(findings=[stop, caution]))
    assert verdict == "not yet"
    assert (found["findings"].text, found["findings"].have) == ("The position stepped.", "1 open")
    two = check(made=reduction(findings=[stop, replace(stop, code="frozen")]))[1]["findings"]
    assert (two.have, two.text) == ("2 open", "step; frozen")
    assert check(made=reduction(findings=[Finding("simulated", "stop", "Simulated.")]))[0] == "good to leave"


def test_what_the_mark_owes_does_not_keep_the_tripod_up() -> None:
    """End 01:29:59.5 + 4 h = 05:29:59.5, up to the next full minute."""
    verdict, found = check(ALL)
    assert verdict == "good to leave"
    assert (found["occupations"].met, found["occupations"].have) == (False, 1)
    assert found["occupations"].text == "come back from 05:30 UTC"
    assert found["hours_between"].text == "come back from 05:30 UTC"
    assert found["hours_between"].have is None


def test_come_back_across_midnight_and_on_the_minute() -> None:
    made = reduction(ended="2027-03-04T22:15:00.000Z")
    assert check(ALL, made)[1]["occupations"].text == "come back from 02:15 UTC"
    assert "anew" in check(replace(ALL, hours_between=None))[1]["occupations"].text


@pytest.mark.parametrize(
    ("started", "ended", "hours", "met"),
    [
        ("2027-03-04T05:29:59.500Z", "2027-03-04T05:50:00.000Z", 4.0, True),
        ("2027-03-04T05:29:59.000Z", "2027-03-04T05:50:00.000Z", 4.0 - 0.5 / 3600, False),
        ("2027-03-03T20:50:00.000Z", "2027-03-03T21:10:00.000Z", 4.0, True),  # the other one came first
        ("2027-03-03T20:50:00.000Z", "2027-03-03T22:10:00.000Z", 3.0, False),
    ],
)
def test_hours_between_run_from_end_to_start(started: str, ended: str, hours: float, met: bool) -> None:
    found = check(ALL, others=(other(2, started, ended),))[1]["hours_between"]
    assert found.have == pytest.approx(hours, abs=1e-9)
    assert found.met is met


def test_a_poor_repeat_does_not_count() -> None:
    poor = replace(LATER, counts=False)
    verdict, found = check(ALL, others=(poor,))
    assert verdict == "good to leave"
    assert (found["occupations"].have, found["occupations"].met) == (1, False)
    assert "occupation 2 misses the accuracy lines" in found["occupations"].text
    assert found["hours_between"].have is None
    both = check(ALL, others=(poor, replace(LATER, number=3)))[1]["occupations"]
    assert (both.have, both.met) == (2, True)
    assert "occupation 2 misses" in both.text


@pytest.mark.parametrize(
    ("horizontal_m", "vertical_m", "counts"),
    [(0.020, 0.040, True), (0.021, 0.030, False), (0.015, 0.041, False), (0.015, None, False)],
)
def test_an_occupation_counts_when_it_reaches_the_accuracy_alone(
    horizontal_m: float, vertical_m: float | None, counts: bool
) -> None:
    assert reaches_accuracy(REQUIRED, reduction(horizontal_m, vertical_m)) is counts


def test_an_occupation_counts_in_the_frame_the_requirement_speaks_of() -> None:
    client = replace(REQUIRED, in_frame="client frame")
    assert not reaches_accuracy(client, reduction(0.015, 0.030, client_m=(0.024, 0.030)))
    assert reaches_accuracy(client, reduction(0.024, 0.030, client_m=(0.019, 0.030)))
    assert not reaches_accuracy(client, reduction(0.015, 0.030)), "not known in the client's frame"


GATED = replace(REQUIRED, max_hdop=3.0, max_pdop=4.0, max_correction_age_s=10.0, min_satellites=6)
TALLIES = {
    "max_hdop": GateTally(1200, 0, 1400),
    "max_pdop": GateTally(1200, 0, 2150),
    "max_correction_age_s": GateTally(1200, 0, 3000),
    "min_satellites": GateTally(1200, 0, 9),
}


def test_every_stated_gate_is_a_line_with_the_worst_kept_value() -> None:
    made = reduction(set_aside={"dop": 31, "age": 4, "quality": 20, "no_fix": 5}, heard=1260)
    verdict, found = check(GATED, made, gates=TALLIES)
    assert verdict == "good to leave"
    assert (found["max_hdop"].wanted, found["max_hdop"].have, found["max_hdop"].unit) == (3.0, 1.4, "")
    assert found["max_pdop"].have == 2.15
    assert (found["max_correction_age_s"].have, found["max_correction_age_s"].unit) == (3.0, "s")
    assert (found["min_satellites"].wanted, found["min_satellites"].have) == (6.0, 9.0)
    assert found["max_hdop"].text == "worst of the epochs kept; 31 set aside"
    assert found["accept_quality"].have == "1200 of 1260 epochs"
    assert found["accept_quality"].text == "all epochs kept have it; 25 without it set aside"


@pytest.mark.parametrize(("absent", "met"), [(60, True), (61, False), (1200, False)])
def test_a_limit_that_the_receiver_does_not_report_is_open(absent: int, met: bool) -> None:
    reported = 1200 - absent
    tally = GateTally(reported, absent, 2150 if reported else None)
    verdict, found = check(GATED, gates=TALLIES | {"max_pdop": tally})
    assert (verdict, found["max_pdop"].met) == ("good to leave" if met else "not yet", met)
    if not met:
        assert "GSA" in found["max_pdop"].text
        assert found["max_pdop"].time_to_go_s is None
        assert ("not reported, so" in found["max_pdop"].text) is (reported == 0)


def test_an_age_of_corrections_where_nothing_corrects_the_receiver_is_no_line_to_wait_for() -> None:
    found = check(GATED, gates=TALLIES | {"max_correction_age_s": GateTally()})[1]["max_correction_age_s"]
    assert (found.met, found.have, found.text) == (True, None, "no epoch that it concerns")


def test_one_occupation_asked_and_another_there_is_shown() -> None:
    assert "occupations" not in check(REQUIRED)[1]
    assert check(REQUIRED, others=(LATER,))[1]["occupations"].have == 2
