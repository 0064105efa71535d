"""A mark carried from one epoch of a moving frame to another: in the budget, in the findings, on paper; never by default."""

from __future__ import annotations

from dataclasses import replace

import pytest
from recorded_samples import SAMPLES, record_into

from fieldbook.book.store import Book
from fieldbook.certificate.facts import build_facts
from fieldbook.certificate.sections_position import frames as frames_section
from fieldbook.clock import SystemClock
from fieldbook.errors import ReductionError, UsageError
from fieldbook.model.session import FrameChoice, Motion
from fieldbook.occupy.reductions import judge
from fieldbook.reduce.frames import check_frames
from fieldbook.reduce.frames.choice import motion_of
from fieldbook.reduce.occupation import Reduced, reduce_occupation

PLATE = Motion(model="ITRF2014", plate="AUST", sigma_m_per_year=0.0003)
VELOCITY = Motion(
    velocity_m_per_year=(-0.0370, -0.0100, 0.0480), sigma_m_per_year=0.0005, source="invented list of 2026, page 4"
)


@pytest.fixture(scope="module")
def sample(tmp_path_factory: pytest.TempPathFactory):
    book = tmp_path_factory.mktemp("motion") / "kestrel.book"
    record_into(book, SAMPLES / "kestrel-ridge-1" / "session.toml")
    with Book.open(book, clock=SystemClock()) as opened:
        state = opened.state()
        return state, state.occupations[1], list(opened.epochs(1))


def moved(sample, motion: Motion, **choice) -> tuple[Reduced, object]:
    state, occupation, epochs = sample
    frame = replace(
        occupation.session.frame,
        **{"client": "EPSG:7912", "client_epoch": 2020.0, "grid": None, "motion": (motion,)} | choice,
    )
    changed = replace(occupation, session=replace(occupation.session, frame=frame))
    reduced = reduce_occupation(changed, epochs, [])
    judge(reduced, changed, [])
    facts = build_facts(state, changed, reduced.reduction, reduced.trace, sign_off=None, repeats=[], versions={})
    return reduced, facts


def test_plate_motion_enters_the_budget_and_the_certificate(sample) -> None:
    reduced, facts = moved(sample, PLATE)
    reduction = reduced.reduction
    years = (reduction.epoch_of_observation or 0.0) - 2020.0
    client = reduction.uncertainty_client
    assert client is not None
    line = next(item for item in client.budget if item.source.startswith("motion of the ground"))
    assert line.source == "motion of the ground between the epochs, ITRF2014 AUST"
    assert line.u_enu_m == pytest.approx([0.0003 * years] * 3)
    assert line.common
    assert "no vertical motion" in line.note
    assert "0.3 mm a year over 7.17 years" in line.note
    assert "ggx136" in line.note
    measured = reduction.uncertainty.u_enu_m
    for axis in range(3):
        wanted = ((measured[axis] or 0.0) ** 2 + (0.0003 * years) ** 2) ** 0.5
        assert client.u_enu_m[axis] == pytest.approx(wanted, rel=1e-9)
    finding = next(item for item in reduction.findings if item.code == "moved_between_epochs")
    assert "ITRF2014 AUST" in finding.text
    text = str(frames_section(facts))
    assert "plate model ITRF2014, plate AUST; standard uncertainty 0.0003 m a year" in text
    assert "motion:ITRF2014 AUST" in text
    assert any("another epoch than that of the observation" in item for item in facts["cautions"])
    assert facts["position"]["client"]["epoch"] == "2020.0"
    assert facts["position"]["receiver"]["epoch"] != "2020.0"


def test_a_stated_velocity_is_printed_with_its_source(sample) -> None:
    reduced, facts = moved(sample, VELOCITY)
    text = str(frames_section(facts))
    assert "velocity X, Y, Z -0.037 m, -0.01 m, 0.048 m a year" in text
    assert "invented list of 2026, page 4" in text
    assert reduced.reduction.operation.steps[0].accuracy_m == pytest.approx(
        0.0005 * ((reduced.reduction.epoch_of_observation or 0.0) - 2020.0)
    )


def test_a_model_of_another_realisation_is_a_caution(sample) -> None:
    reduced, _ = moved(sample, replace(PLATE, model="ITRF2020"))
    finding = next(item for item in reduced.reduction.findings if item.code == "plate_model_of_another_frame")
    assert finding.severity == "caution"
    own, _ = moved(sample, PLATE)
    assert "plate_model_of_another_frame" not in {item.code for item in own.reduction.findings}


def test_nothing_moves_a_mark_by_default() -> None:
    """Refused before the first byte, with both ways named; and at reduction where a year turns out different."""
    choice = FrameChoice("EPSG:7912", "EPSG:7912", receiver_epoch="observation", client_epoch=2020.0)
    with pytest.raises(UsageError) as refused:
        check_frames(choice)
    with pytest.raises(ReductionError) as later:
        motion_of(choice, 2027.2)
    for error in (refused.value, later.value):
        assert error.code == "motion_unknown"
        assert "ITRF2020 or ITRF2014" in error.remedy
        assert "velocity with its source" in error.remedy
