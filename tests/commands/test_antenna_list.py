"""`fieldbook antenna`, and a whole reduction with an ANTEX file: frozen in the book, the same on another computer."""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest
from invented_antex import FILE, TYPE_MEAN, antex
from recorded_samples import SAMPLES

Call = object
OFFSET = "arp_to_phase_centre_m = { north = 0.0005, east = -0.0003, up = 0.0873 }\n"


@pytest.fixture
def file(tmp_path: Path) -> Path:
    path = tmp_path / "invented.atx"
    path.write_text(FILE, encoding="ascii")
    return path


@pytest.fixture(autouse=True)
def own_list(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("fieldbook.settings.antennas.antennas_folder", lambda: tmp_path / "antennas")


def test_add_from_a_file_list_and_show(file: Path, fieldbook) -> None:
    said = fieldbook(
        "antenna", "add", file, "--type", "DEMO-A1 NONE", "--serial", "0001", "--name", "demo",
        "--slant-radius-m", "0.1500", "--slant-mark-above-arp-m", "0.0300", "--arp-above-mount-m", "0.0",
        "--source", "drawing 7 (invented)",
    )  # fmt: skip
    assert said.code == 0, said.err
    assert 'antenna.listed = "demo"' in said.out
    file.unlink()
    assert (
        fieldbook("antenna", "list").out
        == "demo: DEMO-A1 NONE, serial 0001; calibration of invented.atx, slant, mount\n"
    )
    shown = fieldbook("antenna", "show", "demo").out
    for words in (
        "of serial 0001",
        "L1: north +0.0009, east -0.0001, up +0.0884 m",
        "phase centre L1: 0.0884 m above the ARP",
        "notch: 0.0300 m above the ARP, 0.1500 m from the axis",
        "sqrt(s^2 - 0.1500^2) - 0.0300",
        "drawing 7 (invented)",
    ):
        assert words in shown
    heights = [
        shown.index(words) for words in ("phase centre L2", "phase centre L1:", "notch:", "ARP, antenna", "mark\n")
    ]
    assert heights == sorted(heights), "drawn in their true order"
    assert shown.isascii()
    tree = fieldbook("antenna", "show", "demo", "--json").json
    assert tree["antenna"]["calibration"]["individual"] is True
    assert tree["antenna"]["calibration"]["offsets_neu_m"]["L2"][2] == pytest.approx(0.0921)


def test_typed_in(fieldbook) -> None:
    offset = ("--north-m", "0.0005", "--east-m", "-0.0003", "--up-m", "0.0873")
    said = fieldbook(
        "antenna", "add", "--type", "DEMO-A1 NONE", *offset, "--frequency", "L1", "--source", "sheet (invented)"
    )
    assert said.code == 0, said.err
    assert said.out.startswith("DEMO-A1-NONE: ")
    shown = fieldbook("antenna", "show", "DEMO-A1-NONE").out
    assert "phase centre (L1): 0.0873 m above the ARP" in shown
    assert "vertical readings only" in shown
    again = fieldbook("antenna", "add", "--type", "DEMO-A1 NONE", *offset, "--frequency", "L1", "--source", "x")
    assert again.code == 2
    assert "--replace" in again.err


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("--type", "DEMO-A1 NONE"), "Nothing is said"),
        (("--type", "DEMO-A1", "--arp-above-mount-m", "0"), "states no radome"),
        (("--type", "DEMO-A1 NONE", "--up-m", "0.08"), "needs --north-m"),
        (("--type", "DEMO-A1 NONE", "--slant-radius-m", "0.15"), "needs both"),
        (("--type", "DEMO-A1 NONE", "--slant-radius-m", "15 cm", "--slant-mark-above-arp-m", "0"), "no length"),
        (("FILE", "--type", "DEMO-A1 SNOW"), "not with SNOW"),
        (("FILE", "--type", "DEMO-A1 NONE", "--up-m", "0.08"), "either typed in or taken"),
        (("FILE", "--type", "DEMO-A1 NONE", "--name", "../x"), "no name"),
        (("missing.atx", "--type", "DEMO-A1 NONE"), "cannot be read"),
    ],
)
def test_slips(arguments: tuple[str, ...], words: str, file: Path, fieldbook) -> None:
    said = fieldbook("antenna", "add", *(file if item == "FILE" else item for item in arguments))
    assert said.code == 2
    assert words in said.err
    assert fieldbook("antenna", "list").out == ""


def test_list_of_a_file(file: Path, fieldbook) -> None:
    said = fieldbook("antenna", "list", file)
    assert "1 satellites left out" in said.err
    assert "absolute" in said.err
    assert [row.split() for row in said.out.splitlines()][1] == ["2", "DEMO-A1", "NONE", "serial", "0001"]
    assert [item["entry"] for item in fieldbook("antenna", "list", file, "--json").json["antennas"]] == [1, 2, 3, 4]
    file.write_text(antex([TYPE_MEAN], kind="R", reference="DEMO-REF"), encoding="ascii")
    assert "relative to DEMO-REF: not usable" in fieldbook("antenna", "list", file).err


