"""Marks in and out as CSV: every slip is named, and either all rows are written or none."""

from __future__ import annotations

from pathlib import Path

import pytest


def write(tmp_path: Path, text: str) -> Path:
    path = tmp_path / "marks.csv"
    path.write_text(text, encoding="utf-8")
    return path


def test_import_list_export(tmp_path, book, fieldbook) -> None:
    csv = write(tmp_path, 'name,description,lat_deg,lon_deg\nA1,"post, iron",-10.5,20\nB1,,,\n')
    said = fieldbook("marks", "import", book, csv, "--by", "Q. Lane", "--json")
    assert said.code == 0
    assert [row["name"] for row in said.json["written"]] == ["A1", "B1"]
    listed = fieldbook("marks", "list", book, "--json").json["marks"]
    assert [mark["name"] for mark in listed] == ["A1", "B1", "KR-07"]
    assert listed[0]["approximate"] == {"lat_deg": "-10.5", "lon_deg": "20"}
    out = tmp_path / "out.csv"
    assert fieldbook("marks", "export", book, "--out", out).code == 0
    assert 'A1,,"post, iron",,,,-10.5,20' in out.read_text(encoding="utf-8")
    assert fieldbook("marks", "export", book, "--out", out).code == 2, "an existing file is not written over"
    again = fieldbook("marks", "import", book, out, "--by", "Q. Lane", "--json")
    assert again.json["written"] == [], "what is exported is what was imported"
    assert again.json["unchanged"] == 3


def test_a_differing_mark_is_changed_only_when_asked(tmp_path, book, fieldbook) -> None:
    csv = write(tmp_path, "name,condition\nNEW,good\nKR-07,loose\n")
    said = fieldbook("marks", "import", book, csv, "--by", "Q")
    assert said.code == 2
    assert "KR-07" in said.err
    assert len(fieldbook("marks", "list", book, "--json").json["marks"]) == 1, "nothing was written"
    assert fieldbook("marks", "import", book, csv, "--by", "Q", "--update").code == 0
    mark = fieldbook("marks", "list", book, "--json").json["marks"][0]
    assert (mark["condition"], mark["description"]) == ("loose", "brass plate in rock"), "other keys stay"


@pytest.mark.parametrize(
    ("text", "fragment"),
    [
        ("nme,description\nA,b\n", '"name"'),
        ("name,lat_deg\nA,b\n", "lon_deg"),
        ("name,lat_deg,lon_deg\nA,95,1\n", "line 2: lat_deg 95"),
        ("name,lat_deg,lon_deg\nA,1,x\n", "needs a number"),
        ("name\nA\n,\n", "more fields"),
        ("name,id\nA,1\n,2\n", "line 3: the mark has no name"),
        ("name\n", "holds no mark"),
        ("", "no column name"),
        ('name\n"A\n', "CSV"),
    ],
)
def test_a_slip_in_the_file_is_named(tmp_path, book, fieldbook, text: str, fragment: str) -> None:
    said = fieldbook("marks", "import", book, write(tmp_path, text), "--by", "Q")
    assert said.code == 2
    assert fragment in said.err
    assert len(fieldbook("marks", "list", book, "--json").json["marks"]) == 1


def test_text_of_a_book_cannot_steer_the_terminal(tmp_path, book, fieldbook) -> None:
    csv = write(tmp_path, "name,description\nX,\x1b[2J\x07 and \u202eback\n")
    assert fieldbook("marks", "import", book, csv, "--by", "Q").code == 0
    said = fieldbook("marks", "list", book)
    assert "\\x1b[2J\\x07 and \\u202eback" in said.out
    assert "\x1b" not in said.out
    assert "\x1b" not in fieldbook("marks", "list", book, "--json").out


def test_missing_files(tmp_path, book, fieldbook) -> None:
    assert fieldbook("marks", "list", tmp_path / "none.book").code == 2
    assert fieldbook("marks", "import", book, tmp_path / "none.csv", "--by", "Q").code == 2
    (tmp_path / "text.book").write_text("no book")
    assert fieldbook("marks", "list", tmp_path / "text.book").code == 4


def test_positions_in_any_form(tmp_path, book, fieldbook) -> None:
    csv = write(
        tmp_path,
        "name;position\nA;23°40′12.41″ S 133°53′07.88″ E\nB;EPSG:7855 E 273741.297 N 5796489.777\nC;-42.16781 gon, 160.4720 gon\n",
    )
    assert fieldbook("marks", "import", book, csv, "--by", "Q").code == 0
    places = {
        mark["name"]: mark.get("approximate") for mark in fieldbook("marks", "list", book, "--json").json["marks"]
    }
    assert places["A"] == {"lat_deg": "-23.67011389", "lon_deg": "133.88552222"}
    assert places["B"] == {"lat_deg": "-37.95103342", "lon_deg": "144.42486789"}
    assert places["C"] == {"lat_deg": "-37.95102900", "lon_deg": "144.42480000"}


def test_a_position_is_refused_at_its_character(tmp_path, book, fieldbook) -> None:
    csv = write(tmp_path, "name;position\nA;23 61 12 S 133 53 7 E\n")
    said = fieldbook("marks", "import", book, csv, "--by", "Q")
    assert said.code == 2
    lines = said.err.splitlines()
    assert lines[0] == "  23 61 12 S 133 53 7 E"
    assert lines[1] == "     ^"
    assert "line 2: 61 minutes are 60 or more (character 4)" in lines[2]
    error = fieldbook("marks", "import", book, csv, "--by", "Q", "--json").json["error"]
    assert (error["typed"], error["column"]) == ("23 61 12 S 133 53 7 E", 3)
    twice = write(tmp_path, "name,lat_deg,lon_deg,position\nA,1,2,1 2\n")
    assert "given twice" in fieldbook("marks", "import", book, twice, "--by", "Q").err
