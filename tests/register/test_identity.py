"""Which mark is which: proposals with their evidence, decisions that can be struck, and a rule that merges nothing doubtful.

The limits (1 km for a name, 0.5 m for nearness, 5 cm at least) are this program's own: common practice, no source.
"""

from __future__ import annotations

import time
from pathlib import Path

import pytest

from fieldbook.clock import SystemClock
from fieldbook.errors import UsageError
from fieldbook.register import decisions
from fieldbook.register.evidence import Evidence
from fieldbook.register.identity import OTHER_NEAR, SAME_APART, SAME_ID, SAME_NEAR, TWO_PLACES, key_of, proposals
from fieldbook.register.store import Register

from .conftest import Call
from .made import OFFICE, add, later, occupied

WHO = {"by": OFFICE, "reason": "seen on site"}
PLATE = {"description": "brass plate in rock", "inscription": "KR 07"}


def cases(register: Register) -> list[tuple[str, tuple[int, ...]]]:
    """Case and marks of every open question."""
    return [(item.case, item.marks) for item in proposals(register.state())]


def test_nothing_is_merged_in_silence(register: Register, base: Evidence) -> None:
    for number in range(3):
        add(register, number, [occupied(base, enu_m=(0.003 * number, 0.0, 0.0), hours=30.0 * number)])
    assert [mark.number for mark in register.state().marks().values()] == [1, 2, 3]
    assert cases(register) == [(SAME_NEAR, (1, 2)), (SAME_NEAR, (1, 3)), (SAME_NEAR, (2, 3))]
    decisions.decide_same(register, "1", "2", **WHO)
    assert cases(register) == [(SAME_NEAR, (1, 3))]
    decisions.decide_same(register, "3", "2", **WHO)
    (mark,) = register.state().marks().values()
    assert (mark.number, mark.numbers, len(mark.occupations)) == (1, (1, 2, 3), 3)


def test_the_same_name_30_m_apart(register: Register, base: Evidence) -> None:
    add(register, 0, [occupied(base)], marks={"KR-07": PLATE})
    add(register, 1, [occupied(base, enu_m=(18.0, 24.0, 0.2))], marks={"KR-07": PLATE})
    (item,) = proposals(register.state())
    assert item.case == SAME_APART
    assert item.seen.distance_m == pytest.approx(30.0, abs=1e-3)  # 3-4-5
    assert item.seen.height_difference_m == pytest.approx(0.2, abs=2e-3)
    assert item.suggested == ("different", "exclude")
    assert any("occupied at the same time" in text for text in item.seen.against)
    assert {"names KR-07 and KR-07", "inscription 'KR 07' and 'KR 07'"} <= set(item.seen.supports)
    decisions.decide_different(register, "1", "2", **WHO)
    assert cases(register) == []
    (entry,) = register.state().standing("different")
    assert entry.body["seen"]["distance_m"] == "30.0000"
    with pytest.raises(UsageError, match=f"Entry {entry.seq} of {OFFICE} settles"):
        decisions.decide_same(register, "1", "2", **WHO)
    decisions.strike(register, entry.seq, by=OFFICE, reason="it was one after all")
    assert cases(register) == [(SAME_APART, (1, 2))]


def test_two_names_a_decimetre_apart(register: Register, base: Evidence) -> None:
    add(register, 0, [occupied(base, mark="KR-07")])
    add(register, 1, [occupied(base, mark="Ridge south", enu_m=(0.06, 0.08, 0.0), hours=40.0)])
    add(register, 2, [occupied(base, mark="Far away", enu_m=(0.0, 40.0, 0.0), hours=80.0)])
    (item,) = proposals(register.state())
    assert (item.case, item.marks) == (OTHER_NEAR, (1, 2))
    assert item.seen.distance_m == pytest.approx(0.1, abs=1e-4)
    assert item.suggested[0] == "different"  # RTK positions do not err by a decimetre
    decisions.decide_same(register, "KR-07", "Ridge south", **WHO)
    mark = register.state().marks()[1]
    assert mark.names == ("KR-07", "Ridge south")
    decisions.decide_name(register, "1", "KR-07 (Ridge south)", **WHO)
    assert register.state().marks()[1].name == "KR-07 (Ridge south)"


