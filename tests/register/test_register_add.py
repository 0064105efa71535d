"""Books into a register: verified first, the same state once, later states told, everything else refused and unchanged."""

from __future__ import annotations

import hashlib
import shutil
import sqlite3
import uuid
from contextlib import closing
from pathlib import Path

import numpy as np
import pytest

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.register.evidence import evidence_from_tree
from fieldbook.register.store import Register

from .conftest import Call

OFFICE = "O. Desk"


def digest(path: Path) -> str:
    """SHA-256 of a file nobody has open."""
    return hashlib.sha256(path.read_bytes()).hexdigest()


def write(path: Path, kind: str, body: dict, by: str = "R. Kell") -> None:
    """One more entry in a book."""
    with Book.open(path, clock=SystemClock(), write=True) as book:
        book.append(kind, body, by)


@pytest.fixture
def added(book: Path, tmp_path: Path, run_fieldbook: Call) -> Path:
    """A register that holds the book."""
    register = tmp_path / "office.register"
    assert run_fieldbook("register", "add", register, book, "--by", OFFICE).code == 0
    return register


def test_a_book_is_added_and_not_touched(book: Path, tmp_path: Path, run_fieldbook: Call) -> None:
    before, beside = digest(book), sorted(item.name for item in tmp_path.iterdir())
    register = tmp_path / "office.register"
    said = run_fieldbook("register", "add", register, book, "--by", OFFICE, "--json")
    assert said.code == 0
    (one,) = said.json["books"]
    assert (one["outcome"], one["occupations"]) == ("added", 1)
    assert digest(book) == before
    assert sorted(item.name for item in tmp_path.iterdir()) == sorted([*beside, "office.register"])
    listed = run_fieldbook("register", "list", register, "--json").json
    (held,) = listed["books"]
    assert held["by"] == OFFICE
    assert held["added_utc"].endswith("Z")
    assert held["versions"].keys() == {"fieldbook", "proj", "epsg", "pyproj"}
    (mark,) = listed["marks"]
    assert (mark["mark"], mark["name"]) == (1, "KR-07")
    assert mark["described"][0]["mark"]["inscription"] == "KR 07"
    assert run_fieldbook("verify", register).code == 0


def test_the_evidence_is_the_reduction(added: Path, book: Path, run_fieldbook: Call) -> None:
    reduced = run_fieldbook("reduce", book, "--json").json["reductions"][0]
    reduced.pop("convergence")
    with Register.open(added, clock=SystemClock()) as register:
        (held,) = register.state().occupations()
        assert register.kept_tree(held.reduction) == reduced
        evidence = evidence_from_tree(register.kept_tree(held.evidence))
    assert evidence_from_tree(evidence.to_tree()) == evidence
    assert evidence.place is not None
    assert [evidence.place.lat_deg, evidence.place.lon_deg] == [reduced["client"][k] for k in ("lat_deg", "lon_deg")]
    assert (evidence.shares.station, evidence.shares.antenna_serial) == ("0042", "0001")
    assert (evidence.observer, evidence.party) == ("R. Kell", "Ferrow Tamsin Land Surveyors")
    # both parts of the covariance together are what the reduction states, in its own axes
    lat, lon = np.radians([evidence.place.lat_deg, evidence.place.lon_deg])
    turn = np.array(
        [
            [-np.sin(lon), np.cos(lon), 0],
            [-np.sin(lat) * np.cos(lon), -np.sin(lat) * np.sin(lon), np.cos(lat)],
            [np.cos(lat) * np.cos(lon), np.cos(lat) * np.sin(lon), np.sin(lat)],
        ]
    )
    total = turn @ (np.array(evidence.cov_own_m2) + np.array(evidence.cov_common_m2)) @ turn.T
    stated = reduced["uncertainty_client"]
    assert np.sqrt(np.diag(total)) == pytest.approx(stated["u_enu_m"], rel=1e-9)
    assert total[0, 1] == pytest.approx(stated["cov_en_m2"][0][1], rel=1e-6)
    common = turn @ np.array(evidence.cov_common_m2) @ turn.T
    by_hand = sum(line["u_enu_m"][2] ** 2 for line in stated["budget"] if line["common"])
    assert common[2, 2] == pytest.approx(by_hand, rel=1e-9)


