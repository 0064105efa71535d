"""What a choice of frames must say, and what is refused by kind before anything is recorded."""

from __future__ import annotations

from dataclasses import replace
from datetime import UTC, datetime, timedelta, timezone

import pytest

from fieldbook.errors import ExitCode, ReductionError, UsageError
from fieldbook.model.session import FrameChoice, Motion, TakenAs
from fieldbook.reduce.frames import (
    check_frames,
    client_epoch_of,
    decimal_year,
    frame_info,
    is_global_realisation,
    motion_of,
    operation_epoch_of,
    receiver_epoch_of,
    transform_to_client,
)

GOOD = FrameChoice("EPSG:7912", "EPSG:7843", receiver_epoch="observation")


def test_the_contract_sample_passes() -> None:
    check_frames(replace(GOOD, client_epoch=2020.0, grid="EPSG:7855", geoid="egm96_15.gtx"))


@pytest.mark.parametrize("side", ["receiver", "client"])
@pytest.mark.parametrize(
    ("frame", "code"),
    [
        ("EPSG:7844", "frame_kind"),  # GDA2020, 2-D
        ("EPSG:4326", "frame_kind"),
        ("EPSG:7842", "frame_kind"),  # geocentric
        ("EPSG:7855", "frame_kind"),  # projected
        ("EPSG:9463", "frame_kind"),  # compound
        ("EPSG:5711", "frame_kind"),  # vertical
        ("EPSG:999999", "frame_unknown"),
        ("ESRI:102100", "frame_not_epsg"),
        ("IGNF:RGF93GDD", "frame_not_epsg"),
        ("7912", "frame_not_epsg"),
        ("GDA2020", "frame_not_epsg"),
        ("", "frame_not_epsg"),
        ("EPSG:4979", "frame_ensemble"),
        ("EPSG:4937", "frame_ensemble"),
    ],
)
def test_refused_by_kind(side: str, frame: str, code: str) -> None:
    choice = replace(GOOD, **{side: frame}, client_epoch=2020.0)
    with pytest.raises(UsageError) as error:
        check_frames(choice)
    assert error.value.code == code
    assert error.value.exit_code == ExitCode.USAGE
    assert error.value.remedy


@pytest.mark.parametrize(
    ("change", "code"),
    [
        ({"receiver_epoch": None}, "epoch_missing"),
        ({"receiver_epoch": "today"}, "epoch_bad"),
        ({"receiver_epoch": 0.0}, "epoch_bad"),
        ({"receiver_epoch": float("nan")}, "epoch_bad"),
        ({"receiver_epoch": 20270304.0}, "epoch_bad"),
        ({"client": "EPSG:9989"}, "epoch_missing"),
        ({"client": "EPSG:9989", "client_epoch": 2020.0}, "motion_unknown"),
        ({"receiver_epoch": 2027.2, "client": "EPSG:7912", "client_epoch": 2020.0}, "motion_unknown"),
        ({"realisation": "G2139"}, "frame_realisation"),
        ({"grid": "EPSG:28355"}, "grid_datum"),
    ],
)
def test_incomplete_choices(change: dict[str, object], code: str) -> None:
    with pytest.raises(UsageError) as error:
        check_frames(replace(GOOD, **change))
    assert error.value.code == code


def test_static_frames_need_no_epoch() -> None:
    check_frames(FrameChoice("EPSG:7843", "EPSG:7843"))
    check_frames(FrameChoice("EPSG:4939", "EPSG:7843", receiver_epoch=1994.0))


def test_ensemble_as_identity_with_its_realisation() -> None:
    choice = FrameChoice("EPSG:4937", "EPSG:4937", realisation="OS Net 2009", grid="EPSG:25830")
    check_frames(choice)
    client, operation = transform_to_client(choice, 51.5, -1.4, 60.0, 2027.2)
    assert client is not None
    assert client.frame_name == "ETRS89, OS Net 2009"
    assert (client.lat_deg, client.lon_deg, client.h_m) == (51.5, -1.4, 60.0)
    assert operation.steps == []
    for bad in (None, "", "  "):
        with pytest.raises(UsageError, match="ensemble"):
            check_frames(replace(choice, realisation=bad))
    with pytest.raises(UsageError, match="ensemble"):
        check_frames(replace(choice, client="EPSG:7931"))


MOTION = Motion(model="ITRF2020", plate="AUST", sigma_m_per_year=0.0003)


