"""`register check`: what is not in order is listed, and nothing else; exit 1 when anything is found."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import pytest

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.issuing import issue
from fieldbook.model.canonical import fixed
from fieldbook.register import decisions
from fieldbook.register.checks import check_register
from fieldbook.register.classes import OfficeClass
from fieldbook.register.evidence import Evidence
from fieldbook.register.store import Register

from .conftest import Call
from .made import OFFICE, add, book_id, occupied

WHO = {"by": OFFICE, "reason": "seen on site"}


def codes(register: Register, classes=()) -> list[str]:
    return [item.code for item in check_register(register, classes)]


@pytest.fixture
def sound(base: Evidence) -> list[Evidence]:
    """Two occupations a day apart, set up anew, without anything against them."""
    again = occupied(base, 2, hours=30.0, arp_m=(base.antenna_height_m or 0.0) + 0.1)
    return [replace(item, stops=()) for item in (occupied(base), again)]


def test_a_mark_in_order_gives_nothing(register: Register, sound: list[Evidence], run_fieldbook: Call) -> None:
    add(register, 0, sound)
    assert check_register(register) == []
    said = run_fieldbook("register", "check", register.path, "--json")
    assert (said.code, said.json["in_order"], said.json["found"]) == (0, True, [])


def test_what_is_found(register: Register, sound: list[Evidence], run_fieldbook: Call) -> None:
    first, second = sound
    add(register, 0, sound)
    add(register, 1, [replace(first, mark="ONE")])  # same log, same place, other name
    far = occupied(base := first, mark="WIDE", enu_m=(400.0, 0.0, 0.0))
    add(register, 2, [replace(far, height=None, measured_u95_m=(3.0, 5.0))])
    add(register, 3, [replace(occupied(base, mark="OPEN", enu_m=(800.0, 0.0, 0.0)), open=True)])
    tie = occupied(second, 3, mark="TIE", enu_m=(1200.0, 0.0, 0.0))
    add(register, 4, [tie, occupied(tie, 4, mark="TIE", enu_m=(0.3, 0.0, 0.0), hours=40.0)])
    add(register, 5, [], marks={"NEVER": {}})
    found = check_register(register)
    by_mark = {name: sorted(item.code for item in found if item.name == name) for name in {i.name for i in found}}
    assert by_mark["KR-07"] == ["open_question"]
    assert by_mark["ONE"] == ["one_occupation", "requirement_not_met"]
    assert {"no_geoid_height", "one_occupation"} <= set(by_mark["WIDE"])
    assert by_mark["OPEN"] == ["no_coordinate", "occupation_open"]
    assert "occupations_disagree" in by_mark["TIE"]
    assert by_mark["NEVER"] == ["no_coordinate"]
    assert found[0].severity == "stop"
    assert run_fieldbook("register", "check", register.path).code == 1


def test_classes_not_met(register: Register, sound: list[Evidence]) -> None:
    add(register, 0, sound)
    met = OfficeClass("B", horizontal_datum_95_m=1.0)
    missed = OfficeClass("A", horizontal_datum_95_m=0.001)
    assert codes(register, [missed, met]) == []
    (item,) = check_register(register, [missed])
    assert item.code == "class_not_met"
    assert "horizontal_datum_95_m" in item.text


def test_frames_mixed(register: Register, sound: list[Evidence]) -> None:
    from .test_combining import in_gda94

    add(register, 0, sound)
    others = [
        occupied(item, item.occupation, mark="B", enu_m=(700.0, 0.0, 0.0), arp_m=item.antenna_height_m)
        for item in sound
    ]
    second = replace(others[1], started=sound[1].started, ended=sound[1].ended)
    add(register, 1, [in_gda94(others[0]), in_gda94(second)])
    assert codes(register) == ["frames_mixed"]
    decisions.decide_frame(register, "EPSG:7843", None, **WHO)
    assert codes(register) == []


def certificate(item: Evidence, book: str, **change) -> dict:
    """As a book's entry lists it."""
    place = item.place
    client = {
        "frame": place.frame,
        "epoch": None,
        "lat_deg": fixed(place.lat_deg, 12),
        "lon_deg": fixed(place.lon_deg, 12),
        "h_m": fixed(place.h_m, 6),
    }
    return {
        "number": f"{book[:8]}-1", "mark": item.mark, "occupation": item.occupation, "occupations": None, "digest": "0",
        "supersedes": None, "issued_utc": "2027-03-05T00:00:00.000Z", "seq": 9, "hash": "0", "client": client, **change,
    }  # fmt: skip


def test_certificates_that_no_longer_match(register: Register, sound: list[Evidence]) -> None:
    one, book = sound[0], book_id(0)
    paper = certificate(one, book)
    add(register, 0, sound, certificates=[paper])
    assert codes(register) == []
    # a height was corrected afterwards: 12 mm
    add(register, 0, [replace(occupied(one, enu_m=(0.0, 0.0, 0.012))), sound[1]], certificates=[paper])
    (item,) = check_register(register)
    assert (item.code, item.severity) == ("certificate_differs", "stop")
    assert "12.0 mm away" in item.text
    # issued again, superseding: nothing to say any more
    again = certificate(
        occupied(one, enu_m=(0.0, 0.0, 0.012)), book, number=f"{book[:8]}-2", supersedes=f"{book[:8]}-1"
    )
    add(register, 0, [occupied(one, enu_m=(0.0, 0.0, 0.012)), sound[1]], certificates=[paper, again])
    assert codes(register) == []
    # the occupation was struck
    add(register, 0, [sound[1]], certificates=[paper, again])
    assert "certificate_differs" in codes(register)


def test_a_real_certificate_of_a_combined_mark_matches(
    sample_books: dict[str, Path], tmp_path: Path, run_fieldbook: Call
) -> None:
    import shutil

    book = Path(shutil.copy(sample_books["kestrel-ridge"], tmp_path / "k.book"))
    with Book.open(book, clock=SystemClock(), write=True) as opened:
        issue(opened, "KR-07", tmp_path / "k.json", occupation=None, sign_off="A. Marlow; licence 4411")
    register = tmp_path / "office.register"
    assert run_fieldbook("register", "add", register, book, "--by", OFFICE).code == 0
    found = run_fieldbook("register", "check", register, "--json").json["found"]
    assert [item for item in found if item["code"] == "certificate_differs"] == []
    with Register.open(register, clock=SystemClock()) as opened_register:
        (held,) = opened_register.state().books.values()
        assert [item["occupation"] for item in held.certificates] == [None]
        assert held.certificates[0]["client"]["frame"] == "EPSG:7843"