def test_the_same_state_again_changes_nothing(added: Path, book: Path, run_fieldbook: Call) -> None:
    before = digest(added)
    said = run_fieldbook("register", "add", added, book, "--by", "Another", "--json")
    assert said.code == 0
    assert said.json["books"][0]["outcome"] == "unchanged"
    assert digest(added) == before


def test_a_later_state_says_what_changed(added: Path, book: Path, run_fieldbook: Call, tmp_path: Path) -> None:
    earlier = Path(shutil.copy(book, tmp_path / "earlier.book"))
    write(book, "height", {"occupation": 1, "method": "slant", "value": "1.5420", "unit": "m", "when": "during"})
    write(book, "mark", {"name": "KR-07", "description": "brass plate, edge worn"})
    said = run_fieldbook("register", "add", added, book, "--by", OFFICE, "--json").json["books"][0]
    assert said["outcome"] == "updated"
    assert any(text.startswith("occupation 1 of KR-07 moved by") for text in said["details"])
    assert "the description of mark KR-07 changed" in said["details"]
    listed = run_fieldbook("register", "list", added, "--json").json
    assert listed["books"][0]["states"] == 2
    assert [mark["mark"] for mark in listed["marks"]] == [1]
    # the earlier state, handed in late, changes nothing
    before = digest(added)
    late = run_fieldbook("register", "add", added, earlier, "--by", OFFICE, "--json")
    assert late.json["books"][0]["outcome"] == "older"
    assert digest(added) == before


def test_an_unseen_earlier_state_is_recognised_by_its_hashes(book: Path, tmp_path: Path, run_fieldbook: Call) -> None:
    earlier = Path(shutil.copy(book, tmp_path / "earlier.book"))
    write(book, "remark", {"occupation": None, "text": "came home"})
    register = tmp_path / "office.register"
    run_fieldbook("register", "add", register, book, "--by", OFFICE)
    said = run_fieldbook("register", "add", register, earlier, "--by", OFFICE, "--json")
    assert (said.code, said.json["books"][0]["outcome"]) == (0, "older")


def test_one_identity_with_two_contents_is_refused(
    added: Path, book: Path, tmp_path: Path, run_fieldbook: Call
) -> None:
    twin = Path(shutil.copy(book, tmp_path / "twin.book"))
    write(book, "remark", {"occupation": None, "text": "the copy that went on"})
    write(twin, "remark", {"occupation": None, "text": "the copy that went another way"})
    assert run_fieldbook("register", "add", added, book, "--by", OFFICE).code == 0
    before = digest(added)
    said = run_fieldbook("register", "add", added, twin, "--by", OFFICE, "--json")
    assert said.code == 4
    (one,) = said.json["books"]
    assert (one["outcome"], one["code"]) == ("refused", "diverging")
    with Book.open(twin, clock=SystemClock()) as opened:
        assert f"from entry {opened.state().head_seq} on" in one["text"]
    assert digest(added) == before


def test_a_shared_certificate_prefix_is_refused(added: Path, book: Path, tmp_path: Path, run_fieldbook: Call) -> None:
    with Register.open(added, clock=SystemClock()) as register:
        (held,) = register.state().books.values()
    other = str(uuid.UUID(held.id[:8] + uuid.uuid4().hex[8:]))
    path = tmp_path / "other.book"
    Book.create(path, clock=SystemClock(), observer="T. Orin", book_id=other).close()
    said = run_fieldbook("register", "add", added, path, "--by", OFFICE, "--json")
    assert (said.code, said.json["books"][0]["code"]) == (4, "prefix_held")


def _tampered(path: Path) -> None:
    with closing(sqlite3.connect(path, isolation_level=None)) as plain:
        (text,) = plain.execute("SELECT sql FROM sqlite_master WHERE name = 'entry_no_update'").fetchone()
        plain.execute("DROP TRIGGER entry_no_update")
        plain.execute("UPDATE entry SET observer = 'Somebody Else' WHERE seq = 2")
        plain.execute(text)


