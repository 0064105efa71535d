"""The pack behind a number: digests, readings, rules met and not met, revisions, who signed, what was decided since."""

from __future__ import annotations

import json
import shutil
from pathlib import Path

import pytest

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.issuing import issue

from .conftest import Call
from .made import OFFICE

SIGN_OFF = "A. Marlow; licence 4411"


@pytest.fixture
def certified(sample_books: dict[str, Path], tmp_path: Path) -> Path:
    """The first sample with a certificate and its revision: an entry changed what it says."""
    path = Path(shutil.copy(sample_books["kestrel-ridge"], tmp_path / "k.book"))
    with Book.open(path, clock=SystemClock(), write=True) as book:
        issue(book, "KR-07", tmp_path / "k1.json", occupation=1, sign_off=SIGN_OFF)
        book.append("mark", {**book.state().marks["KR-07"], "condition": "edge worn"}, "R. Kell")
        issue(book, "KR-07", tmp_path / "k2.json", occupation=1, sign_off=SIGN_OFF, supersede="condition corrected")
    return path


def test_the_pack_of_a_certificate(certified: Path, tmp_path: Path, run_fieldbook: Call) -> None:
    register = tmp_path / "office.register"
    assert run_fieldbook("register", "add", register, certified, "--by", OFFICE).code == 0
    with Book.open(certified, clock=SystemClock()) as book:
        state = book.state()
        received = state.occupations[1].received_sha256
    number = f"{state.id[:8]}-1"
    label = f"{state.id[:8]}/1"
    assert (
        run_fieldbook("register", "decide", register, "exclude", label, "--by", OFFICE, "--reason", "disputed").code
        == 0
    )
    pack = run_fieldbook("register", "dispute", register, number, "--json").json
    assert [item["number"] for item in pack["certificates"]] == [f"{state.id[:8]}-1", f"{state.id[:8]}-2"]
    assert pack["certificates"][0]["superseded_by"] == f"{state.id[:8]}-2"
    assert pack["certificates"][0]["sign_off"]["name"] == "A. Marlow"
    assert pack["certificates"][1]["reason"] == "condition corrected"
    (one,) = pack["occupations"]
    assert (one["occupation"], one["held"], one["received_sha256"]) == (label, True, received)
    reduced = run_fieldbook("reduce", certified, "--json").json["reductions"][0]
    assert one["antenna"] == reduced["antenna"]
    lines = reduced["leave"]["lines"]
    assert one["rules_met"] == [line for line in lines if line["met"]]
    assert one["rules_not_met"] == [line for line in lines if not line["met"]]
    assert one["findings"] == reduced["findings"]
    assert [item["kind"] for item in pack["decisions"]] == ["exclude"]
    assert pack["books"][0]["states"][0]["by"] == OFFICE
    assert pack["not_in_it"]


def test_the_pack_of_a_published_value_survives_a_strike(certified: Path, tmp_path: Path, run_fieldbook: Call) -> None:
    register = tmp_path / "office.register"
    who = ("--by", OFFICE, "--reason", "list")
    run_fieldbook("register", "add", register, certified, "--by", OFFICE)
    said = run_fieldbook("register", "publish", register, "KR-07", *who, "--json").json["marks"][0]
    with Book.open(certified, clock=SystemClock(), write=True) as book:
        book.append("strike", {"seq": book.state().occupations[2].entry_seq, "reason": "wrong mark"}, "R. Kell")
    assert run_fieldbook("register", "add", register, certified, "--by", OFFICE).code == 0
    out = tmp_path / "pack.json"
    assert run_fieldbook("register", "dispute", register, said["number"], "--out", out).code == 0
    pack = json.loads(out.read_text())
    assert [item["held"] for item in pack["occupations"]] == [True, False]
    assert pack["occupations"][1]["antenna"]["readings"]
    assert pack["published"][0]["number"] == said["number"]
    assert len(pack["books"][0]["states"]) == 2
    assert run_fieldbook("register", "dispute", register, said["number"], "--out", out).code == 2
    assert run_fieldbook("register", "dispute", register, "00000000-9").code == 2
