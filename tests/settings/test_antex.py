"""ANTEX 1.4: an invented file read to its last number, and every way it can be broken, with its line."""

from __future__ import annotations

from pathlib import Path

import pytest
from invented_antex import FILE, L1, OTHER, OWN, SATELLITE, TYPE_MEAN, WITH_DOME, Block, Frequency, antex, wavy

from fieldbook.model.calibration import split_model
from fieldbook.settings.antenna_source import choose_block, frozen
from fieldbook.settings.antex import AntexError, block_calibration, read_antex


def written(tmp_path: Path, text: str) -> Path:
    path = tmp_path / "invented.atx"
    path.write_text(text, encoding="ascii")
    return path


def test_header_and_antennas(tmp_path: Path) -> None:
    found = read_antex(written(tmp_path, FILE))
    assert (found.version, found.absolute, found.satellites) == ("1.4", True, 1)
    assert [(block.entry, block.type_field, block.serial) for block in found.blocks] == [
        (1, "DEMO-A1         NONE", ""),
        (2, "DEMO-A1         NONE", "0001"),
        (3, "DEMO-A1         DOME", ""),
        (4, "DEMO-B2/7       NONE", ""),
    ]
    lines = FILE.splitlines()
    for block in found.blocks:
        assert lines[block.line - 1].strip() == "START OF ANTENNA"
        assert block.text.splitlines()[0].strip() == "START OF ANTENNA"


def test_every_value_in_metres(tmp_path: Path) -> None:
    block = read_antex(written(tmp_path, FILE)).blocks[0]
    found = block_calibration(block.text)
    assert (found.antenna, found.radome, found.serial, found.model) == ("DEMO-A1", "NONE", "", "DEMO-A1 NONE")
    assert (found.method, found.agency, found.individuals, found.date) == ("ROBOT", "Hollow Oak Lab", 3, "12-FEB-26")
    assert found.zenith_deg == tuple(5.0 * index for index in range(19))
    first, second = found.frequencies
    assert (first.code, second.code) == ("G01", "G02")
    assert first.offset_neu_m == pytest.approx((0.0005, -0.0003, 0.0873), abs=1e-12)
    assert first.azimuths_deg == tuple(30.0 * index for index in range(13))
    assert len(first.noazi_m) == 19
    for row, azimuth in enumerate(first.azimuths_deg):
        for column, zenith in enumerate(found.zenith_deg):  # printed to 0.01 mm
            assert first.grid_m[row][column] == pytest.approx(wavy(zenith, azimuth) / 1000, abs=5.1e-6)


def test_a_block_without_azimuths_and_with_validity() -> None:
    block = Block(
        "DEMO-C",
        "NONE",
        (L1,),
        valid=("  2026     1     1     0     0    0.0000000", "  2027    12    31    23    59   59.9999999"),
    )
    found = block_calibration("\n".join(block.lines()))
    assert found.frequencies[0].grid_m == ()
    assert (found.valid_from, found.valid_until) == ("2026-01-01T00:00:00", "2028-01-01T00:00:00")


@pytest.mark.parametrize(
    ("text", "parts"),
    [
        ("DEMO-A1 NONE", ("DEMO-A1", "NONE")),
        ("DEMO-A1         NONE", ("DEMO-A1", "NONE")),
        ("DEMO-A1", ("DEMO-A1", "")),
        ("DEMO-A1         ", ("DEMO-A1", "")),
        ("DEMO LONG NAME 1DOME", ("DEMO LONG NAME 1", "DOME")),
        ("DEMO LONG NAME 1 DOME", ("DEMO LONG NAME 1", "DOME")),
    ],
)
def test_type_and_radome(text: str, parts: tuple[str, str]) -> None:
    assert split_model(text) == parts


# --- choosing ----------------------------------------------------------------------------------------------------


def test_own_calibration_before_the_mean_of_the_type(tmp_path: Path) -> None:
    found = read_antex(written(tmp_path, FILE))
    assert choose_block(found, "DEMO-A1 NONE", "0001").entry == 2
    assert choose_block(found, "DEMO-A1 NONE", "0002").entry == 1
    assert choose_block(found, "DEMO-A1         NONE", None).entry == 1


