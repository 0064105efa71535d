"""Coordinates from elsewhere: complete or refused, and on equal terms with occupations in ties and combinations."""

from __future__ import annotations

import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from fieldbook.errors import UsageError
from fieldbook.reduce.geodesy import enu_difference
from fieldbook.register import decisions, history
from fieldbook.register.checks import check_register
from fieldbook.register.combining import LEAST_SQUARES, WIDENED, between_marks, combine_register
from fieldbook.register.elsewhere import COLUMNS, add_elsewhere
from fieldbook.register.evidence import Evidence
from fieldbook.register.identity import SAME_NEAR, proposals
from fieldbook.register.store import Register

from .conftest import Call
from .made import OFFICE, add, moved, occupied

WHO = {"by": OFFICE, "reason": "same plate"}
HEAD = ",".join(COLUMNS)


def row(base: Evidence, enu_m=(0.0, 0.0, 0.0), **change: str) -> dict[str, str]:
    place = moved(base.place, enu_m)
    values = {
        "name": "KR-07", "kind": "published control", "source": "State list 4, 2026 (invented)", "date": "2026-05-01",
        "frame": "EPSG:7843", "lat_deg": repr(place.lat_deg), "lon_deg": repr(place.lon_deg), "h_m": repr(place.h_m),
        "u_east_m": "0.006", "u_north_m": "0.006", "u_up_m": "0.012", "common_u_east_m": "0.01", "common_u_north_m": "0.01",
        "common_u_up_m": "0.02", "inscription": "KR 07",
    }  # fmt: skip
    return {**values, **change}


def written(path: Path, *rows: dict[str, str]) -> Path:
    text = "\n".join([HEAD, *(",".join(f'"{one.get(name, "")}"' for name in COLUMNS) for one in rows)])
    path.write_text(text + "\n", encoding="utf-8")
    return path


def test_it_takes_part_like_an_occupation(register: Register, base: Evidence, tmp_path: Path) -> None:
    add(register, 0, [replace(occupied(base), stops=())], marks={"KR-07": {"inscription": "KR 07"}})
    entry, count = add_elsewhere(register, written(tmp_path / "c.csv", row(base, (0.004, -0.002, 0.006))), by=OFFICE)
    assert (entry.kind, count) == ("elsewhere", 1)
    (item,) = proposals(register.state())
    assert item.case == SAME_NEAR
    decisions.decide_same(register, "1", "2", **WHO)
    (value,) = combine_register(register)
    assert value.method == LEAST_SQUARES
    assert len(value.members) == 2
    # the combination, by hand: two independent quantities per axis; the weights from what each is known to be
    occupation = [line for line in base.budget if line.type != "A"]
    for axis in range(3):
        prior = base.prior_u_enu_m[axis] ** 2 + sum((line.u_enu_m[axis] or 0.0) ** 2 for line in occupation)
        stated = (0.006, 0.006, 0.012)[axis] ** 2 + (0.01, 0.01, 0.02)[axis] ** 2
        weights = np.array([1 / prior, 1 / stated]) / (1 / prior + 1 / stated)
        by_label = {share.label: share.weight_enu[axis] for share in value.shares}
        labels = [member.held.label for member in sorted(value.members, key=lambda m: m.evidence.stated is not None)]
        assert [by_label[label] for label in labels] == pytest.approx(weights, rel=1e-9)
        u2 = weights[0] ** 2 * sum((line.u_enu_m[axis] or 0.0) ** 2 for line in base.budget) + weights[1] ** 2 * stated
        assert value.datum.u_enu_m[axis] == pytest.approx(math.sqrt(u2), rel=1e-9)
    start = (base.place.lat_deg, base.place.lon_deg, base.place.h_m)
    east, _, _ = enu_difference(start, (value.place.lat_deg, value.place.lon_deg, value.place.h_m))
    assert 0.0 < east < 0.004


def test_a_tie_out_of_tolerance_is_found(register: Register, base: Evidence, tmp_path: Path) -> None:
    add(register, 0, [replace(occupied(base), stops=())])
    add_elsewhere(register, written(tmp_path / "c.csv", row(base, (0.0, 0.0, 0.3))), by=OFFICE)
    decisions.decide_same(register, "1", "2", **WHO)
    (value,) = combine_register(register)
    assert value.method == WIDENED
    assert "occupations_disagree" in [item.code for item in check_register(register)]


