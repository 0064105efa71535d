"""Finding frames, and what a pair does at a place: the answer of the reduction, with what it leaves unsaid."""

from __future__ import annotations

import pytest

from fieldbook.errors import FieldbookError, UsageError
from fieldbook.model.session import FrameChoice
from fieldbook.reduce.frames import (
    ANSWERS,
    answer,
    check_frames,
    frame_info,
    frames_by,
    grids_of,
    national_frames,
    operation_codes,
    pair_at,
    plausible,
    project,
    transform_to_client,
)
from fieldbook.settings.schema import CORRECTION_KINDS

EPOCH = 2027.2
ALICE = (-23.67, 133.885, 600.0)
UPPSALA = (59.86, 17.6, 40.0)


def choice(receiver: str, client: str) -> FrameChoice:
    epochs = ["observation" if frame_info(code).dynamic else None for code in (receiver, client)]
    return FrameChoice(receiver, client, receiver_epoch=epochs[0], client_epoch=epochs[1])


# --- finding --------------------------------------------------------------------------------------------------------


def test_frames_are_found_by_word_code_and_place() -> None:
    assert [info.code for info in frames_by(["gda"])] == ["EPSG:7843", "EPSG:4939"]
    assert (
        [info.code for info in frames_by(["9989"])] == [info.code for info in frames_by(["epsg:9989"])] == ["EPSG:9989"]
    )
    assert frames_by(["germany", "dref91"])[0].code == "EPSG:10283"
    assert frames_by(["nowhere-land"]) == []
    here = {info.code for info in frames_by(place=ALICE[:2])}
    assert {"EPSG:7843", "EPSG:9989"} <= here
    assert "EPSG:7931" not in here


def test_areas_across_the_180th_meridian() -> None:
    """NZGD2000's area runs from 160 E to 171 W."""
    for lon in (175.0, -175.0, 185.0, -180.0):
        assert "EPSG:4959" in {info.code for info in frames_by(place=(-40.0, lon))}
    assert "EPSG:4959" not in {info.code for info in frames_by(place=(-40.0, 10.0))}


def test_local_frames_come_first() -> None:
    found = [info.code for info in national_frames(50.1, 8.7)]
    assert found.index("EPSG:10283") < found.index("EPSG:7931")
    assert "EPSG:9989" not in found


def test_every_listed_frame_can_be_named_in_a_session() -> None:
    """Identity: receiver = client. Ensembles ask for their realisation and get it."""
    for info in frames_by():
        realisation = "invented, 2026" if info.ensemble else None
        one = FrameChoice(
            info.code,
            info.code,
            receiver_epoch="observation" if info.dynamic else None,
            client_epoch="observation" if info.dynamic else None,
            realisation=realisation,
        )
        check_frames(one)


def test_grids_of_a_frame_at_a_place() -> None:
    found = [item.code for item in grids_of("EPSG:7843", -37.95, 144.42)]
    assert {"EPSG:7855", "EPSG:7899", "EPSG:16155"} <= set(found)
    assert "EPSG:28355" not in found, "MGA94 is of another datum"
    assert "EPSG:3857" not in found
    assert len(found) == len(set(found))
    for code in found:
        project("EPSG:7843", code, -37.95, 144.42, 0.0, outside_area_accepted=False)


# --- pairs ----------------------------------------------------------------------------------------------------------


def test_the_pair_is_what_the_reduction_would_use() -> None:
    for receiver, client, place in (
        ("EPSG:7912", "EPSG:7843", ALICE),
        ("EPSG:10605", "EPSG:7843", ALICE),
        ("EPSG:9989", "EPSG:6319", (39.22, -98.54, 570.0)),
        ("EPSG:7931", "EPSG:10570", (50.1, 8.7, 150.0)),
    ):
        pair = pair_at(choice(receiver, client), *place, EPOCH)
        _, operation = transform_to_client(choice(receiver, client), *place, EPOCH)
        assert pair.operation is not None
        assert operation_codes(pair.operation) == operation_codes(operation)
        assert pair.effect_mm == pytest.approx([1000 * value for value in operation.shift_enu_m or []])
        assert pair.refused is None