def test_a_mark_re_set_within_one_book(register: Register, base: Evidence) -> None:
    days = (0.0, 30.0, 24.0 * 60, 24.0 * 61)
    places = ((0.0, 0.0, 0.0), (0.004, 0.0, 0.0), (1.2, 0.5, -0.1), (1.197, 0.502, -0.1))
    add(register, 0, [occupied(base, n + 1, enu_m=places[n], hours=days[n]) for n in range(4)])
    (item,) = proposals(register.state())
    assert (item.case, item.marks) == (TWO_PLACES, (1,))
    assert item.from_utc == later(base.started, days[2])
    assert item.seen.distance_m == pytest.approx(1.3, abs=0.01)
    decisions.decide_reset(register, "1", str(item.from_utc), **WHO)
    marks = register.state().marks()
    assert [len(mark.occupations) for mark in marks.values()] == [2, 2]
    assert marks[1].until_utc == marks[2].from_utc == item.from_utc
    assert marks[2].name == "KR-07"
    assert cases(register) == []  # the two are settled by the reset itself
    with pytest.raises(UsageError, match="two"):
        decisions.decide_same(register, "1", "2", **WHO)
    (entry,) = register.state().standing("reset")
    decisions.strike(register, entry.seq, by=OFFICE, reason="no: a slip of the tripod")
    assert [len(mark.occupations) for mark in register.state().marks().values()] == [4]
    # a number that was given is not given again
    assert decisions.decide_reset(register, "1", "2027-06-01", **WHO).body["number"] == 3


def test_a_mark_re_set_and_occupied_by_another_party(register: Register, base: Evidence) -> None:
    add(register, 0, [occupied(base, enu_m=(1.0, 0.0, 0.0), hours=24.0 * 90)])
    add(register, 1, [occupied(base)])
    (item,) = proposals(register.state())
    assert (item.case, item.marks) == (SAME_APART, (2, 1))  # the earlier one first
    assert item.suggested[0] == "reset"
    decisions.decide_reset(register, "2", str(item.from_utc), "1", **WHO)
    assert cases(register) == []
    marks = register.state().marks()
    assert (marks[2].until_utc, marks[1].from_utc) == (item.from_utc, item.from_utc)
    # a third party comes after the reset and calls it KR-07 too
    add(register, 2, [occupied(base, enu_m=(1.002, 0.0, 0.0), hours=24.0 * 120)])
    by_pair = {item.marks: item for item in proposals(register.state())}
    assert by_pair[1, 3].case == SAME_NEAR
    assert any("was reset on" in text for text in by_pair[2, 3].seen.against)
    with pytest.raises(UsageError, match="was occupied before"):
        decisions.decide_reset(register, "1", later(base.started, 24.0 * 400), "2", **WHO)


def test_one_id_under_two_names_far_apart(register: Register, base: Evidence) -> None:
    add(register, 0, [occupied(base, mark="A")], marks={"A": {"id": "TN-4411"}})
    add(register, 1, [occupied(base, mark="B", enu_m=(0.0, 4000.0, 0.0))], marks={"B": {"id": "tn 4411"}})
    assert cases(register) == [(SAME_ID, (1, 2))]


def test_an_equal_name_beyond_a_kilometre_is_no_evidence(register: Register, base: Evidence) -> None:
    add(register, 0, [occupied(base, mark="BM1")])
    add(register, 1, [occupied(base, mark="BM1", enu_m=(0.0, 1100.0, 0.0))])
    assert cases(register) == []
    with pytest.raises(UsageError, match="2 marks bear the name BM1: 1, 2"):
        decisions.find_mark(register.state(), "BM1")


def test_frames_are_not_compared(register: Register, base: Evidence) -> None:
    other = occupied(base, hours=40.0)
    assert other.place is not None
    from dataclasses import replace

    add(register, 0, [base])
    add(register, 1, [replace(other, place=replace(other.place, frame="EPSG:7912", epoch=2027.17))])
    (item,) = proposals(register.state())
    assert not item.seen.comparable
    assert item.suggested == ("frame",) or "same" in item.suggested
    assert "not comparable" in item.text
    assert decisions.apply_rule(register, by=OFFICE) == []


