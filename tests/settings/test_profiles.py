"""Requirement profiles: every shipped one makes a valid requirement, an office's own counts, and slips are named with
their line. The figures of the shipped ones are checked against the practice table they were written from; which of them
were read and which are from memory is stated in each file and printed with it.
"""

from __future__ import annotations

import tomllib
from decimal import Decimal
from pathlib import Path

import pytest

from fieldbook.errors import UsageError
from fieldbook.settings.profiles import STANDINGS, profile, profiles, requirement_by
from fieldbook.settings.session import load_session, session_from_tree

SAMPLE = Path(__file__).with_name("contract_sample.toml")
GOOD = """title = "Two set-ups"
document = "Office rule 7"
edition = "2026-05"
standing = "read"

[requirement]
minimum_time_s = 240
occupations = 2
"""


@pytest.fixture
def office(tmp_path: Path) -> Path:
    folder = tmp_path / "profiles"
    folder.mkdir()
    return folder


@pytest.mark.parametrize("name", sorted(profiles(Path("nowhere"))))
def test_every_shipped_profile_makes_a_valid_session(name: str, office: Path) -> None:
    chosen = profile(name, office)
    tree = load_session(SAMPLE).tree
    requirement = requirement_by(chosen, tree["requirement"])
    session = session_from_tree({**tree, "requirement": requirement})
    assert session.requirement.source == chosen.source
    assert chosen.standing in STANDINGS
    assert ("check before use" in chosen.source) is (chosen.standing != "read")
    for key, value in chosen.requirement.items():
        assert requirement[key] == value


def test_a_limit_of_the_old_requirement_does_not_stay_under_the_new_name(office: Path) -> None:
    tree = load_session(SAMPLE).tree
    assert "max_hdop" in tree["requirement"]
    made = requirement_by(profile("linz-order-6-marks", office), tree["requirement"])
    assert "max_hdop" not in made
    assert "min_satellites" not in made
    for key in ("horizontal_95_m", "vertical_95_m", "accept_quality", "in"):
        assert made[key] == tree["requirement"][key], "what the document leaves open is the session's"


@pytest.mark.parametrize(
    ("name", "key", "value"),
    [
        # O1 to O4: NGS real-time guidelines v2.1 (2011), from memory, medium
        ("ngs-rt1", "minimum_time_s", "180"), ("ngs-rt1", "max_pdop", "2.0"), ("ngs-rt1", "min_satellites", 7),
        ("ngs-rt2", "minimum_time_s", "60"), ("ngs-rt2", "max_pdop", "3.0"), ("ngs-rt2", "min_satellites", 6),
        ("ngs-rt3", "minimum_time_s", "15"), ("ngs-rt3", "max_pdop", "4.0"), ("ngs-rt3", "min_satellites", 5),
        ("ngs-rt4", "minimum_time_s", "10"), ("ngs-rt4", "max_pdop", "6.0"), ("ngs-rt4", "min_satellites", 5),
        # O16: two independent occupations of at least an hour (read). O33: order 5, network accuracy (read in a summary)
        ("linz-order-6-marks", "minimum_time_s", "3600"), ("linz-order-6-marks", "occupations", 2),
        ("linz-order-5", "horizontal_95_m", "0.15"), ("linz-order-5", "vertical_95_m", "0.35"),
        # O11: lower-grade masks (read). O21: windows of network RTK (from memory)
        ("noaa-lower-grade", "max_hdop", "2.5"), ("noaa-lower-grade", "max_correction_age_s", "20"),
        ("uk-network-rtk-control", "minimum_time_s", "180"),
    ],
)  # fmt: skip
def test_the_figures_of_the_documents(name: str, key: str, value: str | int, office: Path) -> None:
    assert Decimal(str(profile(name, office).requirement[key])) == Decimal(str(value))


def test_an_offices_own_counts_before_the_shipped_one(office: Path) -> None:
    (office / "ngs-rt1.toml").write_text(GOOD, encoding="utf-8")
    (office / "ours.toml").write_text(GOOD, encoding="utf-8")
    found = profiles(office)
    assert found["ngs-rt1"].title == "Two set-ups"
    assert found["ours"].source == "Office rule 7, 2026-05"
    assert found["ours"].open_keys == ("horizontal_95_m", "vertical_95_m", "accept_quality")


def test_the_table_for_a_session_file_reads_back(office: Path) -> None:
    for name in profiles(office):
        chosen = profile(name, office)
        table = tomllib.loads(chosen.toml(), parse_float=Decimal)["requirement"]
        assert table.pop("source") == chosen.source
        assert {key: str(value) for key, value in table.items()} == {
            key: str(value) for key, value in chosen.requirement.items()
        }


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        ("occupations = 2", "ocupations = 2", 'line 8: there is no key "ocupations"'),
        ("occupations = 2", "occupations = 2.5", "line 8: occupations"),
        ("occupations = 2", 'source = "x"', "made of document and edition"),
        ('standing = "read"', 'standing = "sure"', "line 4: standing is none of its words"),
        ('edition = "2026-05"\n', "", "edition is missing"),
        ('edition = "2026-05"', 'editon = "2026-05"', "line 3"),
        ('edition = "2026-05"', 'edition = ""', "line 3: edition is missing or no text"),
        ("[requirement]\nminimum_time_s = 240\noccupations = 2\n", "", "needs a table [requirement]"),
        ('standing = "read"', 'standing = "read"\nalso = "one"', "line 5: also must be a list"),
        ("title", "title = = ", "no valid TOML"),
    ],
)
def test_a_slip_is_named_with_its_line(old: str, new: str, said: str, office: Path) -> None:
    text = GOOD.replace(old, new, 1)
    assert text != GOOD
    (office / "ours.toml").write_text(text, encoding="utf-8")
    with pytest.raises(UsageError) as caught:
        profiles(office)
    assert "ours.toml" in caught.value.text
    assert said in f"{caught.value.text} {caught.value.remedy}"


def test_what_is_no_profile_is_refused(office: Path) -> None:
    (office / "big.toml").write_bytes(b"#" * 70_000)
    with pytest.raises(UsageError, match="larger than 64 kB"):
        profiles(office)
    (office / "big.toml").write_bytes(b"\xff\xfe\x00")
    with pytest.raises(UsageError, match="no text file"):
        profiles(office)
    with pytest.raises(UsageError, match=r'There is no profile "ngs-rt9"\. The nearest known one is "ngs-rt'):
        profile("ngs-rt9", office.parent)