def test_alice_springs_and_its_year() -> None:
    """frame_pairs.csv: -229.5 -423.8 +1.0 mm at 2027.2; a year more is the plate's 67 mm (GDA2020 manual, Appendix A)."""
    pair = pair_at(choice("EPSG:7912", "EPSG:7843"), *ALICE, EPOCH)
    assert pair.effect_mm == pytest.approx([-229.5, -423.8, 1.0], abs=0.1)
    assert pair.change_mm is not None
    assert (pair.change_mm[0] ** 2 + pair.change_mm[1] ** 2) ** 0.5 == pytest.approx(66.9, abs=0.2)
    assert any("a year is 66.9 mm" in text for text in pair.warnings)
    assert [item.codes for item in pair.considered if item.used] == [("EPSG:8049",)]


def test_candidates_that_were_not_taken_say_why() -> None:
    pair = pair_at(choice("EPSG:10605", "EPSG:7843"), *ALICE, EPOCH)
    assert pair.operation is not None
    assert operation_codes(pair.operation) == ["EPSG:10608", "EPSG:9991 inverse", "EPSG:8049"]
    assert any("ensemble" in item.reason for item in pair.considered)
    assert any("good to metres" in text for text in pair.warnings)


def test_missing_grids_are_named() -> None:
    pair = pair_at(choice("EPSG:9989", "EPSG:4977"), *UPPSALA, EPOCH)
    assert pair.operation is None
    assert pair.refused is not None
    assert pair.refused.code == "grid_missing"
    assert "eur_nkg_nkgrf17vel.tif" in pair.missing_grids
    assert pair.effect_mm is None


@pytest.mark.parametrize(
    ("receiver", "client", "place", "code", "said"),
    [
        ("EPSG:4937", "EPSG:7931", (50.1, 8.7, 150.0), "frame_ensemble", "ensemble"),
        ("EPSG:9989", "EPSG:4989", (-15.8, -47.9, 1100.0), "frame_unreachable", None),
        ("EPSG:7912", "EPSG:7843", (51.0, 0.0, 0.0), "outside_area", None),
    ],
)
def test_refusals_are_told_not_raised(receiver: str, client: str, place, code: str, said: str | None) -> None:
    pair = pair_at(choice(receiver, client), *place, EPOCH)
    assert pair.refused is not None
    assert pair.refused.code == code
    assert pair.refused.remedy
    assert said is None or any(said in text for text in pair.warnings)


def test_two_moving_frames_at_two_epochs() -> None:
    two = FrameChoice("EPSG:9989", "EPSG:7912", receiver_epoch="observation", client_epoch=2020.0)
    pair = pair_at(two, *ALICE, EPOCH)
    assert isinstance(pair.refused, FieldbookError)
    assert pair.refused.code == "motion_unknown"
    assert any("[[frame.motion]]" in text for text in pair.warnings)


def test_identity_needs_nothing() -> None:
    pair = pair_at(choice("EPSG:7843", "EPSG:7843"), *ALICE, EPOCH)
    assert pair.operation is not None
    assert pair.operation.steps == []
    assert pair.effect_mm == (0.0, 0.0, 0.0)
    assert pair.considered == ()
    assert pair.change_mm is None


def test_static_frames_whose_tie_depends_on_time_are_said() -> None:
    pair = pair_at(choice("EPSG:7931", "EPSG:10570"), *(50.1, 8.7, 150.0), EPOCH)
    assert any("depends on time" in text for text in pair.warnings)
    assert any("definition" in text for text in pair.warnings)


# --- questions --------------------------------------------------------------------------------------------------


def test_there_is_an_answer_for_every_kind_of_correction() -> None:
    assert {item.kind for item in ANSWERS} == set(CORRECTION_KINDS)
    for item in ANSWERS:
        assert item.ask, "nothing is taken for granted: somebody must be asked"
        assert item.beware
        assert any(text.startswith("receiver = ") for text in item.write)
        for code in item.global_frames:
            assert not frame_info(code).ensemble
    with pytest.raises(UsageError, match="none of the answers"):
        answer("rtk")


def test_only_the_broadcast_orbits_name_a_frame_by_themselves() -> None:
    """Everything else is somebody's choice: the line to write has dots, not a code."""
    for item in ANSWERS:
        named = any('receiver = "EPSG:10605"' in text for text in item.write)
        assert named == (item.kind in ("none", "own base on unknown mark"))


def test_plausible_frames_of_a_network_are_those_of_the_place() -> None:
    here = [info.code for info in plausible(answer("network"), ALICE[:2])]
    assert here[:3] == ["EPSG:9308", "EPSG:7843", "EPSG:4939"]
    assert [info.code for info in plausible(answer("network"), None)] == ["EPSG:9989", "EPSG:10177", "EPSG:7912"]
    assert [info.code for info in plausible(answer("none"), ALICE[:2])] == ["EPSG:10605"]