def test_different_holds_through_joins(register: Register, base: Evidence) -> None:
    for number in range(4):
        add(register, number, [occupied(base, mark=f"M{number}", enu_m=(0.2 * number, 0.0, 0.0), hours=30 * number)])
    decisions.decide_same(register, "1", "2", **WHO)
    decisions.decide_same(register, "3", "4", **WHO)
    decisions.decide_different(register, "M1", "M3", **WHO)
    with pytest.raises(UsageError, match="settles marks 1 and 3 as two"):
        decisions.decide_same(register, "2", "4", **WHO)
    with pytest.raises(UsageError, match="Both are mark 1 already"):
        decisions.decide_different(register, "1", "2", **WHO)


def test_an_occupation_on_the_wrong_mark(register: Register, base: Evidence) -> None:
    book = add(register, 0, [occupied(base, 1), occupied(base, 2, enu_m=(12.0, 0.0, 0.0), hours=1.0)])
    add(register, 1, [occupied(base, mark="KR-08", enu_m=(12.001, 0.0, 0.0), hours=30.0)])
    label = f"{book[:8]}/2"
    entry = decisions.decide_separate(register, label, **WHO)
    assert entry.body["number"] == 3
    decisions.decide_same(register, "3", "KR-08", **WHO)
    marks = register.state().marks()
    assert [held.label for held in marks[1].occupations] == [f"{book[:8]}/1"]
    assert label in [held.label for held in marks[2].occupations]
    with pytest.raises(UsageError, match="already"):
        decisions.decide_separate(register, label, **WHO)
    with pytest.raises(UsageError, match="no occupation"):
        decisions.decide_exclude(register, "00000000/9", **WHO)


@pytest.mark.parametrize(
    ("change", "marks", "covered"),
    [
        ({"enu_m": (0.01, 0.0, 0.0)}, {}, True),
        ({"enu_m": (0.06, 0.0, 0.0)}, {}, False),  # beyond the rule
        ({"enu_m": (0.01, 0.0, 0.2)}, {}, False),  # heights
        ({"enu_m": (0.01, 0.0, 0.0)}, {"inscription": "KR 17"}, False),
        ({"enu_m": (0.01, 0.0, 0.0)}, {"id": "9"}, False),
        ({"enu_m": (0.01, 0.0, 0.0)}, {"description": "iron tube"}, False),
        ({"enu_m": (0.01, 0.0, 0.0)}, {"description": "plate, brass"}, True),
        ({"enu_m": (0.01, 0.0, 0.0), "mark": "KR-7"}, {}, False),
        ({"enu_m": (0.01, 0.0, 0.0), "mark": "kr 07"}, {}, True),
        ({"enu_m": (0.01, 0.0, 0.0), "hours": 0.0}, {}, False),  # two receivers at once
    ],
)
def test_the_rule_accepts_what_nothing_speaks_against(
    register: Register, base: Evidence, change, marks, covered: bool
) -> None:
    known = {"KR-07": {**PLATE, "id": "7"}}
    add(register, 0, [occupied(base)], marks=known)
    name = change.get("mark", "KR-07")
    add(register, 1, [occupied(base, **{"hours": 30.0, **change})], marks={name: marks})
    assert len(register.state().marks()) == 2
    rule, *accepted = decisions.decide_rule(register, 0.05, **WHO)
    assert bool(accepted) is covered
    if covered:
        assert accepted[0].body["rule"] == rule.seq
        decisions.strike(register, accepted[0].seq, by=OFFICE, reason="no")
        assert len(register.state().marks()) == 2


def test_the_rule_leaves_a_name_that_stands_at_two_places_to_a_person(register: Register, base: Evidence) -> None:
    for number, east in enumerate((0.0, 0.01, 30.0)):
        add(register, number, [occupied(base, enu_m=(east, 0.0, 0.0), hours=30.0 * number)])
    assert len(decisions.decide_rule(register, 0.05, **WHO)) == 1
    decisions.decide_different(register, "1", "3", **WHO)
    decisions.decide_different(register, "2", "3", **WHO)
    assert [entry.body["marks"] for entry in decisions.apply_rule(register, by=OFFICE)] == [[1, 2]]


