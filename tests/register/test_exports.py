"""Exports: read back by readers that are not ours, with what every list of coordinates must say beside them."""

from __future__ import annotations

import csv
import io
import json
from dataclasses import replace
from decimal import Decimal
from pathlib import Path
from xml.etree import ElementTree as ET

import pytest

from fieldbook.register import history
from fieldbook.register.evidence import Evidence
from fieldbook.register.export_csv import guarded, unguarded
from fieldbook.register.export_rows import COLUMNS, NUMBERS
from fieldbook.register.store import Register

from .conftest import Call
from .made import OFFICE, add, occupied

NASTY = '=HYPERLINK("http://x";"y")'


@pytest.fixture
def published(register: Register, base: Evidence) -> Register:
    """Three marks: one with a hostile name, one plain, one without a published value."""
    items = [
        occupied(base, 1, mark=NASTY),
        occupied(base, 2, mark='B "2", south', enu_m=(250.0, 0.0, 0.0), hours=3.0),
        occupied(base, 3, mark="C", enu_m=(0.0, 250.0, 0.0), hours=6.0),
    ]
    add(register, 0, [replace(item, stops=()) for item in items], marks={NASTY: {"description": "-2+3;@A1\nnew line"}})
    history.publish(register, [1, 2], by=OFFICE, reason="list of 2027")
    return register


def export(run: Call, register: Register, out: Path, *more: str) -> bytes:
    said = run("register", "export", register.path, "--out", out, *more)
    assert said.code == 0, said.err
    return out.read_bytes()


def test_csv_for_programs(published: Register, tmp_path: Path, run_fieldbook: Call) -> None:
    out = tmp_path / "register.csv"
    text = export(run_fieldbook, published, out).decode("utf-8")
    rows = list(csv.DictReader(io.StringIO(text, newline="")))
    assert [row["mark"] for row in rows] == ["1", "2"]
    assert list(rows[0]) == list(COLUMNS)
    body = history.in_force(published.state(), 1).entry.body
    for row in rows:
        assert row["frame"] == "EPSG:7843"
        assert row["frame_name"]
        assert row["geoid_model"]
        for name in NUMBERS:
            assert row[name] == "" or Decimal(row[name]).is_finite()
    assert Decimal(rows[0]["x_m"]) == Decimal(body["place"]["xyz_m"][0])
    total = Decimal(body["cov_own_m2"][0][0]) + Decimal(body["cov_common_m2"][0][0])
    assert float(rows[0]["cov_xx_m2"]) == pytest.approx(float(total), rel=1e-9)
    assert unguarded(rows[0]["name"]) == NASTY
    assert rows[0]["grid"] == "EPSG:7855"
    assert 400_000 < float(rows[0]["easting_m"]) < 600_000


def test_no_cell_of_text_begins_a_formula(published: Register, tmp_path: Path, run_fieldbook: Call) -> None:
    for reader in ("programs", "people"):
        text = export(run_fieldbook, published, tmp_path / f"{reader}.csv", "--for", reader).decode("utf-8-sig")
        rows = list(csv.reader(io.StringIO(text, newline="")))
        assert len({len(row) for row in rows}) == 1
        for row in rows:
            for cell in row:
                if cell[:1] in "=+-@\t\r\n" and cell:
                    float(cell)  # a number, nothing else


@pytest.mark.parametrize("text", ["=1+1", "+1", "-x", "@A", "'q", " =1", "＝1", "\t=1", "plain", "Müller", ""])
def test_the_guard_can_be_taken_off(text: str) -> None:
    safe = guarded(text)
    assert not safe.startswith(("=", "+", "-", "@", "\t", " =", "＝"))
    if "\t" not in text:
        assert unguarded(safe) == text


