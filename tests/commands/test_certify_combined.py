"""The certificate of a mark with several occupations, from the samples, as a script sees it."""

from __future__ import annotations

import gzip
import json
from pathlib import Path
from typing import Any

import pytest
from recorded_samples import SAMPLES, record_into

from fieldbook.commands import run

SIGNED = ("--sign-off", "M. Orrin; licence 4711")


@pytest.fixture(scope="module")
def book(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("combined") / "kestrel.fieldbook"
    for name in ("kestrel-ridge-1", "kestrel-ridge-2", "saltpan-1", "saltpan-2"):
        record_into(path, SAMPLES / name / "session.toml")
    return path


def certified(book: Path, out: Path, *options: str, capsys: pytest.CaptureFixture[str]) -> dict[str, Any]:
    capsys.readouterr()
    assert run(["certify", str(book), "KR-07", "--out", str(out), "--json", *options]) == 0, capsys.readouterr().err
    said: dict[str, Any] = json.loads(capsys.readouterr().out)
    return said


def test_the_combined_mark_has_its_own_certificate(book: Path, tmp_path: Path, capsys) -> None:
    """Number of its own beside that of one occupation; same facts again in another format; both verify; a changed
    reading needs a reason; the numbers printed are those of `reduce --json`."""
    whole = certified(book, tmp_path / "whole.json", *SIGNED, capsys=capsys)
    assert whole["draft"] is False
    single = certified(book, tmp_path / "one.json", "--occupation", "1", *SIGNED, capsys=capsys)
    assert single["number"] != whole["number"]
    again = certified(book, tmp_path / "whole.pdf", *SIGNED, capsys=capsys)
    assert (again["number"], again["digest"], again["again"]) == (whole["number"], whole["digest"], True)
    files = [str(tmp_path / name) for name in ("whole.json", "whole.pdf", "one.json")]
    assert run(["verify", *files, str(book)]) == 0, capsys.readouterr().out

    facts = json.loads((tmp_path / "whole.json").read_text(encoding="utf-8"))
    capsys.readouterr()
    assert run(["reduce", str(book), "--mark", "KR-07", "--json"]) == 0
    (mark,) = json.loads(capsys.readouterr().out)["marks"]
    assert float(facts["position"]["client"]["h_m"]) == pytest.approx(mark["client"]["h_m"], abs=1e-7)
    assert float(facts["position"]["client"]["lat_deg"]) == pytest.approx(mark["client"]["lat_deg"], abs=1e-12)
    assert float(facts["uncertainty"]["client"]["horizontal95_m"]) == pytest.approx(
        mark["uncertainty_client"]["horizontal95_m"], abs=1e-7
    )
    assert facts["combined"]["occupations"] == [1, 2]
    assert [item["occupation"]["number"] for item in facts["members"]] == [1, 2]
    assert all(item["setup"]["readings"] for item in facts["members"])
    assert facts["combined"]["repeats"][0]["grade"] == "independent"
    assert facts["job"]["observers"] == ["J. Ambrey", "R. Kell"]
    assert facts["missing"] == []


def test_the_text_holds_the_evidence_of_every_occupation(book: Path, tmp_path: Path, capsys) -> None:
    certified(book, tmp_path / "draft.txt", capsys=capsys)
    text = (tmp_path / "draft.txt").read_text(encoding="utf-8")
    for needed in (
        "OCCUPATIONS COMBINED",
        "OCCUPATION 1: SET-UP AND ANTENNA HEIGHT",
        "OCCUPATION 2: SET-UP AND ANTENNA HEIGHT",
        "no sign-off by a responsible surveyor",
        "Received bytes, occupation 2",
    ):
        assert needed in text
    assert "Not combined in this certificate" not in text


def test_a_changed_reading_needs_a_reason(book: Path, tmp_path: Path, capsys) -> None:
    """Another reading at occupation 2 changes the combined certificate; that of occupation 1 changes only its repeats."""
    certified(book, tmp_path / "before.json", *SIGNED, capsys=capsys)
    options = ["--occupation", "2", "--set", "method=vertical", "--set", "value=1.6050", "--set", "unit=m"]
    assert run(["entry", str(book), "height", *options, "--set", "when=after", "--by", "J. Ambrey"]) == 0
    out = tmp_path / "after.json"
    assert run(["certify", str(book), "KR-07", "--out", str(out), *SIGNED]) == 2
    assert "--supersede" in capsys.readouterr().err
    assert not out.exists()
    made = certified(book, out, *SIGNED, "--supersede", "one more reading", capsys=capsys)
    assert made["supersedes"]
    assert run(["verify", str(out), str(tmp_path / "before.json")]) == 0


def test_a_later_occupation_leaves_the_issued_certificate_right(tmp_path: Path, capsys) -> None:
    """A third occupation of the mark, a day later: the certificate of the first two is what they give, as before."""
    path = tmp_path / "later.fieldbook"
    for name in ("kestrel-ridge-1", "kestrel-ridge-2"):
        record_into(path, SAMPLES / name / "session.toml")
    certified(path, tmp_path / "two.json", *SIGNED, capsys=capsys)
    session = (SAMPLES / "kestrel-ridge-2" / "session.toml").read_text(encoding="utf-8")
    lines = gzip.decompress((SAMPLES / "kestrel-ridge-2" / "receiver.nmea.gz").read_bytes()).splitlines(keepends=True)
    part = tmp_path / "part"
    part.mkdir()
    (part / "session.toml").write_text(session.replace("receiver.nmea.gz", "receiver.nmea"), encoding="utf-8")
    moved = [line for line in lines if b"RMC" in line or b"GGA" in line][:240]
    (part / "receiver.nmea").write_bytes(b"".join(dated(line) for line in moved))
    assert record_into(path, part / "session.toml") == 3
    capsys.readouterr()
    assert run(["verify", str(tmp_path / "two.json"), str(path)]) == 0, capsys.readouterr().out


def dated(line: bytes) -> bytes:
    """The sentence one day later (RMC carries the date), with its checksum made anew."""
    body = line.strip()[1:].split(b"*")[0].replace(b",060327,", b",070327,")
    checksum = 0
    for byte in body:
        checksum ^= byte
    return b"$" + body + f"*{checksum:02X}\r\n".encode()


def test_what_cannot_be_combined_needs_a_number(book: Path, tmp_path: Path, capsys) -> None:
    out = tmp_path / "sp.json"
    assert run(["certify", str(book), "SP-12", "--out", str(out)]) == 2
    said = capsys.readouterr().err
    assert "cannot be combined" in said
    assert "--occupation" in said
    assert not out.exists()


def test_occupations_that_disagree_are_not_certified_together(tmp_path: Path, capsys) -> None:
    """An antenna 60 mm wrong in the second occupation, by a set-up entry."""
    path = tmp_path / "bust.fieldbook"
    for name in ("kestrel-ridge-1", "kestrel-ridge-2"):
        record_into(path, SAMPLES / name / "session.toml")
    change = ["--occupation", "2", "--set", "antenna.arp_to_phase_centre_m.up=0.1473", "--by", "J. Ambrey"]
    assert run(["entry", str(path), "setup", *change]) == 0, capsys.readouterr().err
    assert run(["certify", str(path), "KR-07", "--out", str(tmp_path / "x.json")]) == 2
    said = capsys.readouterr().err
    assert "disagree" in said
    assert "third time" in said
    capsys.readouterr()
    assert run(["certify", str(path), "KR-07", "--occupation", "1", "--out", str(tmp_path / "one.json")]) == 0
