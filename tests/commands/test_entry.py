"""`entry` and `strike`: typed keys checked as in a session file, the nearest key named, seq and hash printed."""

from __future__ import annotations

from pathlib import Path

import pytest

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.settings.session import load_session


@pytest.fixture
def occupied(book: Path, session: Path) -> Path:
    """A book with one open occupation that nobody records."""
    tree = load_session(session).tree
    with Book.open(book, clock=SystemClock(), write=True) as opened:
        body = {"occupation": 1, "mark": "KR-07", "session": tree, "link": "tcp://h.invalid:1", "simulated": False}
        opened.append("occupation", body, "R. Kell")
    return book


def folded(path: Path):
    with Book.open(path, clock=SystemClock()) as opened:
        return opened.state()


def test_a_height_reading_is_kept_as_typed(occupied, fieldbook) -> None:
    said = fieldbook(
        *("entry", occupied, "height", "--by", "M. Orr", "--json"),
        *("--set", "method=vertical", "--set", "value=1.4950", "--set", "unit=m", "--set", "when=after"),
    )
    assert said.code == 0, said.err
    assert said.json["body"]["value"] == "1.4950"
    reading = folded(occupied).occupations[1].heights[-1]
    assert (reading.method, reading.when, str(reading.value), reading.seq) == (
        "vertical",
        "after",
        "1.4950",
        said.json["seq"],
    )


def test_a_rod_and_a_tape_with_an_offset(occupied, fieldbook) -> None:
    by = ("--by", "M. Orr")
    assert fieldbook("entry", occupied, "setup", "--set", "antenna.arp_above_mount_m=0.0", *by).code == 0
    for settings in (
        ("method=rod", "value=2.000", "unit=m", "when=before"),
        ("method=mount", "value=6.530", "unit=ftUS", "tape_offset_m=0.0100", "when=after"),
    ):
        said = fieldbook("entry", occupied, "height", *by, *(part for item in settings for part in ("--set", item)))
        assert said.code == 0, said.err
    rod, mount = folded(occupied).occupations[1].heights[-2:]
    assert (rod.method, rod.tape_offset_m) == ("rod", None)
    assert (mount.method, mount.unit, mount.tape_offset_m) == ("mount", "ftUS", 0.01)


def test_text_output_is_seq_and_hash(occupied, fieldbook) -> None:
    said = fieldbook("entry", occupied, "remark", "--set", "text=wind from the west", "--by", "M. Orr")
    seq, digest = said.out.split()
    state = folded(occupied)
    assert (int(seq), digest) == (state.head_seq, state.head_hash)
    assert state.occupations[1].remarks[0].body["text"] == "wind from the west"


@pytest.mark.parametrize(
    ("kind", "settings", "fragments"),
    [
        ("height", ["methd=slant"], ['"methd"', '"method"']),
        ("height", ["method=slant"], ["value is missing"]),
        ("height", ["method=slant", "value=1.5", "unit=feet", "when=after"], ["'ft'"]),
        ("height", ["method=slant", "value=x", "unit=m", "when=after"], ["needs a number"]),
        ("height", ["method=mount", "value=1.5", "unit=m", "when=after"], ["arp_above_mount_m", "0 where"]),
        ("height", ["method=slant", "value=1.5", "unit=m", "when=after", "tape_offset_m=9"], ["no offset of a tape"]),
        ("height", ["value"], ["key=value"]),
        ("height", ["value=1", "value=2"], ["twice"]),
        ("setup", ["antenna.seral=1"], ['"serial"']),
        ("setup", ["antena.serial=1"], ["antenna.serial"]),
        ("setup", ["height=1"], ["entry BOOK height"]),
        ("setup", [], ["changes nothing"]),
        ("setup", ["centring_sigma_m=-1"], ["above zero"]),
        ("setup", ["reported_point=mark"], ["receiver_height_m"]),
        ("mark", ["condition=good"], ["--set name"]),
        ("mark", ["nme=X"], ['"name"']),
        ("mark", ["name=X", "approximate.lat_deg=1"], ["approximate.lon_deg is missing"]),
        ("decision", ["date=2027-03-04"], ["reason"]),
        ("decision", ["reason=x"], ["exactly one"]),
        ("decision", ["reason=x", "date=4 March"], ["2027-03-04"]),
        ("decision", ["reason=x", "initialisation=2"], ["used"]),
        ("decision", ["reason=x", "initialistion=2", "used=false"], ['"initialisation"']),
        ("decision", ["reason=x", "rollover_weeks=0"], ["other than 0"]),
        ("decision", ["reason=x", "accuracy_over_limit=perhaps"], ["true or false"]),
        ("decision", ["reason=x", "not_met=minimum_time"], ['"minimum_time" is none', '"minimum_time_s"']),
        ("remark", ["txt=a"], ['"text"']),
        ("remark", [], ["needs a text"]),
        ("end", ["by=me"], ["takes no keys"]),
    ],
)
def test_slips_are_named_and_nothing_is_written(occupied, fieldbook, kind, settings, fragments) -> None:
    before = folded(occupied).head_seq
    given = [part for setting in settings for part in ("--set", setting)]
    said = fieldbook("entry", occupied, kind, *given, "--by", "M. Orr")
    assert said.code == 2
    for fragment in fragments:
        assert fragment in said.err
    assert folded(occupied).head_seq == before


