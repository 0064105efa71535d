"""`fieldbook frames`: found, shown, asked; as text and as JSON; from a typed place and from a book's own."""

from __future__ import annotations

import pytest

AT = ("--at", "-34.27 146.05")


def test_search(fieldbook) -> None:
    said = fieldbook("frames", "search", "gda", *AT, "--json")
    assert said.code == 0
    assert said.json["schema"] == "fieldbook.frames/1"
    assert [item["code"] for item in said.json["frames"]] == ["EPSG:7843", "EPSG:4939"]
    assert said.json["frames"][0]["kind"] == "static"
    assert set(said.json["frames"][0]) == {"code", "name", "kind", "area", "bounds_deg"}
    assert "EPSG:7843   GDA2020" in fieldbook("frames", "search", "gda").out
    nothing = fieldbook("frames", "search", "xyzzy")
    assert nothing.code == 0
    assert nothing.out == ""
    assert "No frame fits" in nothing.err


def test_grids(fieldbook) -> None:
    said = fieldbook("frames", "search", "--grids", "EPSG:7843", *AT, "--json")
    assert "EPSG:7855" in [item["code"] for item in said.json["grids"]]
    assert fieldbook("frames", "search", "mga", "--grids", "EPSG:7843", *AT).out.split()[0] == "EPSG:7855"
    assert fieldbook("frames", "search", "--grids", "EPSG:7843").code == 2


def test_show(fieldbook) -> None:
    said = fieldbook("frames", "show", "EPSG:7912", "EPSG:7843", *AT, "--epoch", "2027.2", "--json")
    assert said.code == 0
    pair = said.json["pair"]
    assert set(pair) == {
        "receiver", "client", "epoch", "operation", "refused", "effect_enu_mm", "change_enu_mm_per_year",
        "missing_grids", "considered", "warnings",
    }  # fmt: skip
    assert pair["epoch"] == 2027.2
    assert pair["operation"]["steps"] == [{"code": "EPSG:8049", "name": "ITRF2014 to GDA2020 (1)", "accuracy_m": 0.03}]
    assert pair["refused"] is None
    text = fieldbook("frames", "show", "EPSG:7912", "EPSG:7843", *AT, "--epoch", "2027.2").out
    assert "operation EPSG:8049" in text
    assert "effect    E -" in text
    moved = fieldbook("frames", "show", "EPSG:9989", "EPSG:7912", *AT, "--client-epoch", "2020.0", "--json").json
    assert moved["pair"]["refused"]["code"] == "motion_unknown"
    stated = ("--client-epoch", "2020.0", "--epoch", "2027.2", "--plate", "ITRF2020 AUST", "--plate-sigma", "0.0003")
    moved = fieldbook("frames", "show", "EPSG:9989", "EPSG:7912", *AT, *stated, "--json").json["pair"]
    assert [step["code"] for step in moved["operation"]["steps"]] == ["motion:ITRF2020 AUST", "EPSG:9991 inverse"]
    assert moved["effect_enu_mm"][1] < -350
    nowhere = fieldbook(
        "frames", "show", "EPSG:9989", "EPSG:7912", *AT, *stated[:-3], "ITRF2020 ATLANTIS", *stated[-2:], "--json"
    )
    assert nowhere.json["pair"]["refused"]["code"] == "motion_bad"


def test_a_refusal_is_an_answer(fieldbook) -> None:
    said = fieldbook("frames", "show", "EPSG:9989", "EPSG:4977", "--at", "59.86 17.6 h 40")
    assert said.code == 0
    assert "refused   ITRF2020 to SWEREF99 needs eur_nkg_nkgrf17vel.tif" in said.out
    assert "not installed" in said.out


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (("show", "EPSG:7912", "EPSG:7843"), "at a place"),
        (("show", "EPSG:7912", *AT), "Two frames"),
        (("show", "EPSG:4326", "EPSG:7843", *AT), "not a geographic 3-D frame"),
        (("show", "EPSG:7912", "EPSG:7843", "--at", "34,27 146"), "comma between two digits"),
        (("search", *AT, "--book", "x.book"), "given twice"),
        (("search", "--book", "x.book"), "no book"),
        (("ask", "rtk"), "none of the answers"),
        (("show", "EPSG:9989", "EPSG:7912", *AT, "--plate", "AUST"), "a model, a plate and a standard uncertainty"),
    ],
)
def test_slips(fieldbook, arguments: tuple[str, ...], said: str) -> None:
    found = fieldbook("frames", *arguments)
    assert found.code == 2
    assert said in found.err


def test_a_book_knows_its_place_and_its_pair(sample_books, fieldbook) -> None:
    """The receiver's own position of the newest occupation and its day, without a reduction."""
    said = fieldbook("frames", "show", "--book", sample_books["kestrel-ridge"], "--json")
    assert said.code == 0
    place = said.json["place"]
    assert (place["lat_deg"], place["lon_deg"]) == pytest.approx((-34.2743, 146.0519), abs=1e-3)
    assert place["epoch"] == pytest.approx(2027.17, abs=0.01)
    assert said.json["pair"]["client"]["code"] == "EPSG:7843"


def test_a_book_without_a_place(book, fieldbook) -> None:
    said = fieldbook("frames", "show", "--book", book)
    assert said.code == 2
    assert "knows no place yet" in said.err
    assert fieldbook("entry", book, "mark", "--set", "name=KR-07", "--set", "approximate={lat_deg=-34.27, lon_deg=146.05}",
                     "--by", "Q").code == 0  # fmt: skip
    assert fieldbook("frames", "show", "--book", book).code == 0


def test_ask(fieldbook) -> None:
    listed = fieldbook("frames", "ask", "--json").json
    assert listed["question"] == "What corrects this receiver?"
    assert [item["kind"] for item in listed["answers"]] == [
        "none", "satellite", "own base on known mark", "own base on unknown mark", "network",
    ]  # fmt: skip
    text = fieldbook("frames", "ask")
    assert "5  a network" in text.out
    found = fieldbook("frames", "ask", "network", *AT, "--json").json["answer"]
    assert any("in writing" in item for item in found["ask"])
    assert found["plausible"][0]["code"] == "EPSG:9308"
    assert fieldbook("frames", "ask", "5", *AT).out == fieldbook("frames", "ask", "network", *AT).out
    assert 'receiver = "EPSG:...."' in fieldbook("frames", "ask", "network").out
