"""Antenna, what the receiver applies and what it reports: frozen when read, contradictions refused, nothing assumed."""

from __future__ import annotations

from decimal import Decimal
from pathlib import Path

import pytest
from invented_antex import FILE

from fieldbook.errors import UsageError
from fieldbook.model.frequencies import combination
from fieldbook.settings.antennas import antenna_path, listed_antenna, listed_names, listed_text
from fieldbook.settings.session import load_session, session_from_tree

SAMPLE = (Path(__file__).parent / "contract_sample.toml").read_text(encoding="utf-8")
OFFSET = "arp_to_phase_centre_m = { north = 0.0005, east = -0.0003, up = 0.0873 }\n"
ANTEX = 'antex = "invented.atx"\nreceiver_applies = "nothing"\n'


def session_file(tmp_path: Path, *edits: tuple[str, str]) -> Path:
    text = SAMPLE.replace('serial = "0001"', 'serial = "0002"', 1)
    assert OFFSET in text
    text = text.replace(OFFSET, ANTEX)
    for old, new in edits:
        assert old in text, old
        text = text.replace(old, new, 1)
    (tmp_path / "invented.atx").write_text(FILE, encoding="ascii")
    path = tmp_path / "session.toml"
    path.write_text(text, encoding="utf-8")
    return path


def test_the_calibration_is_frozen_into_the_tree(tmp_path: Path) -> None:
    session = load_session(session_file(tmp_path))
    (tmp_path / "invented.atx").unlink()
    again = session_from_tree(session.tree)
    assert again == session
    assert again.antenna.calibration is not None
    assert again.antenna.calibration.calibration.model == "DEMO-A1 NONE"
    assert not again.antenna.calibration.calibration.individual
    assert len(session.tree["antenna"]["calibration"]["sha256"]) == 64


def test_own_calibration_by_serial(tmp_path: Path) -> None:
    session = load_session(session_file(tmp_path, ('serial = "0002"', 'serial = "0001"')))
    assert session.antenna.calibration is not None
    assert session.antenna.calibration.calibration.serial == "0001"


@pytest.mark.parametrize(
    ("edits", "words"),
    [
        ([('receiver_applies = "nothing"\n', "")], ["what the receiver applies", "offset and pattern"]),
        ([('receiver_applies = "nothing"', 'receiver_applies = "offset"')], ["reports the ARP or the mark"]),
        ([('reported_point = "phase centre"', 'reported_point = "ARP"')], ["reports the phase centre", '"ARP"']),
        ([('offset_frequency = "L1"\n', "")], ["which signals"]),
        ([('offset_frequency = "L1"', 'offset_frequency = "L5"')], ["has no G05", "G01, G02"]),
        ([('offset_frequency = "L1"', 'offset_frequency = "both"')], ["names no signals"]),
        ([('model = "DEMO-A1 NONE"', 'model = "DEMO-A1"')], ["states no radome"]),
        ([('model = "DEMO-A1 NONE"', 'model = "DEMO-A1 SNOW"')], ["not with SNOW"]),
        ([('antex = "invented.atx"', 'antex = "none.atx"')], ["cannot be read"]),
        ([('antex = "invented.atx"', "antex = 5")], ["antenna.antex"]),
        ([("[antenna]", "[antenna]\n" + OFFSET.replace("0.0873", "0.0893"))], ["up is typed as 0.0893", "0.0873"]),
    ],
)
def test_what_is_not_said_or_does_not_fit_is_refused(
    tmp_path: Path, edits: list[tuple[str, str]], words: list[str]
) -> None:
    with pytest.raises(UsageError) as caught:
        load_session(session_file(tmp_path, *edits))
    for word in words:
        assert word in caught.value.text + " " + caught.value.remedy
    assert caught.value.remedy


def test_a_typed_offset_that_agrees_may_stand_beside(tmp_path: Path) -> None:
    assert load_session(session_file(tmp_path, ("[antenna]", "[antenna]\n" + OFFSET))).antenna.calibration is not None


def test_a_stored_session_without_its_block_is_refused(tmp_path: Path) -> None:
    tree = load_session(session_file(tmp_path)).tree
    bare = {key: value for key, value in tree["antenna"].items() if key != "calibration"}
    with pytest.raises(UsageError, match="was not frozen"):
        session_from_tree({**tree, "antenna": bare})


def test_another_model_does_not_keep_the_calibration(tmp_path: Path) -> None:
    tree = load_session(session_file(tmp_path)).tree
    for changed in ({"model": "DEMO-A1 DOME"}, {"model": "DEMO-B2/7 NONE"}):
        with pytest.raises(UsageError, match="the calibration is of"):
            session_from_tree({**tree, "antenna": {**tree["antenna"], **changed}})