@pytest.mark.parametrize(
    ("model", "serial", "entry", "words"),
    [
        ("DEMO-A1", None, None, ["states no radome"]),
        ("DEMO-A1 SNOW", None, None, ["radome DOME, NONE", "not with SNOW"]),
        ("DEMO-B2/7 DOME", None, None, ["radome NONE", "not with DOME"]),
        ("DEMO-A2 NONE", None, None, ['no antenna "DEMO-A2"', '"DEMO-A1"']),
        ("INVENTED ORBITER NONE", None, None, ["no antenna"]),
        ("DEMO-A1 NONE", "0002", 2, ["serial 0001", "0002"]),
        ("DEMO-A1 NONE", None, 3, ["Entry 3", "entry 1, 2"]),
    ],
)
def test_nothing_is_taken_that_does_not_fit(
    tmp_path: Path, model: str, serial: str | None, entry: int | None, words: list[str]
) -> None:
    found = read_antex(written(tmp_path, FILE))
    with pytest.raises(AntexError) as caught:
        choose_block(found, model, serial, entry)
    for word in words:
        assert word in caught.value.text + " " + caught.value.remedy
    assert caught.value.remedy


def test_a_blank_radome_is_not_none(tmp_path: Path) -> None:
    found = read_antex(written(tmp_path, antex([Block("DEMO-D", "", (L1,))])))
    with pytest.raises(AntexError, match="radome not stated"):
        choose_block(found, "DEMO-D NONE", None)


def test_two_that_fit_are_a_question(tmp_path: Path) -> None:
    found = read_antex(written(tmp_path, antex([TYPE_MEAN, OTHER, TYPE_MEAN])))
    with pytest.raises(AntexError, match="entries 1, 3") as caught:
        choose_block(found, "DEMO-A1 NONE", None)
    assert "antex_entry" in caught.value.remedy
    assert choose_block(found, "DEMO-A1 NONE", None, 3).entry == 3


def test_only_individual_calibrations_of_others(tmp_path: Path) -> None:
    found = read_antex(written(tmp_path, antex([OWN])))
    with pytest.raises(AntexError, match="only for serial 0001"):
        choose_block(found, "DEMO-A1 NONE", "0002")


def test_relative_calibrations_are_refused(tmp_path: Path) -> None:
    found = read_antex(written(tmp_path, antex([TYPE_MEAN], kind="R", reference="DEMO-REF")))
    assert not found.absolute
    with pytest.raises(AntexError, match=r"relative calibrations \(against DEMO-REF\)") as caught:
        frozen(found, found.blocks[0])
    assert "absolute" in caught.value.remedy


# --- broken files ------------------------------------------------------------------------------------------------

GOOD = antex([TYPE_MEAN, WITH_DOME])


def replaced(old: str, new: str, which: int = 1) -> str:
    parts = GOOD.split(old)
    assert len(parts) > which
    return old.join(parts[:which]) + new + old.join(parts[which:])


def line_of(text: str, words: str) -> int:
    return next(number for number, line in enumerate(text.splitlines(), start=1) if words in line)


