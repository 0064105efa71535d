"""The marks of a book: both occupations of the sample mark KR-07 against its truth, and what cannot be combined.

Truth: sample_sessions/*/truth.toml, what the simulator of the samples knows. Variants are made from the recorded
occupations by changing what their sessions state; the epochs stay.
"""

from __future__ import annotations

import json
import math
from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path

import pytest
from recorded_samples import SAMPLES, record_into, truth_of

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.commands import run
from fieldbook.model.epoch import Epoch
from fieldbook.model.reduction import MarkResult, Uncertainty
from fieldbook.model.session import Session
from fieldbook.model.state import BookState, Occupation
from fieldbook.occupy.marks_combined import combine_marks
from fieldbook.occupy.reductions import judge, others_of
from fieldbook.reduce.budget import Term
from fieldbook.reduce.geodesy import enu_difference, geocentric
from fieldbook.reduce.occupation import Reduced, reduce_occupation
from fieldbook.reduce.shared import equipment_of, split_terms

Change = Callable[[Session], Session]


@dataclass
class Recorded:
    path: Path
    state: BookState
    epochs: dict[int, list[Epoch]]

    def marks(self, changes: dict[int, Change] | None = None, only: tuple[int, ...] = (1, 2)) -> list[MarkResult]:
        """Reduced and combined after some sessions were changed."""
        occupations: dict[int, Occupation] = {}
        for number in only:
            one = self.state.occupations[number]
            change = (changes or {}).get(number)
            occupations[number] = replace(one, session=change(one.session)) if change else one
        state = replace(self.state, occupations=occupations)
        reduced = self.reduced(occupations)
        return combine_marks(state, reduced, [])

    def reduced(self, occupations: dict[int, Occupation]) -> list[Reduced]:
        found = [reduce_occupation(item, self.epochs[number], []) for number, item in occupations.items()]
        for item in found:
            held = occupations[item.reduction.occupation]
            judge(item, held, others_of(item, found, held.session.requirement))
        return found


@pytest.fixture(scope="module")
def recorded(tmp_path_factory: pytest.TempPathFactory) -> Recorded:
    path = tmp_path_factory.mktemp("marks") / "kestrel.fieldbook"
    for name in ("kestrel-ridge-1", "kestrel-ridge-2"):
        record_into(path, SAMPLES / name / "session.toml")
    with Book.open(path, clock=SystemClock()) as book:
        return Recorded(path, book.state(), {number: book.epochs(number) for number in (1, 2)})


def test_two_occupations_hold_the_truth_and_shrink_the_region(recorded: Recorded) -> None:
    (mark,) = recorded.marks()
    truth = truth_of("kestrel-ridge-1")["client_frame"]
    assert mark.client is not None
    assert mark.client.h_m is not None
    assert mark.uncertainty is not None
    assert mark.uncertainty.vertical95_m is not None
    east, north, up = enu_difference(
        (truth["lat_deg"], truth["lon_deg"], truth["h_m"]), (mark.client.lat_deg, mark.client.lon_deg, mark.client.h_m)
    )
    assert math.hypot(east, north) <= mark.uncertainty.horizontal95_m
    assert abs(up) <= mark.uncertainty.vertical95_m
    alone = [item.reduction for item in recorded.reduced(recorded.state.occupations)]
    assert mark.uncertainty.horizontal95_m < min(item.uncertainty.horizontal95_m for item in alone)
    assert mark.uncertainty.vertical95_m < min(item.uncertainty.vertical95_m or 0.0 for item in alone)
    assert [item.occupation for item in mark.used] == [1, 2]
    assert sum(item.weight_enu[0] for item in mark.used) == pytest.approx(1.0)


def test_means_that_rest_on_one_class_of_fix_do_not_add_degrees_of_freedom(recorded: Recorded) -> None:
    (mark,) = recorded.marks()
    alone = [item.reduction.uncertainty for item in recorded.reduced(recorded.state.occupations)]
    assert all(item.governed_by != "data" for item in alone)
    assert mark.uncertainty is not None

    def dof(uncertainty: Uncertainty) -> float:
        (line,) = [line for line in uncertainty.budget if line.source == "mean of the kept epochs"]
        assert line.dof is not None
        return line.dof

    assert dof(mark.uncertainty) <= max(dof(item) for item in alone) + 1e-9