@pytest.mark.parametrize(
    ("applies", "point", "good"),
    [
        ("nothing", "phase centre", True),
        ("pattern", "phase centre", True),
        ("offset", "phase centre", False),
        ("offset and pattern", "phase centre", False),
        ("nothing", "ARP", False),
        ("pattern", "ARP", False),
        ("offset", "ARP", True),
        ("offset and pattern", "ARP", True),
        ("offset and pattern", "mark", True),
        ("nothing", "mark", False),
    ],
)
def test_never_twice_and_never_not_at_all(tmp_path: Path, applies: str, point: str, good: bool) -> None:
    """The rule holds for typed offsets too, as soon as the key is stated."""
    path = tmp_path / "session.toml"
    text = SAMPLE.replace("[antenna]", f'[antenna]\nreceiver_applies = "{applies}"', 1)
    text = text.replace('reported_point = "phase centre"', f'reported_point = "{point}"\nreceiver_height_m = 1.5', 1)
    path.write_text(text, encoding="utf-8")
    if good:
        assert load_session(path).antenna.receiver_applies == applies
    else:
        with pytest.raises(UsageError, match="reports the"):
            load_session(path)


# --- the user's list ---------------------------------------------------------------------------------------------


def listed(name: str, **keys: object) -> None:
    path = antenna_path(name)
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text(listed_text({"model": "DEMO-A1 NONE", **keys}), encoding="utf-8")


@pytest.fixture(autouse=True)
def own_list(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("fieldbook.settings.antennas.antennas_folder", lambda: tmp_path / "antennas")


def test_a_listed_antenna_fills_what_the_session_leaves_out(tmp_path: Path) -> None:
    listed(
        "demo",
        slant_radius_m=Decimal("0.1500"),
        slant_mark_above_arp_m=Decimal("0.0300"),
        arp_to_phase_centre_m={"north": Decimal("0.0005"), "east": Decimal("-0.0003"), "up": Decimal("0.0873")},
        offset_frequency="L1",
        source="drawing 7 (invented)",
    )
    path = session_file(
        tmp_path,
        (ANTEX, 'listed = "demo"\n'),
        ("slant_radius_m = 0.1500\n", ""),
        ("slant_mark_above_arp_m = 0.0300\n", ""),
    )
    session = load_session(path)
    assert session.antenna.slant_radius_m == 0.15
    assert session.antenna.arp_to_phase_centre_up_m == 0.0873
    assert session.tree["antenna"]["slant_radius_m"] == "0.1500", "digits stay as typed"
    antenna_path("demo").unlink()
    assert session_from_tree(session.tree) == session


def test_a_listed_antenna_never_overrules_the_session(tmp_path: Path) -> None:
    listed("demo", slant_radius_m=Decimal("0.1905"), slant_mark_above_arp_m=Decimal("0.0300"))
    with pytest.raises(UsageError, match=r"slant_radius_m is 0\.1500 in the session and 0\.1905"):
        load_session(session_file(tmp_path, (ANTEX, 'listed = "demo"\n' + OFFSET)))


def test_names_of_the_list() -> None:
    listed("demo-1", slant_radius_m=Decimal("0.15"), slant_mark_above_arp_m=Decimal("0.03"))
    assert listed_names() == ["demo-1"]
    with pytest.raises(UsageError, match=r'no antenna "demo-2".*"demo-1"'):
        listed_antenna("demo-2")
    for name in ("../x", "", "a/b", "a\\b", "."):
        with pytest.raises(UsageError, match="no name"):
            antenna_path(name)


@pytest.mark.parametrize(
    "text",
    [
        "[antenna",
        "x = 1\n",
        "[antenna]\n",
        "[antenna]\nmodel = 'D NONE'\nslant = 1\n",
        "[antenna]\nmodel = 'D NONE'\ncalibration = 1\n",
    ],
)
def test_a_broken_file_of_the_list(text: str) -> None:
    listed("broken")
    antenna_path("broken").write_text(text, encoding="utf-8")
    with pytest.raises(UsageError) as caught:
        listed_antenna("broken")
    assert "broken.toml" in caught.value.text
    assert caught.value.remedy


@pytest.mark.parametrize(
    "text", ["", "L3", "L1/L1", "L1/L2/L5", "L1 ionosphere-free", "G01/E01 ionosphere-free", "L1 /L2", "L1/L2 free"]
)
def test_signals_that_are_none(text: str) -> None:
    with pytest.raises(ValueError):
        combination(text)


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('method = "slant"', 'method = "mount"', "arp_above_mount_m"),
        ('method = "slant"', 'method = "rod"', "arp_above_mount_m"),
        ('unit = "m"', 'unit = "m"\ntape_offset_m = 2.0', "no offset of a tape"),
        ('unit = "m"', 'unit = "m"\ntape_offset_m = "0.01"', "without quotes"),
        ("[antenna]", "[antenna]\narp_above_mount_m = 0.0\n", None),
    ],
)
def test_height_readings_of_every_kind(tmp_path: Path, old: str, new: str, words: str | None) -> None:
    path = tmp_path / "session.toml"
    path.write_text(SAMPLE.replace(old, new, 1), encoding="utf-8")
    if words is None:
        text = path.read_text(encoding="utf-8").replace('method = "slant"', 'method = "rod"', 1)
        path.write_text(text, encoding="utf-8")
        assert load_session(path).setup.heights[0].method == "rod"
        path.write_text(text.replace('unit = "m"', 'unit = "m"\ntape_offset_m = 0.01', 1), encoding="utf-8")
        words = "a rod's fixed height has no tape"
    with pytest.raises(UsageError) as caught:
        load_session(path)
    assert words in caught.value.text + caught.value.remedy