# --- in a book ---------------------------------------------------------------------------------------------------


@pytest.fixture
def job(tmp_path: Path, file: Path) -> Path:
    """The second sample with an ANTEX calibration instead of the typed offset."""
    folder = tmp_path / "job"
    folder.mkdir()
    shutil.copy(file, folder)
    shutil.copy(SAMPLES / "kestrel-ridge-2" / "receiver.nmea.gz", folder)
    text = (SAMPLES / "kestrel-ridge-2" / "session.toml").read_text(encoding="utf-8")
    assert OFFSET in text
    text = text.replace(OFFSET, 'antex = "invented.atx"\nreceiver_applies = "nothing"\n')
    (folder / "session.toml").write_text(text.replace('serial = "0001"', 'serial = "0002"', 1), encoding="utf-8")
    return folder


def test_a_reduction_with_a_calibration_and_the_same_without_its_file(job: Path, fieldbook) -> None:
    book = job / "ridge.book"
    assert fieldbook("observe", book, "--session", job / "session.toml").code == 0
    first = fieldbook("reduce", book, "--json").json["reductions"][0]
    (job / "invented.atx").unlink()
    moved = job.parent / "elsewhere.book"
    shutil.copy(book, moved)
    second = fieldbook("reduce", moved, "--json").json["reductions"][0]
    assert first == second
    centre = first["antenna"]["phase_centre"]
    assert (centre["type"], centre["individual"], centre["frequency"]) == ("DEMO-A1 NONE", False, "L1")
    assert centre["pattern"]["sky"] == "recorded"
    assert centre["pattern"]["pictures"] >= 14
    assert abs(centre["pattern"]["shift_enu_m"][2]) > 0.0005
    lines = {line["source"]: line for line in first["uncertainty"]["budget"]}
    assert lines["phase centre of the antenna"]["u_enu_m"] == [0.001, 0.001, 0.002]
    assert "phase centre of the antenna: pattern" in lines
    assert "antenna_calibration" in [item["code"] for item in first["findings"]]
    assert fieldbook("verify", moved).code == 0


def test_the_mark_moves_by_offset_and_pattern_and_nothing_else(job: Path, fieldbook) -> None:
    """The same log with the typed offset of the same figures: the difference is the pattern's shift. 0.01 mm."""
    typed = job / "typed.toml"
    shutil.copy(SAMPLES / "kestrel-ridge-2" / "session.toml", typed)
    heights = {}
    for name, session in (("typed", typed), ("antex", job / "session.toml")):
        book = job / f"{name}.book"
        assert fieldbook("observe", book, "--session", session).code == 0
        heights[name] = fieldbook("reduce", book, "--json").json["reductions"][0]
    shift = heights["antex"]["antenna"]["phase_centre"]["pattern"]["shift_enu_m"]
    moved = heights["antex"]["receiver"]["h_m"] - heights["typed"]["receiver"]["h_m"]
    assert moved == pytest.approx(-shift[2], abs=1e-5)


def test_a_later_setup_entry_brings_the_calibration_in(job: Path, fieldbook, monkeypatch) -> None:
    typed = job / "typed.toml"
    shutil.copy(SAMPLES / "kestrel-ridge-2" / "session.toml", typed)
    book = job / "ridge.book"
    assert fieldbook("observe", book, "--session", typed).code == 0
    monkeypatch.chdir(job)
    said = fieldbook(
        "entry", book, "setup", "--set", "antenna.antex=invented.atx", "--set", "antenna.receiver_applies=nothing",
        "--set", "antenna.serial=0002", "--by", "R. Kell",
    )  # fmt: skip
    assert said.code == 0, said.err
    (job / "invented.atx").unlink()
    reduced = fieldbook("reduce", book, "--json").json["reductions"][0]
    assert reduced["antenna"]["phase_centre"]["file"] == "invented.atx"


def test_the_certificate_says_which_calibration(job: Path, fieldbook) -> None:
    book, out = job / "ridge.book", job / "KR-07.txt"
    assert fieldbook("observe", book, "--session", job / "session.toml").code == 0
    said = fieldbook("certify", book, "KR-07", "--out", out, "--sign-off", "A. Surveyor; licence 1")
    assert said.code == 0, said.err
    text = " ".join(out.read_text(encoding="utf-8").split())
    assert "invented.atx" in text
    assert "mean of the type" in text
    assert "Applied by the receiver itself" in text
    assert "Pattern taken off" in text
    assert "up 0.0873 m (L1)" in text, "the calibration's offset stands where a typed one would"