def test_csv_for_people(published: Register, tmp_path: Path, run_fieldbook: Call) -> None:
    data = export(run_fieldbook, published, tmp_path / "list.csv", "--for", "people")
    assert data.startswith(b"\xef\xbb\xbf")
    first, *_ = csv.DictReader(io.StringIO(data.decode("utf-8-sig"), newline=""))
    assert first["Latitude"].endswith("S")
    assert first["Frame and epoch"] == "GDA2020 (EPSG:7843)"
    body = history.in_force(published.state(), 1).entry.body
    assert float(first["To the datum, 95 %: plan (m)"]) >= float(body["datum_accuracy"]["horizontal95_m"])
    assert "To neighbouring marks, 95 %: plan (m)" in first


def test_geojson_keeps_the_rules_of_rfc_7946(published: Register, tmp_path: Path, run_fieldbook: Call) -> None:
    """RFC 7946, sections 3.1.1, 3.1.2, 3.2, 3.3, 4, 7.1, as far as they concern points."""
    tree = json.loads(export(run_fieldbook, published, tmp_path / "r.geojson"))
    assert tree["type"] == "FeatureCollection"
    assert "crs" not in tree
    assert not {"coordinates", "geometries", "geometry", "properties"} & set(tree)  # 7.1
    assert isinstance(tree["features"], list)
    for feature in tree["features"]:
        assert feature["type"] == "Feature"
        assert {"geometry", "properties"} <= set(feature)
        assert not {"coordinates", "geometries", "features"} & set(feature)
        assert isinstance(feature["id"], str | int)
        geometry = feature["geometry"]
        assert set(geometry) == {"type", "coordinates"}
        assert geometry["type"] == "Point"
        position = geometry["coordinates"]
        assert len(position) in (2, 3)
        assert -180 <= position[0] <= 180
        assert -90 <= position[1] <= 90
        properties = feature["properties"]
        assert position[0] == pytest.approx(properties["lon_deg"], abs=1e-9)  # longitude first
        assert properties["frame"] == "EPSG:7843"
        assert "maps only" in properties["geometry_is"]
    assert tree["features"][0]["properties"]["name"] == NASTY


def test_kml_is_for_orientation_only(published: Register, tmp_path: Path, run_fieldbook: Call) -> None:
    root = ET.fromstring(export(run_fieldbook, published, tmp_path / "r.kml"))  # noqa: S314 - our own
    space = {"k": "http://www.opengis.net/kml/2.2"}
    marks = root.findall(".//k:Placemark", space)
    assert [mark.findtext("k:name", None, space) for mark in marks] == [NASTY, 'B "2", south']
    lon, lat = marks[0].findtext(".//k:coordinates", "", space).split(",")
    assert len(lon.split(".")[1]) == len(lat.split(".")[1]) == 6
    assert "orientation only" in root.findtext(".//k:Document/k:description", "", space)


def test_today_says_that_it_is_not_published(published: Register, tmp_path: Path, run_fieldbook: Call) -> None:
    said = run_fieldbook("register", "export", published.path, "--out", tmp_path / "in.csv")
    assert "1 marks are not in it" in said.err
    text = export(run_fieldbook, published, tmp_path / "t.csv", "--today").decode()
    rows = list(csv.DictReader(io.StringIO(text, newline="")))
    assert [row["mark"] for row in rows] == ["1", "2", "3"]
    assert {row["status"] for row in rows} == {"not published"}
    assert {row["number"] for row in rows} == {""}


def test_slips(published: Register, tmp_path: Path, run_fieldbook: Call) -> None:
    call = ("register", "export", published.path)
    for out in ("a.xml", "a.pdf", "a.docx", "a"):
        assert run_fieldbook(*call, "--out", tmp_path / out).code == 2
    assert run_fieldbook(*call).code == 2
    assert run_fieldbook(*call, "--out", tmp_path / "a.kml", "--for", "people").code == 2
    (tmp_path / "there.csv").write_text("mine")
    assert run_fieldbook(*call, "--out", tmp_path / "there.csv").code == 2
    assert (tmp_path / "there.csv").read_text() == "mine"
    assert run_fieldbook(*call, "--out", tmp_path / "there.csv", "--replace").code == 0
    columns = run_fieldbook(*call, "--columns").out
    assert all(name in columns for name in COLUMNS)