def test_position_is_the_weighted_mean_of_geocentric_coordinates(recorded: Recorded) -> None:
    """Independent of the local frame: X, Y, Z of both weighted as stated, to 1e-9 m (weights equal on all axes to 1e-4
    of a centimetre, so east/north/up weights differ by less than a nanometre here; hence 1e-6 m)."""
    (mark,) = recorded.marks()
    alone = [item.reduction.client for item in recorded.reduced(recorded.state.occupations)]
    weights = [item.weight_enu for item in mark.used]
    xyz = [geocentric(item.lat_deg, item.lon_deg, item.h_m or 0.0) for item in alone if item is not None]
    mean = weights[0][0] * xyz[0] + weights[1][0] * xyz[1]
    assert mark.client is not None
    assert [mark.client.x_m, mark.client.y_m, mark.client.z_m] == pytest.approx(list(mean), abs=1e-6)


def test_one_occupation_alone_keeps_its_figures(recorded: Recorded) -> None:
    (mark,) = recorded.marks(only=(1,))
    (single,) = recorded.reduced({1: recorded.state.occupations[1]})
    own = single.reduction
    assert mark.client == own.client
    assert mark.grid == own.grid
    assert mark.uncertainty is not None
    assert mark.uncertainty_client is not None
    assert own.uncertainty_client is not None
    for mine, its in ((mark.uncertainty, own.uncertainty), (mark.uncertainty_client, own.uncertainty_client)):
        assert mine.u_enu_m == pytest.approx(its.u_enu_m, rel=1e-12)
        assert mine.dof_enu == pytest.approx(its.dof_enu, rel=1e-9)
        assert mine.horizontal95_m == pytest.approx(its.horizontal95_m, rel=1e-9)
        assert mine.vertical95_m == pytest.approx(its.vertical95_m, rel=1e-9)
    assert mark.height is not None
    assert own.height is not None
    assert mark.height.orthometric_m == own.height.orthometric_m
    assert mark.repeats == []
    assert mark.leave is not None
    assert mark.leave.verdict == "not yet"
    assert [line.line for line in mark.leave.lines if not line.met] == ["occupations", "hours_between"]


def test_the_mark_has_its_own_verdict(recorded: Recorded) -> None:
    (mark,) = recorded.marks()
    assert mark.leave is not None
    assert mark.leave.verdict == "good to leave"
    assert {line.scope for line in mark.leave.lines} == {"mark"}
    assert [line.line for line in mark.leave.lines] == [
        "horizontal_95_m", "vertical_95_m", "occupations", "hours_between", "repeats",
    ]  # fmt: skip
    pair = mark.repeats[0].independence
    assert pair.grade == "independent"
    assert pair.hours_apart == pytest.approx(52.17, abs=0.01)
    assert "antenna height" in pair.changed


def test_every_common_line_of_a_real_budget_is_known_by_name(recorded: Recorded) -> None:
    """A renamed line would fall back to 'common to the mark': safe, but no longer per station, antenna or receiver."""
    (single,) = recorded.reduced({1: recorded.state.occupations[1]})
    session = recorded.state.occupations[1].session
    (gear,) = equipment_of([(session.corrections, session.antenna, session.receiver)])
    stated = single.reduction.uncertainty_client
    assert stated is not None
    mean, own, shared = split_terms(stated.budget, Term("mean", "A", "t", (0.0, 0.0, 0.0)), gear)
    assert mean.source == "mean"
    assert sum(term.group == "floor" for term in own) == 1
    scopes = [item.scope for item in shared]
    assert scopes[:5] == [
        "floor of station 0042",
        "floor of antenna DEMO-A1 NONE 0001",
        f"separation of receiver {session.receiver.serial}",
        "phase centre of DEMO-A1 NONE",
        "mark: plumb line against ellipsoidal normal",
    ]
    assert len(scopes) > 5
    assert all(scope.startswith("mark: frame operation") for scope in scopes[5:])


def without_heights(session: Session) -> Session:
    return replace(session, setup=replace(session.setup, reported_point="phase centre", heights=()))


def test_an_occupation_without_height_reading_says_why_it_is_left_out(recorded: Recorded) -> None:
    state = replace(recorded.state, occupations=dict(recorded.state.occupations))
    state.occupations[2] = replace(
        state.occupations[2], heights=[], session=without_heights(state.occupations[2].session)
    )
    (mark,) = combine_marks(state, recorded.reduced(state.occupations), [])
    assert [item.occupation for item in mark.used] == [1]
    assert [(item.occupation, item.code) for item in mark.not_combined] == [(2, "no_client_position")]
    assert "antenna height" in mark.not_combined[0].text
    assert [item.code for item in mark.findings] == ["not_combined"]
    assert mark.leave is not None
    assert mark.leave.verdict == "not yet"