@pytest.mark.parametrize(
    "motion",
    [
        replace(MOTION, sigma_m_per_year=None),
        replace(MOTION, sigma_m_per_year=-1.0),
        replace(MOTION, plate="ATLN"),
        replace(MOTION, model=None),
        replace(MOTION, velocity_m_per_year=(0.0, 0.0, 0.0)),
        Motion(velocity_m_per_year=(0.0, 0.0, 0.0), sigma_m_per_year=0.001),  # no source
        Motion(sigma_m_per_year=0.001),
    ],
)
def test_motions_that_say_too_little(motion: Motion) -> None:
    choice = FrameChoice("EPSG:9989", "EPSG:9989", receiver_epoch=2027.2, client_epoch=2020.0, motion=(motion,))
    with pytest.raises(UsageError) as error:
        check_frames(choice)
    assert error.value.code == "motion_bad"


def test_motion_belongs_between_moving_frames() -> None:
    with pytest.raises(UsageError, match="static"):
        check_frames(replace(GOOD, motion=(MOTION,)))
    with pytest.raises(UsageError, match="More than one"):
        check_frames(replace(GOOD, client="EPSG:9989", client_epoch=2020.0, motion=(MOTION, MOTION)))


@pytest.mark.parametrize(
    "equality",
    [
        TakenAs("EPSG:9781", "EPSG:4937", "note", 0.01),  # an ensemble
        TakenAs("EPSG:4989", "EPSG:7909", "note", 0.01),  # static taken as moving
        TakenAs("EPSG:9781", "EPSG:7931", " ", 0.01),
        TakenAs("EPSG:9781", "EPSG:7931", "note", 0.0),
        TakenAs("EPSG:4171", "EPSG:7931", "note", 0.01),  # 2-D
    ],
)
def test_declared_equalities_that_cannot_be(equality: TakenAs) -> None:
    with pytest.raises(UsageError):
        check_frames(replace(GOOD, taken_as=(equality,)))


def test_epochs_of_a_choice() -> None:
    assert receiver_epoch_of(GOOD, 2027.2) == 2027.2
    assert receiver_epoch_of(replace(GOOD, receiver_epoch=2018.0), 2027.2) == 2018.0
    assert client_epoch_of(replace(GOOD, client_epoch=2020.0), 2027.2) is None  # static: ignored
    assert operation_epoch_of(replace(GOOD, receiver_epoch=2018.0), 2027.2) == 2018.0
    moving_client = FrameChoice("EPSG:7843", "EPSG:7912", client_epoch=2025.5)
    assert operation_epoch_of(moving_client, 2027.2) == 2025.5
    assert operation_epoch_of(FrameChoice("EPSG:4939", "EPSG:7843"), 2027.2) == 2027.2
    with pytest.raises(ReductionError, match="epoch"):
        operation_epoch_of(FrameChoice("EPSG:4939", "EPSG:7843"), 0.0)
    with pytest.raises(ReductionError, match="epoch"):
        operation_epoch_of(FrameChoice("EPSG:4939", "EPSG:7843"), float("nan"))
    assert motion_of(GOOD, 2027.2) is None


def test_decimal_year() -> None:
    """Year + seconds since 1 January / seconds of the year; 2027 has 31536000 s, 2028 a day more."""
    assert decimal_year(datetime(2027, 1, 1, tzinfo=UTC)) == 2027.0
    assert decimal_year(datetime(2027, 7, 2, 12, tzinfo=UTC)) == 2027.5
    assert decimal_year(datetime(2028, 7, 2, tzinfo=UTC)) == 2028.5
    assert decimal_year(datetime(2027, 3, 4, 1, 10, tzinfo=UTC)) == pytest.approx(2027 + (62 * 86400 + 4200) / 31536000)
    assert decimal_year(datetime(2027, 1, 1, 5, tzinfo=timezone(timedelta(hours=5)))) == 2027.0
    with pytest.raises(ValueError, match="zone"):
        decimal_year(datetime(2027, 1, 1))  # noqa: DTZ001


def test_frame_info() -> None:
    itrf, gda, wgs = (frame_info(f"EPSG:{code}") for code in (7912, 7843, 10605))
    assert (itrf.name, itrf.dynamic, itrf.ensemble) == ("ITRF2014", True, False)
    assert (gda.name, gda.dynamic, gda.datum_code) == ("GDA2020", False, "EPSG:1168")
    assert gda.bounds == (93.41, -60.55, 173.34, -8.47)
    assert (gda.a_m, gda.inverse_flattening) == (6378137.0, 298.257222101)
    assert wgs.inverse_flattening == 298.257223563
    assert frame_info("EPSG:4979").ensemble
    assert not frame_info("EPSG:4979").dynamic
    assert all(is_global_realisation(info) for info in (itrf, wgs, frame_info("EPSG:10177")))
    assert not any(is_global_realisation(frame_info(code)) for code in ("EPSG:7843", "EPSG:4979", "EPSG:9308"))
