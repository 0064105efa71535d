"""Every pair of frames of the reference tables: accepted, static to static, refused.

Source: tests/published/data/frame_pairs*.csv, computed for this project with PROJ 9.5.1 and the EPSG data set v11.022
and checked by an own Helmert chain with the parameters of the same EPSG codes (so they pin the choice of operation
and the epoch; they are no third party's publication). Tolerance on ENU: 0.15 mm (PROJ drops the change from the
WGS 84 to the GRS 1980 ellipsoid where parameters are all zero) plus 0.05 mm of rounding in the table.
"""

from __future__ import annotations

import csv
from pathlib import Path

import pytest

from fieldbook.errors import FieldbookError, ReductionError, UsageError
from fieldbook.model.session import FrameChoice
from fieldbook.reduce.frames import frame_info, operation_codes, transform_to_client, versions

DATA = Path(__file__).parent / "data"
EPOCH = 2027.2
TOLERANCE_MM = 0.15 + 0.05
RECEIVERS = ("9989", "7912", "7911", "10177", "10605", "9754", "7665")
EQUALITIES = {"10179"}  # EPSG writes ITRF2020 to IGS20; the table writes the code without direction


def rows(name: str) -> list[dict[str, str]]:
    with (DATA / name).open(encoding="utf-8") as file:
        next(file)
        return list(csv.DictReader(file))


def choice_of(receiver: str, client: str) -> FrameChoice:
    """Both at 2027.2 where they move."""
    epochs = [EPOCH if frame_info(f"EPSG:{code}").dynamic else None for code in (receiver, client)]
    return FrameChoice(f"EPSG:{receiver}", f"EPSG:{client}", receiver_epoch=epochs[0], client_epoch=epochs[1])


def codes_of(text: str) -> list[str]:
    return [f"EPSG:{code.rstrip('i')}" + (" inverse" if code.endswith("i") else "") for code in text.split()]


def normalised(codes: list[str]) -> list[str]:
    bare = {f"EPSG:{code} inverse": f"EPSG:{code}" for code in EQUALITIES}
    return [bare.get(code, code) for code in codes]


def compare(row: dict[str, str]) -> None:
    choice = choice_of(row["receiver"], row["client"])
    place = float(row["lat_deg"]), float(row["lon_deg"]), float(row["h_m"])
    client, operation = transform_to_client(choice, *place, EPOCH)
    assert client is not None
    assert normalised(operation_codes(operation)) == codes_of(row["steps"])
    stated = 0.0 if row["accuracy_m"] == "definition" else float(row["accuracy_m"])
    assert operation.accuracy_m == pytest.approx(stated, abs=0.0005)
    assert operation.shift_enu_m is not None
    for found, axis in zip(operation.shift_enu_m, ("e_mm", "n_mm", "u_mm"), strict=True):
        assert found * 1000.0 == pytest.approx(float(row[axis]), abs=TOLERANCE_MM), axis
    assert operation.area_ok
    assert all(step.accuracy_m is not None for step in operation.steps)


def test_data_set_is_the_pinned_one() -> None:
    """The choice of an operation depends on these; another version needs the tables computed anew."""
    assert (versions().proj, versions().epsg) == ("9.5.1", "v11.022")


@pytest.mark.parametrize(
    "row", rows("frame_pairs.csv"), ids=lambda row: f"{row['place']}-{row['receiver']}-{row['client']}"
)
def test_accepted_pair(row: dict[str, str]) -> None:
    compare(row)


@pytest.mark.parametrize(
    "row", rows("frame_pairs_static.csv"), ids=lambda row: f"{row['place']}-{row['receiver']}-{row['client']}"
)
def test_static_pair(row: dict[str, str]) -> None:
    if not row["refused"]:
        compare(row)
        return
    place = float(row["lat_deg"]), float(row["lon_deg"]), float(row["h_m"])
    with pytest.raises(FieldbookError) as refused:
        transform_to_client(choice_of(row["receiver"], row["client"]), *place, EPOCH)
    assert refused.value.remedy
    check_reason(refused.value, row["refused"])


def check_reason(error: FieldbookError, why: str) -> None:
    """The reason in our own words belongs to the class of reason of the table."""
    if "is an ensemble" in why:
        assert isinstance(error, UsageError)
        assert error.code == "frame_ensemble"
    elif why.startswith("grid missing: "):
        assert error.code == "grid_missing"
        assert why.removeprefix("grid missing: ") in error.text
    else:
        assert isinstance(error, ReductionError)
        assert error.code == "frame_unreachable"
        words = {
            "null copies": "ensemble",
            "has no operation": "no operation",
            "time-specific": "time-specific",
            "without an epoch": "without rates",
        }
        assert any(said in error.text for key, said in words.items() if key in why), (why, error.text)


@pytest.mark.parametrize("row", rows("frame_pairs_refused.csv"), ids=lambda row: f"{row['place']}-{row['client']}")
@pytest.mark.parametrize("receiver", RECEIVERS)
def test_refused_pair(row: dict[str, str], receiver: str) -> None:
    place = float(row["lat_deg"]), float(row["lon_deg"]), float(row["h_m"])
    with pytest.raises(FieldbookError) as refused:
        transform_to_client(choice_of(receiver, row["client"]), *place, EPOCH)
    assert refused.value.remedy
    check_reason(refused.value, row["why"])
