"""The session file: the contract's sample is accepted, every slip is refused with its key, line and remedy."""

from __future__ import annotations

from decimal import Decimal
from pathlib import Path

import pytest

from fieldbook.errors import UsageError
from fieldbook.settings.schema import REQUIRED, TABLES, TOP_LEVEL
from fieldbook.settings.session import load_session, merged, session_from_tree

SAMPLE = (Path(__file__).parent / "contract_sample.toml").read_text(encoding="utf-8")


def write(tmp_path: Path, text: str) -> Path:
    path = tmp_path / "session.toml"
    path.write_text(text, encoding="utf-8")
    return path


def test_contract_sample_is_read_as_typed(tmp_path: Path) -> None:
    session = load_session(write(tmp_path, SAMPLE))
    assert session.mark.name == "KR-07"
    assert session.requirement.accept_quality == (4,)
    assert session.requirement.initialisations == 2
    assert session.frame.receiver_epoch == "observation"
    assert session.frame.client_epoch == 2020.0
    assert session.setup.heights[0].value == Decimal("1.5320")
    assert session.tree["setup"]["height"][0]["value"] == "1.5320", "digits stay as typed"


def test_stored_tree_gives_the_same_session(tmp_path: Path) -> None:
    session = load_session(write(tmp_path, SAMPLE))
    again = session_from_tree(session.tree)
    assert again == session
    assert again.tree == session.tree


@pytest.mark.parametrize(
    ("old", "new", "fragments"),
    [
        ("max_hdop", "max_hodp", ["line 15", '"max_hodp"', '"max_hdop"']),
        ('unit = "m" ', 'unit = "feet"', ["line 56", "setup.height.unit", "'ft'"]),
        ("north = 0.0005", "nort = 0.0005", ["line 41", '"nort"', '"north"']),
        ("[antenna]", "[antena]", ["line 37", '"antena"', '"antenna"']),
        ("value = 1.5320", 'value = "1.5"', ["line 55", "without quotes"]),
        ("value = 1.5320", "value = nan", ["line 55", "finite"]),
        ("value = 1.5320", "value = -1.5", ["line 55", "above zero"]),
        ('name = "KR-07"', "", ["line 33", "mark.name is missing"]),
        ("[4]", "[4, 8]", ["line 14", "simulator"]),
        ("slant_radius_m = 0.1500", "", ["slant", "antenna.slant_radius_m"]),
        ('"phase centre"        # or', '"mark" # or', ["reported_point", "receiver_height_m"]),
        ("arp_to_phase_centre_m = {", "# {", ["arp_to_phase_centre_m"]),
        ("occupations = 2 ", "occupations = 0 ", ["occupations", "at least 1"]),
        ('title = "Kestrel Ridge control"', 'title = ""', ["line 2", "empty"]),
        ("client_epoch = 2020.0", 'client_epoch = "2020"', ["client_epoch", "decimal year"]),
        ("initialisations = 2", "initialisations = true", ["initialisations", "whole number"]),
    ],
)
def test_a_slip_names_key_line_and_remedy(tmp_path: Path, old: str, new: str, fragments: list[str]) -> None:
    assert old in SAMPLE
    with pytest.raises(UsageError) as caught:
        load_session(write(tmp_path, SAMPLE.replace(old, new, 1)))
    for fragment in fragments:
        assert fragment in caught.value.text + " " + caught.value.remedy
    assert caught.value.remedy, "an error without a remedy is half an error"


@pytest.mark.parametrize("table", TOP_LEVEL)
def test_every_required_key_is_required(tmp_path: Path, table: str) -> None:
    session = load_session(write(tmp_path, SAMPLE))
    for key in REQUIRED[table]:
        tree = {name: dict(keys) for name, keys in session.tree.items()}
        del tree[table][key]
        with pytest.raises(UsageError, match=rf"{table}\.{key} is missing"):
            session_from_tree(tree)


def test_every_table_of_the_schema_is_reachable() -> None:
    for name, keys in TABLES.items():
        for kind in keys.values():
            if kind.startswith(("inline:", "list:")):
                assert kind.split(":", 1)[1] in TABLES
        assert name in TOP_LEVEL or name.rpartition(".")[0] in TABLES


@pytest.mark.parametrize("content", [b"\xff\xfe\x00binary", b"[job\n", b"a = [1,"])
def test_a_file_that_is_no_session(tmp_path: Path, content: bytes) -> None:
    path = tmp_path / "session.toml"
    path.write_bytes(content)
    with pytest.raises(UsageError):
        load_session(path)


def test_missing_file_and_directory(tmp_path: Path) -> None:
    with pytest.raises(UsageError, match="cannot be read"):
        load_session(tmp_path / "none.toml")
    with pytest.raises(UsageError, match="cannot be read"):
        load_session(tmp_path)


def test_merged_changes_only_what_is_stated(tmp_path: Path) -> None:
    session = load_session(write(tmp_path, SAMPLE))
    tree = merged(session.tree, {"setup": {"tribrach_id": "T-4"}, "antenna": {"serial": "0002"}, "occupation": 1})
    again = session_from_tree(tree)
    assert again.setup.tribrach_id == "T-4"
    assert again.antenna.serial == "0002"
    assert again.antenna.model == session.antenna.model
    assert session.antenna.serial == "0001", "the stored tree is not touched"


def test_initialisations_are_judged_for_rtk_only(tmp_path: Path) -> None:
    text = SAMPLE.replace("initialisations = 2", "#")
    assert load_session(write(tmp_path, text)).requirement.initialisations == 2
    assert load_session(write(tmp_path, text.replace("[4]", "[1]"))).requirement.initialisations is None