FIRST_NOAZI = next(line for line in GOOD.splitlines() if line.startswith("   NOAZI"))
BROKEN_FILE = {
    "web page": ("<!DOCTYPE html>\n<html></html>\n", "line 1: no ANTEX header"),
    "empty": ("", "header"),
    "version": (replaced("     1.4", "     2.0"), "line 1: ANTEX version"),
    "neither A nor R": (replaced("A" + 39 * " ", " " + 39 * " "), "line 2: PCV TYPE"),
    "no end of header": (replaced("END OF HEADER", "             "), "no header line"),
    "cut off": (GOOD[: len(GOOD) // 2], "does not end"),
    "start in start": (replaced("END OF ANTENNA", "              "), "does not end"),
    "stray line": (replaced("START OF ANTENNA", "                "), "outside any antenna"),
    "no type": (replaced("DEMO-A1         NONE", 20 * " "), "has no type"),
    "long line": (replaced("all of this", "all of this" + 5000 * "x"), "line 3: 50"),
}


@pytest.mark.parametrize("name", BROKEN_FILE)
def test_a_broken_file_names_its_line(tmp_path: Path, name: str) -> None:
    text, words = BROKEN_FILE[name]
    with pytest.raises(AntexError) as caught:
        read_antex(written(tmp_path, text))
    assert words in caught.value.text
    assert "invented.atx" in caught.value.text
    assert caught.value.remedy


BROKEN_BLOCK = {
    "short row": (FIRST_NOAZI, FIRST_NOAZI[:-8], "fewer than the 19"),
    "long row": (FIRST_NOAZI, FIRST_NOAZI + "    0.00", "more than the 19"),
    "no number": (FIRST_NOAZI, FIRST_NOAZI[:16] + "    x.xx" + FIRST_NOAZI[24:], "is no number"),
    "nan": (FIRST_NOAZI, FIRST_NOAZI[:16] + "     nan" + FIRST_NOAZI[24:], "out of all range"),
    "underscore": (FIRST_NOAZI, FIRST_NOAZI[:16] + "    1_00" + FIRST_NOAZI[24:], "is no number"),
    "kilometres": (FIRST_NOAZI, FIRST_NOAZI[:16] + " 99999.0" + FIRST_NOAZI[24:], "out of all range"),
    "no NOAZI": (FIRST_NOAZI + "\n", "", "lacks NOAZI"),
    "two NOAZI": (FIRST_NOAZI, FIRST_NOAZI + "\n" + FIRST_NOAZI, "NOAZI stands twice"),
    "no offset": ("      0.50     -0.30     87.30", 30 * " ", "NORTH is no number"),
    "offset lost": ("NORTH / EAST / UP", "COMMENT", "lacks NORTH / EAST / UP"),
    "other end": ("   G01" + 54 * " " + "END OF FREQUENCY", "   G02" + 54 * " " + "END OF FREQUENCY", "as another one"),
    "code": ("   G01" + 54 * " " + "START", "   G0x" + 54 * " " + "START", "no frequency code"),
    "same code": ("   G02" + 54 * " " + "START", "   G01" + 54 * " " + "START", "stands twice"),
    "azimuth": ("    60.0", "    61.0", "DAZI does not promise"),
    "dazi": ("    30.0", "    31.0", "does not divide the circle"),
    "zenith": ("     0.0  90.0   5.0", "     0.0  90.0   7.0", "no row of zenith angles"),
    "count": ("     2" + 54 * " ", "     3" + 54 * " ", "promises 3"),
    "unknown label": ("METH / BY / # / DATE", "METH / BY / # / DUTY", "no line of an antenna"),
}


@pytest.mark.parametrize("name", BROKEN_BLOCK)
def test_a_broken_block_names_its_line(tmp_path: Path, name: str) -> None:
    old, new, words = BROKEN_BLOCK[name]
    found = read_antex(written(tmp_path, replaced(old, new)))
    with pytest.raises(AntexError) as caught:
        frozen(found, found.blocks[0])
    assert words in caught.value.text
    assert "invented.atx, line " in caught.value.text
    assert caught.value.remedy


def test_the_line_of_an_error_is_that_of_the_file(tmp_path: Path) -> None:
    text = replaced(FIRST_NOAZI, FIRST_NOAZI[:16] + "    x.xx" + FIRST_NOAZI[24:])
    found = read_antex(written(tmp_path, text))
    with pytest.raises(AntexError, match=rf"line {line_of(text, 'x.xx')}: "):
        frozen(found, found.blocks[0])


def test_another_broken_antenna_does_not_close_the_file(tmp_path: Path) -> None:
    text = antex([TYPE_MEAN]) + antex([OTHER]).split("END OF HEADER\n")[1].replace("60.00", "6o.oo")
    found = read_antex(written(tmp_path, text))
    assert frozen(found, choose_block(found, "DEMO-A1 NONE", None))["file"] == "invented.atx"
    with pytest.raises(AntexError):
        frozen(found, choose_block(found, "DEMO-B2/7 NONE", None))


def test_missing_folder_and_binary(tmp_path: Path) -> None:
    with pytest.raises(AntexError, match="cannot be read"):
        read_antex(tmp_path / "none.atx")
    with pytest.raises(AntexError, match="cannot be read"):
        read_antex(tmp_path)
    path = tmp_path / "packed.atx"
    path.write_bytes(b"\x1f\x8b\x00\x00" * 100)
    with pytest.raises(AntexError, match="no text file"):
        read_antex(path)


def test_control_characters_of_a_comment_do_not_reach_the_session(tmp_path: Path) -> None:
    block = Block("DEMO-E", "NONE", (Frequency("G01", (0.0, 0.0, 50.0)),), comments=["caf" + "\x1b[2J"])
    path = written(tmp_path, antex([SATELLITE, block]))
    kept = frozen(read_antex(path), read_antex(path).blocks[0])
    assert "\x1b" not in kept["block"]