def test_another_receiver_frame_is_not_combined(recorded: Recorded) -> None:
    def other(session: Session) -> Session:
        return replace(session, frame=replace(session.frame, receiver="EPSG:9989"))  # ITRF2020

    (mark,) = recorded.marks({2: other})
    assert [item.code for item in mark.not_combined] == ["receiver_frame_differs"]
    assert len(mark.used) == 1
    assert mark.receiver_frame in ("EPSG:7912", "EPSG:9989")


def test_another_client_frame_is_not_combined(recorded: Recorded) -> None:
    def other(session: Session) -> Session:
        frame = replace(session.frame, client="EPSG:7912", client_epoch="observation", grid=None, geoid=None)
        return replace(session, frame=frame)

    (mark,) = recorded.marks({1: other})
    assert [item.code for item in mark.not_combined] == ["client_frame_differs"]


def test_epochs_of_a_moving_client_frame_must_be_near(recorded: Recorded) -> None:
    """Two days apart: 0.4 mm of motion at 7 cm a year, combined; a stated epoch half a year off: not."""

    def moving(epoch: float | str) -> Change:
        return lambda session: replace(
            session,
            frame=replace(
                session.frame, client="EPSG:7912", client_epoch=epoch, receiver_epoch=epoch, grid=None, geoid=None
            ),
        )

    (near,) = recorded.marks({1: moving("observation"), 2: moving("observation")})
    assert [item.occupation for item in near.used] == [1, 2]
    assert near.client is not None
    assert near.client.epoch == pytest.approx(2027.173, abs=0.001)
    (far,) = recorded.marks({1: moving("observation"), 2: moving(2026.5)})
    assert [item.code for item in far.not_combined] == ["epoch_differs"]


def test_an_antenna_booked_40_mm_wrongly_stops_the_mark(recorded: Recorded) -> None:
    """The occupation agrees with itself, before and after; only the other one can show it. 33 mm are left of 40."""

    def wrong(session: Session) -> Session:
        up_m = (session.antenna.arp_to_phase_centre_up_m or 0.0) + 0.040
        return replace(session, antenna=replace(session.antenna, arp_to_phase_centre_up_m=up_m))

    (mark,) = recorded.marks({2: wrong})
    stops = [item.code for item in mark.findings if item.severity == "stop"]
    assert stops == ["occupations_disagree"]
    assert "over the tolerance of 30 mm" in mark.repeats[0].text
    assert (mark.repeats[0].height_significance or 0.0) > 0.0
    assert mark.leave is not None
    assert [line.line for line in mark.leave.lines if not line.met] == ["repeats"]


def test_the_strictest_requirement_of_the_mark_holds(recorded: Recorded) -> None:
    def loose(session: Session) -> Session:
        return replace(session, requirement=replace(session.requirement, horizontal_95_m=1.0, occupations=1))

    (mark,) = recorded.marks({2: loose})
    assert mark.leave is not None
    assert mark.leave.lines[0].wanted == 0.020


def test_an_open_stop_of_an_occupation_is_one_of_the_mark(recorded: Recorded) -> None:
    def unknown_base(session: Session) -> Session:
        return replace(session, corrections=replace(session.corrections, kind="own base on unknown mark"))

    (mark,) = recorded.marks({1: unknown_base})
    assert mark.findings[0].code == "occupation_has_stop"
    assert "1: base_unknown" in mark.findings[0].text
    assert mark.leave is not None
    assert mark.leave.verdict == "not yet"


def test_reduce_prints_the_mark_in_text_and_json(recorded: Recorded, capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["reduce", str(recorded.path)]) == 0
    text = capsys.readouterr().out
    assert "MARK KR-07: occupations 1, 2; combined: 1, 2" in text
    assert "IS THE MARK DONE?  YES" in text
    assert run(["reduce", str(recorded.path), "--json"]) == 0
    tree = json.loads(capsys.readouterr().out)
    (mark,) = tree["marks"]
    assert set(mark) == {
        "mark", "occupations", "used", "not_combined", "odd_one", "started", "ended", "kept_s", "receiver_frame", "client",
        "grid", "height", "uncertainty", "uncertainty_client", "repeats", "findings", "leave", "local",
    }  # fmt: skip
    assert mark["repeats"][0]["independence"]["grade"] == "independent"
    assert mark["uncertainty_client"]["common"]