def test_a_pair_settled_as_different_is_not_joined_by_the_rule(register: Register, base: Evidence) -> None:
    for number in range(3):
        add(register, number, [occupied(base, enu_m=(0.004 * number, 0.0, 0.0), hours=30.0 * number)])
    decisions.decide_different(register, "1", "3", **WHO)
    accepted = decisions.decide_rule(register, 0.05, **WHO)[1:]
    assert [entry.body["marks"] for entry in accepted] == [[1, 2]]  # 2 and 3 would make 1 and 3 one


def test_keys_ignore_case_spaces_and_hyphens_but_not_letters() -> None:
    assert key_of("KR-07") == key_of("kr 07") == key_of("KR·07")
    assert key_of("KR-07") != key_of("KR-7")
    assert key_of("ＫＲ０７") == key_of("KR07")
    assert key_of(None) == key_of(" - ") == ""


def test_the_commands(register: Register, base: Evidence, run_fieldbook: Call) -> None:
    add(register, 0, [occupied(base)])
    add(register, 1, [occupied(base, enu_m=(0.01, 0.0, 0.0), hours=30.0)])
    path = register.path
    said = run_fieldbook("register", "proposals", path, "--json")
    assert said.json["proposals"][0]["case"] == SAME_NEAR
    assert "decide   same 1 2" in run_fieldbook("register", "proposals", path).out
    decide = ("register", "decide", path)
    assert run_fieldbook(*decide, "same", "1", "2", "--by", OFFICE).code == 2  # no reason
    assert run_fieldbook(*decide, "same", "1", "--by", OFFICE, "--reason", "r").code == 2
    assert run_fieldbook(*decide, "same", "1", "2", "--from", "2027-01-01", "--by", OFFICE, "--reason", "r").code == 2
    assert run_fieldbook(*decide, "reset", "1", "--by", OFFICE, "--reason", "r").code == 2
    assert run_fieldbook(*decide, "reset", "1", "--from", "tomorrow", "--by", OFFICE, "--reason", "r").code == 2
    assert run_fieldbook(*decide, "frame", "EPSG:4979", "--by", OFFICE, "--reason", "r").code == 2
    assert run_fieldbook(*decide, "frame", "EPSG:7912", "--by", OFFICE, "--reason", "r").code == 2
    assert run_fieldbook(*decide, "rule", "same-name", "--within", "nan", "--by", OFFICE, "--reason", "r").code == 2
    said = run_fieldbook(*decide, "same", "1", "2", "--by", OFFICE, "--reason", "one plate", "--json")
    seq = said.json["written"][0]["seq"]
    assert run_fieldbook("register", "proposals", path).out == "no open question\n"
    assert run_fieldbook(*decide, "strike", seq, "--by", OFFICE, "--reason", "no").code == 0
    listed = run_fieldbook("register", "decisions", path, "--json").json["decisions"]
    assert [(item["kind"], item["struck_by"]) for item in listed] == [("same", seq + 1), ("strike", None)]
    assert "STRUCK by entry" in run_fieldbook("register", "decisions", path).out
    assert run_fieldbook("verify", path).code == 0


@pytest.mark.slow
def test_a_thousand_books_are_folded_and_looked_through_in_seconds(register: Register, base: Evidence) -> None:
    """Not a timed assertion of a ratio: only that nothing is quadratic in what an office really has."""
    with register.transaction():
        for number in range(300):
            places = [
                occupied(base, n + 1, mark=f"M{(number * 7 + n) % 600}", hours=24.0 * number + n) for n in range(4)
            ]
            add(register, number, [_at(item, (number * 7 + n) % 600) for n, item in enumerate(places)])
    start = time.monotonic()
    found = proposals(register.state())
    assert found
    assert time.monotonic() - start < 60.0
    with Register.open(Path(register.path), clock=SystemClock()) as again:
        assert len(again.state().marks()) == 1200


def _at(item: Evidence, place: int) -> Evidence:
    from dataclasses import replace

    from .made import moved

    return replace(item, place=moved(item.place, (200.0 * (place % 25), 200.0 * (place // 25), 0.0)))