def _newer(path: Path) -> None:
    with closing(sqlite3.connect(path, isolation_level=None)) as plain:
        plain.execute("PRAGMA user_version = 99")


def _half(path: Path) -> None:
    path.write_bytes(path.read_bytes()[: path.stat().st_size // 2])


def _empty(path: Path) -> None:
    path.write_bytes(b"")


def _while_recorded(path: Path) -> None:
    write(path, "recorder", {"occupation": 1, "state": "running", "program": "0"})
    with closing(sqlite3.connect(path, isolation_level=None)) as plain:
        plain.execute("PRAGMA journal_mode=WAL").fetchone()


@pytest.mark.parametrize(
    ("spoil", "code"),
    [
        (_tampered, "does_not_hold"),
        (_newer, "newer"),
        (_half, "damaged"),
        (_empty, "not_a_book"),
        (_while_recorded, "copied_without_wal"),
    ],
)
def test_a_bad_book_is_refused_and_the_others_are_added(
    spoil, code: str, book: Path, tmp_path: Path, sample_books: dict[str, Path], run_fieldbook: Call
) -> None:
    spoil(book)
    register = tmp_path / "office.register"
    said = run_fieldbook("register", "add", register, book, sample_books["saltpan"], "--by", OFFICE, "--json")
    assert said.code == 4
    refused, other = said.json["books"]
    assert (refused["outcome"], refused["code"]) == ("refused", code), refused
    assert refused["text"]
    assert refused["remedy"]
    assert other["outcome"] == "added"
    with Register.open(register, clock=SystemClock()) as opened:
        assert [entry.kind for entry in opened.entries()] == ["register", "added"]


def test_a_known_book_that_was_tampered_with_is_refused(added: Path, book: Path, run_fieldbook: Call) -> None:
    before = digest(added)
    with closing(sqlite3.connect(book, isolation_level=None)) as plain:
        (text,) = plain.execute("SELECT sql FROM sqlite_master WHERE name = 'raw_pack_no_update'").fetchone()
        plain.execute("DROP TRIGGER raw_pack_no_update")
        plain.execute("UPDATE raw_pack SET data = zeroblob(length(data))")
        plain.execute(text)
    said = run_fieldbook("register", "add", added, book, "--by", OFFICE, "--json")
    assert (said.code, said.json["books"][0]["outcome"]) == (4, "refused")
    assert digest(added) == before


def test_a_frame_that_cannot_be_reached_refuses_the_book(added: Path, book: Path, run_fieldbook: Call) -> None:
    write(book, "setup", {"occupation": 1, "frame": {"client": "EPSG:4258", "grid": "EPSG:25832"}})
    before = digest(added)
    said = run_fieldbook("register", "add", added, book, "--by", OFFICE, "--json")
    (one,) = said.json["books"]
    assert (said.code, one["outcome"]) == (4, "refused")
    assert one["text"].startswith("Occupation 1 cannot be reduced on this computer")
    assert digest(added) == before


def test_what_was_struck_leaves_the_register(added: Path, book: Path, run_fieldbook: Call) -> None:
    with Book.open(book, clock=SystemClock(), write=True) as opened:
        seq = opened.state().occupations[1].entry_seq
        opened.append("strike", {"seq": seq, "reason": "wrong mark"}, "R. Kell")
    said = run_fieldbook("register", "add", added, book, "--by", OFFICE, "--json").json["books"][0]
    assert any("occupation 1 of KR-07 is gone" in text for text in said["details"])
    (mark,) = run_fieldbook("register", "list", added, "--json").json["marks"]
    assert mark["occupations"] == []


def test_slips_are_exit_2_and_begin_nothing(tmp_path: Path, book: Path, run_fieldbook: Call) -> None:
    register = tmp_path / "office.register"
    assert run_fieldbook("register", "add", register, tmp_path / "nothing.book", "--by", OFFICE).code == 2
    assert run_fieldbook("register", "add", register, book).code == 2
    assert run_fieldbook("register", "add", register, book, "--by", " ").code == 2
    assert run_fieldbook("register", "ad", register).code == 2
    assert not register.exists()
    assert run_fieldbook("register", "list", register).code == 4
