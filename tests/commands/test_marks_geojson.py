"""Marks from and to GeoJSON; rules of RFC 7946 (sections 3.1.1, 3.2, 4: positions are longitude, latitude in WGS 84)."""

from __future__ import annotations

import json

import pyogrio
import pytest

ONE = {
    "type": "Feature",
    "geometry": {"type": "Point", "coordinates": [146.0518, -34.2743]},
    "properties": {"name": "KR-09", "description": "post, iron", "condition": None},
}


def written(tmp_path, *features, text=None):
    path = tmp_path / "marks.geojson"
    path.write_text(text or json.dumps({"type": "FeatureCollection", "features": list(features)}), encoding="utf-8")
    return path


def test_in_and_out_and_in_again(tmp_path, book, fieldbook) -> None:
    path = written(tmp_path, ONE, {"type": "Feature", "geometry": None, "properties": {"name": "KR-10", "id": 17}})
    said = fieldbook("marks", "import", book, path, "--by", "Q. Lane", "--json")
    assert said.code == 0, said.err
    assert [item["name"] for item in said.json["written"]] == ["KR-09", "KR-10"]
    marks = {item["name"]: item for item in fieldbook("marks", "list", book, "--json").json["marks"]}
    assert marks["KR-09"]["approximate"] == {"lat_deg": "-34.2743", "lon_deg": "146.0518"}
    assert marks["KR-10"]["id"] == "17"
    out = tmp_path / "out.geojson"
    assert fieldbook("marks", "export", book, "--out", out).code == 0
    again = fieldbook("marks", "import", book, out, "--by", "Q. Lane", "--json")
    assert again.json["written"] == [], "what is exported is what was imported"


def test_an_independent_library_reads_it(tmp_path, book, fieldbook) -> None:
    """pyogrio (GDAL): geometry, frame and attributes."""
    assert fieldbook("marks", "import", book, written(tmp_path, ONE), "--by", "Q").code == 0
    out = tmp_path / "out.geojson"
    assert fieldbook("marks", "export", book, "--out", out).code == 0
    meta, _, geometry, fields = pyogrio.raw.read(out)
    assert meta["crs"] in ("EPSG:4326", "OGC:CRS84")
    names = list(fields[list(meta["fields"]).index("name")])
    row = names.index("KR-09")
    assert fields[list(meta["fields"]).index("description")][row] == "post, iron"
    x, y = memoryview(geometry[row][5:21]).cast("d")
    assert (x, y) == (146.0518, -34.2743)


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("[" * 100_000, "nested too deeply"),
        ("{", "no JSON"),
        ('{"type": "FeatureCollection", "features": [NaN]}', "NaN is no number"),
        ('{"type": "FeatureCollection", "features": [' + "9" * 5000 + "]}", "no JSON"),
        ('{"type": "FeatureCollection", "features": []}', "holds 0 marks"),
        ('{"type": "Feature"}', "no GeoJSON FeatureCollection"),
        (json.dumps({"type": "FeatureCollection", "features": [7]}), "feature 1 is no Feature"),
    ],
)
def test_what_is_no_list_of_marks_is_refused(tmp_path, book, fieldbook, text, said) -> None:
    answer = fieldbook("marks", "import", book, written(tmp_path, text=text), "--by", "Q")
    assert answer.code == 2
    assert said in answer.err


@pytest.mark.parametrize(
    ("change", "said"),
    [
        ({"geometry": {"type": "Polygon", "coordinates": [[[0, 0]]]}}, "no Point"),
        ({"geometry": {"type": "Point", "coordinates": [1]}}, "no Point"),
        ({"geometry": {"type": "Point", "coordinates": [True, 1]}}, "no Point"),
        ({"geometry": {"type": "Point", "coordinates": [146.0, -91.0]}}, "not within 90 degrees"),
        ({"geometry": {"type": "Point", "coordinates": [1e300, 1.0]}}, "no Point"),
        ({"properties": {"nom": "KR-09"}}, 'no property "nom"'),
        ({"properties": {"name": ["KR-09"]}}, "neither text nor number"),
        ({"properties": {"description": "x"}}, "the mark has no name"),
    ],
)
def test_a_slip_names_the_feature(tmp_path, book, fieldbook, change, said) -> None:
    answer = fieldbook("marks", "import", book, written(tmp_path, {**ONE, **change}), "--by", "Q")
    assert answer.code == 2
    assert said in answer.err
    assert "feature 1" in answer.err
