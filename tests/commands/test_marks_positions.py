"""Coordinates of a reduced mark in every form."""

from __future__ import annotations

import json

from fieldbook.reduce.frames import located
from fieldbook.reduce.geodesy import enu_difference
from fieldbook.settings.coordinates import parse_position


def test_every_form_says_the_same_place(sample_books, run_fieldbook) -> None:
    """Read back, all forms lie within the printed digit of the reduction's own unrounded figures (0.1 mm digits of
    1 mm: 2 mm allowed)."""
    book = sample_books["kestrel-ridge"]
    reduced = json.loads(run_fieldbook("reduce", book, "--json")[1])["marks"][0]
    client = reduced["client"]
    code, out, _ = run_fieldbook("marks", "coordinates", book, "KR-07", "--json")
    assert code == 0
    tree = json.loads(out)
    assert tree["schema"] == "fieldbook.coordinates/1"
    assert list(tree["forms"]) == ["degrees", "dms", "dm", "gon", "geocentric", "grid"]
    for key in ("horizontal95_m", "vertical95_m"):
        assert tree[key] == reduced["uncertainty_client"][key]
    place = (client["lat_deg"], client["lon_deg"], client["h_m"])
    for form, text in tree["forms"].items():
        lat, lon, h = located(parse_position(text), client["frame"])
        off = enu_difference(place, (lat, lon, h))
        assert abs(off).max() < 0.002, form


def test_one_form_and_another_grid(sample_books, run_fieldbook) -> None:
    book = sample_books["kestrel-ridge"]
    code, out, _ = run_fieldbook("marks", "coordinates", book, "KR-07", "--form", "grid", "--grid", "EPSG:16155")
    assert code == 0
    assert "EPSG:16155  E " in out
    assert "GDA2020 (EPSG:7843), static frame; 95 % 0.075 m in plan, 0.062 m in height" in out
    assert run_fieldbook("marks", "coordinates", book, "KR-07", "--form", "grid", "--grid", "EPSG:28355")[0] == 2
    assert run_fieldbook("marks", "coordinates", book, "NOWHERE")[0] == 2
