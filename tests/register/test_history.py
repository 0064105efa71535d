"""Published coordinates: number, date, evidence, successor; in force on a date; what changed, by how much, and why."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path

import pytest

from fieldbook.clock import FakeClock, utc_ms_of
from fieldbook.errors import UsageError
from fieldbook.register import decisions, history
from fieldbook.register.checks import check_register
from fieldbook.register.evidence import Evidence
from fieldbook.register.store import Register

from .conftest import Call
from .made import OFFICE, add, occupied

WHO = {"by": OFFICE, "reason": "yearly list"}
DAY = 86_400_000


@pytest.fixture
def clock() -> FakeClock:
    return FakeClock(0, utc_ms_of("2027-03-10T09:00:00.000Z"))


@pytest.fixture
def dated(tmp_path: Path, clock: FakeClock) -> Iterator[Register]:
    """A register whose clock the test moves."""
    with Register.create(tmp_path / "dated.register", clock=clock, by=OFFICE) as made:
        yield made


@pytest.fixture
def two(base: Evidence) -> list[Evidence]:
    again = occupied(base, 2, hours=30.0, arp_m=(base.antenna_height_m or 0.0) + 0.1)
    return [replace(occupied(base), stops=()), replace(again, stops=())]


def publish(register: Register, *marks: int) -> list[history.Outcome]:
    return history.publish(register, list(marks) or None, **WHO)


def test_numbers_dates_and_successors(dated: Register, clock: FakeClock, two: list[Evidence]) -> None:
    add(dated, 0, two[:1])
    (first,) = publish(dated)
    assert (first.outcome, first.change.verdict) == ("published", history.FIRST)
    prefix = dated.state().id[:8]
    assert first.number == f"{prefix}-1.1"
    assert publish(dated)[0].outcome == "unchanged"
    clock.advance(20 * DAY)
    add(dated, 0, two)
    (second,) = publish(dated)
    assert second.number == f"{prefix}-1.2"
    assert second.change.verdict == history.REOBSERVED
    one, other = history.history(dated.state(), 1)
    assert (one.successor, one.in_force, other.in_force) == (second.number, False, True)
    assert other.entry.body["supersedes"] == one.number
    assert [item[1] for item in other.entry.body["evidence"]] == [1, 2]
    # in force on a date
    state = dated.state()
    assert history.in_force(state, 1, "2027-03-09") is None
    assert history.in_force(state, 1, "2027-03-10").number == first.number  # at the end of the day
    assert history.in_force(state, 1, "2027-03-10T08:59:59.999Z") is None
    assert history.in_force(state, 1, "2027-03-10T09:00:00.000Z").number == first.number
    assert history.in_force(state, 1, "2027-03-29").number == first.number
    assert history.in_force(state, 1, "2027-03-30").number == second.number
    assert history.in_force(state, 1).number == second.number
    with pytest.raises(UsageError, match="no date"):
        history.in_force(state, 1, "spring")


def test_published_values_cannot_be_struck(dated: Register, two: list[Evidence]) -> None:
    add(dated, 0, two)
    publish(dated)
    (entry,) = dated.state().standing("published")
    with pytest.raises(UsageError, match="cannot be struck"):
        decisions.strike(dated, entry.seq, by=OFFICE, reason="no")


def test_what_stops_a_mark_stops_its_publication(dated: Register, two: list[Evidence]) -> None:
    add(dated, 0, [two[0], replace(occupied(two[1], 2, enu_m=(0.5, 0.0, 0.0)))])
    (said,) = publish(dated)
    assert said.outcome == "refused"
    assert "disagree" in said.text
    assert history.history(dated.state(), 1) == []


def test_a_moved_mark_is_told_from_a_re_observed_one(dated: Register, clock: FakeClock, two: list[Evidence]) -> None:
    book = add(dated, 0, two)
    publish(dated)
    clock.advance(DAY)
    later = [
        replace(occupied(item, item.occupation + 2, enu_m=(0.06, 0.0, -0.08), hours=24.0 * 300), stops=())
        for item in two
    ]
    add(dated, 0, [*two, *later])
    assert publish(dated)[0].outcome == "refused"  # old and new disagree
    for number in (1, 2):
        decisions.decide_exclude(dated, f"{book[:8]}/{number}", by=OFFICE, reason="before the slip")
    (said,) = publish(dated)
    assert said.change.verdict == history.MOVED
    east, north, up = said.change.difference_enu_m
    assert (east, up) == (pytest.approx(0.06, abs=2e-3), pytest.approx(-0.08, abs=2e-3))
    assert abs(north) < 2e-3
    assert said.change.plan_significance < 0.025
    assert "the mark moved" in said.text


def test_significance_leaves_out_what_both_share(dated: Register, clock: FakeClock, two: list[Evidence]) -> None:
    """The frame operation (3 cm here) is in both: it must not hide a movement of three centimetres."""
    book = add(dated, 0, two[:1])
    publish(dated)
    clock.advance(DAY)
    long = replace(two[1], mean=replace(two[1].mean, u_enu_m=(0.001, 0.001, 0.002)))
    moved = replace(occupied(long, 5, enu_m=(0.0, 0.035, 0.0), hours=900.0), stops=())
    add(dated, 0, [two[0], moved])
    decisions.decide_exclude(dated, f"{book[:8]}/1", by=OFFICE, reason="before")
    (said,) = publish(dated)
    form_u = math.sqrt(sum((line.u_enu_m[1] or 0) ** 2 for line in two[0].budget))
    assert form_u > 0.03
    assert said.change.plan_significance < 0.05


def test_corrected_evidence_is_recomputed(dated: Register, clock: FakeClock, two: list[Evidence]) -> None:
    add(dated, 0, two)
    publish(dated)
    clock.advance(DAY)
    add(
        dated,
        0,
        [
            replace(occupied(item, item.occupation, enu_m=(0.0, 0.0, 0.01), arp_m=item.antenna_height_m), stops=())
            for item in two[:1]
        ]
        + two[1:],
    )
    assert [item.code for item in check_register(dated)] == ["published_outdated"]
    (said,) = publish(dated)
    assert said.change.verdict == history.RECOMPUTED
    assert check_register(dated) == []


def test_withdrawn_values(dated: Register, clock: FakeClock, two: list[Evidence]) -> None:
    add(dated, 0, two)
    (first,) = publish(dated)
    clock.advance(DAY)
    mark = dated.state().marks()[1]
    history.withdraw(dated, mark, by=OFFICE, reason="the plate is loose.")
    assert history.in_force(dated.state(), 1) is None
    assert history.in_force(dated.state(), 1, "2027-03-10").number == first.number
    with pytest.raises(UsageError, match="nothing to withdraw"):
        history.withdraw(dated, mark, by=OFFICE, reason="again")
    clock.advance(DAY)
    assert publish(dated)[0].number.endswith("-1.2")


def test_changes_since_a_date(dated: Register, clock: FakeClock, two: list[Evidence]) -> None:
    add(dated, 0, two[:1])
    add(dated, 1, [occupied(two[0], mark="B", enu_m=(300.0, 0.0, 0.0), hours=2.0)])
    publish(dated, 1)
    clock.advance(10 * DAY)
    assert history.changes_since(dated.state(), "2027-03-10") == []
    add(dated, 0, two)
    publish(dated)
    found = {item.mark: item for item in history.changes_since(dated.state(), "2027-03-12")}
    assert set(found) == {1, 2}
    assert found[2].then is None
    assert found[1].difference_enu_m is not None
    assert [step.kind for step in found[1].steps] == ["published"]
    assert history.changes_since(dated.state(), "2027-03-20") == []


def test_joined_marks_have_one_history(dated: Register, clock: FakeClock, two: list[Evidence]) -> None:
    add(dated, 0, two[:1])
    add(dated, 1, two[1:])
    publish(dated)
    clock.advance(DAY)
    decisions.decide_same(dated, "1", "2", by=OFFICE, reason="one plate")
    values = history.history(dated.state(), 1)
    assert len(values) == 2
    (said,) = publish(dated)
    assert said.number.endswith("-1.3")


def test_the_commands(register: Register, two: list[Evidence], run_fieldbook: Call) -> None:
    add(register, 0, two)
    path, who = register.path, ("--by", OFFICE, "--reason", "yearly list")
    assert run_fieldbook("register", "publish", path, *who).code == 2
    assert run_fieldbook("register", "in-force", path, "KR-07").out == ""
    said = run_fieldbook("register", "publish", path, "--all", *who, "--json").json["marks"]
    assert said[0]["outcome"] == "published"
    found = run_fieldbook("register", "in-force", path, "KR-07", "--json").json["values"]
    assert (found[0]["number"], found[0]["in_force"]) == (said[0]["number"], True)
    assert len(found[0]["cov_own_m2"]) == 3
    assert run_fieldbook("register", "publish", path, "KR-07", "--withdraw", *who).code == 0
    text = run_fieldbook("register", "in-force", path, "KR-07", "--all").out
    assert text.startswith("WITHDRAWN")
    assert "Do not use" in text
    assert run_fieldbook("register", "changes", path, "--since", "2026-01-01", "--json").json["marks"][0]["now"] is None
    assert "KR-07" in run_fieldbook("register", "changes", path, "--since", "2026-01-01").out
    assert run_fieldbook("verify", path).code == 0