def test_setup_changes_one_part_and_keeps_the_others(occupied, fieldbook) -> None:
    keys = (
        "--set",
        "tribrach_id=T-4",
        "--set",
        "antenna.arp_to_phase_centre_m.up=0.0900",
        "--set",
        "antenna.serial=0002",
    )
    assert fieldbook("entry", occupied, "setup", *keys, "--by", "M. Orr").code == 0
    antenna = folded(occupied).occupations[1].session.antenna
    assert (antenna.arp_to_phase_centre_up_m, antenna.arp_to_phase_centre_north_m) == (0.09, 0.0005)
    assert antenna.serial == "0002"
    assert folded(occupied).occupations[1].session.setup.tribrach_id == "T-4"


@pytest.mark.parametrize(
    ("keys", "attribute", "value"),
    [
        (["date=2027-03-04"], "day0_source", "decision"),
        (["rollover_weeks=1024"], "rollover_weeks", 1024),
        (["datum=999"], "datum_confirmed", "999"),
        (["initialisation=2", "used=false"], "initialisation_decisions", {2: (False, "why")}),
        (["operation=EPSG:9991 inverse,EPSG:8049"], "operation", ["EPSG:9991 inverse", "EPSG:8049"]),
        (["accuracy_over_limit=true"], "accuracy_over_limit", True),
        (["outside_area=true"], "outside_area_accepted", True),
    ],
)
def test_decisions_reach_the_state(occupied, fieldbook, keys, attribute, value) -> None:
    given = [part for key in keys for part in ("--set", key)]
    assert fieldbook("entry", occupied, "decision", *given, "--set", "reason=why", "--by", "M. Orr").code == 0
    assert getattr(folded(occupied).occupations[1], attribute) == value


def test_strike_and_strike_of_a_strike(occupied, fieldbook) -> None:
    seq = fieldbook("entry", occupied, "remark", "--set", "text=x", "--by", "A", "--json").json["seq"]
    said = fieldbook("strike", occupied, seq, "--reason", "wrong mark", "--by", "B", "--json")
    assert said.code == 0
    assert folded(occupied).occupations[1].remarks == []
    assert fieldbook("strike", occupied, seq, "--reason", "again", "--by", "B").code == 2
    assert fieldbook("strike", occupied, said.json["seq"], "--reason", "was right", "--by", "B").code == 0
    assert len(folded(occupied).occupations[1].remarks) == 1


def test_what_a_machine_wrote_cannot_be_struck(occupied, fieldbook) -> None:
    said = fieldbook("strike", occupied, 1, "--reason", "x", "--by", "B")
    assert said.code == 2
    assert "cannot be struck" in said.err
    assert fieldbook("strike", occupied, 999, "--reason", "x", "--by", "B").code == 2
    assert fieldbook("strike", occupied, 3, "--reason", " ", "--by", "B").code == 2


def test_an_open_occupation_is_not_struck_under_its_recorder(occupied, fieldbook) -> None:
    seq = folded(occupied).occupations[1].entry_seq
    said = fieldbook("strike", occupied, seq, "--reason", "wrong mark", "--by", "B")
    assert said.code == 2
    assert "open" in said.err
    assert fieldbook("entry", occupied, "end", "--by", "B").code == 0
    assert fieldbook("strike", occupied, seq, "--reason", "wrong mark", "--by", "B").code == 0
    assert folded(occupied).occupations == {}