def test_what_a_source_shares_is_not_averaged_and_drops_out_between_its_marks(
    register: Register, base: Evidence, tmp_path: Path
) -> None:
    rows = [
        row(base, (0.0, 0.0, 0.0)),
        row(base, (400.0, 0.0, 0.0), name="B"),
        row(base, (0.001, 0.0, 0.0), source="another list"),
    ]
    add_elsewhere(register, written(tmp_path / "c.csv", *rows), by=OFFICE)
    marks = {value.mark.name: value for value in combine_register(register)}
    line = between_marks(marks["KR-07"], marks["B"])
    shares = marks["KR-07"].shares
    assert len(shares) == 2  # two sources under one name in one list
    w = {member.evidence.stated.source: shares[n].weight_enu[1] for n, member in enumerate(marks["KR-07"].members)}
    own, common = 0.006**2, 0.01**2
    ours, theirs = w["State list 4, 2026 (invented)"], w["another list"]
    # B holds the whole common error of the list, KR-07 its share of it; the other list's is its own
    expected = own + own * (ours**2 + theirs**2) + common * ((1 - ours) ** 2 + theirs**2)
    assert line.u_enu_m[1] == pytest.approx(math.sqrt(expected), rel=1e-9)


def test_without_a_height_and_in_another_frame(register: Register, base: Evidence, tmp_path: Path) -> None:
    add(register, 0, [replace(occupied(base), stops=())])
    flat = row(base, (0.002, 0.0, 0.0), h_m="", u_up_m="")
    gda94 = row(base, frame="EPSG:4939", source="old list")
    add_elsewhere(register, written(tmp_path / "c.csv", flat, gda94), by=OFFICE)
    decisions.decide_same(register, "1", "2", **WHO)
    (value,) = combine_register(register)
    assert [item.code for item in value.apart] == ["frame_differs"]
    (flat_row,) = [n for n, member in enumerate(value.members) if member.place.h_m is None]
    assert value.shares[flat_row].weight_enu[2] == 0.0
    assert value.place.h_m == pytest.approx(base.place.h_m, abs=1e-6)


def test_the_same_file_is_taken_in_once(
    register: Register, base: Evidence, tmp_path: Path, run_fieldbook: Call
) -> None:
    path = written(tmp_path / "c.csv", row(base))
    assert run_fieldbook("register", "elsewhere", register.path, path, "--by", OFFICE).code == 0
    said = run_fieldbook("register", "elsewhere", register.path, path, "--by", OFFICE)
    assert "unchanged" in said.out
    assert run_fieldbook("verify", register.path).code == 0
    assert len(register.state().marks()) == 1
    history.publish(register, None, by=OFFICE, reason="taken over")
    assert run_fieldbook("register", "export", register.path, "--out", tmp_path / "x.gpkg").code == 0
    assert "common_u_east_m" in run_fieldbook("register", "elsewhere", register.path, "--columns").out
    assert run_fieldbook("register", "elsewhere", register.path, path).code == 2


@pytest.mark.parametrize(
    "change",
    [
        {"name": ""}, {"kind": "hearsay"}, {"source": ""}, {"frame": "EPSG:4326"}, {"frame": "EPSG:4979"}, {"frame": "EPSG:7912"},
        {"epoch": "2020.0"}, {"lat_deg": "95"}, {"lat_deg": "x"}, {"lon_deg": "nan"}, {"u_east_m": "0"}, {"u_north_m": ""},
        {"u_up_m": ""}, {"u_up_m": "-1"}, {"rho_en": "1"}, {"common_u_up_m": "-0.1"}, {"date": "last year"},
    ],
)  # fmt: skip
def test_what_is_not_complete_is_refused_whole(
    register: Register, base: Evidence, tmp_path: Path, change: dict[str, str]
) -> None:
    path = written(tmp_path / "c.csv", row(base), row(base, **change))
    with pytest.raises(UsageError):
        add_elsewhere(register, path, by=OFFICE)
    assert register.state().head_seq == 1


@pytest.mark.parametrize("text", ["", "name,kind\nA,B", HEAD, HEAD + "\nA", HEAD + ",colour\n", HEAD + '\n"A'])
def test_no_list_at_all(register: Register, tmp_path: Path, text: str) -> None:
    path = tmp_path / "c.csv"
    path.write_text(text)
    with pytest.raises(UsageError):
        add_elsewhere(register, path, by=OFFICE)
    with pytest.raises(UsageError):
        add_elsewhere(register, tmp_path / "none.csv", by=OFFICE)
