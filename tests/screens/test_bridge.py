"""The real bridge on a real book: what the screens write is in the book, signed, and read back."""

from __future__ import annotations

import json
import shutil
import time
from collections.abc import Callable, Iterator
from dataclasses import replace
from pathlib import Path

import pytest

from fieldbook.book.lock import held
from fieldbook.book.store import Book
from fieldbook.clock import FakeClock, SystemClock
from fieldbook.errors import UsageError
from fieldbook.model.coordinates import FORMS
from fieldbook.screens.bridge import Bridge
from fieldbook.screens.reduction import coordinate_rows, evidence_rows
from fieldbook.screens.sheets import coordinate_text

from .fakes import NOW_MS, SESSION_TREE

SAMPLE = Path(__file__).resolve().parents[2] / "sample_sessions" / "kestrel-ridge-1"


@pytest.fixture
def bridge(tmp_path: Path) -> Iterator[Bridge]:
    clock = FakeClock(0, NOW_MS)
    path = tmp_path / "kestrel.book"
    Book.create(path, clock=clock, observer="R. Kell", session_tree=SESSION_TREE).close_clean()
    yield Bridge(path, clock, "R. Kell")
    wait_for(lambda: not held(path), "the recorder's end")


def test_nobody_signs_nothing_is_written(bridge: Bridge) -> None:
    bridge.observer = " "
    before = len(bridge.entries())
    with pytest.raises(UsageError, match="Nobody signs"):
        bridge.add_remark(None, "wet")
    assert len(bridge.entries()) == before


def test_entries_are_written_signed_and_read_back(bridge: Bridge) -> None:
    mark = bridge.add_mark({"name": "KR-08", "description": "bolt"})
    remark = bridge.add_remark(None, "lorry parked 8 m N")
    struck = bridge.strike(remark.seq, "other mark")
    entries = bridge.entries()
    assert [entry.seq for entry in entries][-3:] == [mark.seq, remark.seq, struck.seq]
    assert {entry.observer for entry in entries} == {"R. Kell"}
    with Book.open(bridge.path, clock=bridge.clock) as book:
        state = book.state()
    assert state.marks["KR-08"]["description"] == "bolt"
    assert remark.seq in state.strikes


def test_with_a_key_of_the_observer_entries_are_signed(
    bridge: Bridge, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    from fieldbook.screens.diary_text import entry_text
    from fieldbook.signing import keyring
    from fieldbook.signing.judge import judge

    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))
    bridge.snapshot()
    assert bridge.signature == "unsigned: no key of R. Kell on this computer"
    made = keyring.new_key("R. Kell", None, None)
    bridge.add_remark(None, "wet")
    bridge.observer = "M. Orr"
    bridge.snapshot()
    assert bridge.signature.startswith("unsigned: no key of M. Orr")
    bridge.add_remark(None, "dry again")
    bridge.observer = "R. Kell"
    bridge.snapshot()
    assert bridge.signature.replace(" ", "") == f"key{made.key.fingerprint}"
    bridge.close()
    entries = bridge.entries()
    assert [entry.kind for entry in entries][-4:] == ["remark", "key", "signature", "remark"]
    assert "signs from here on, fingerprint" in entry_text(entries[-3])
    lines = judge(entries, keyring.trust())
    assert all(line.holds for line in lines)
    assert "it is your own" in lines[0].text


def test_session_is_checked_before_it_is_saved(bridge: Bridge) -> None:
    before = len(bridge.entries())
    wrong = {**SESSION_TREE, "setup": {**SESSION_TREE["setup"], "reported_point": "lens"}}
    with pytest.raises(UsageError, match="reported_point"):
        bridge.save_session(wrong)
    assert len(bridge.entries()) == before
    bridge.save_session({**SESSION_TREE, "mark": {"name": "KR-09"}})
    with Book.open(bridge.path, clock=bridge.clock) as book:
        session = book.state().session
    assert session is not None
    assert session.mark.name == "KR-09"


def test_heights_are_those_of_the_reduction(bridge: Bridge) -> None:
    """Contract section 2: 1.5320 m slant, radius 0.1500 m, notch 0.0300 m: ARP 1.49464 m to the digits printed."""
    session = bridge.session(SESSION_TREE)
    made = bridge.heights(session, SESSION_TREE["setup"]["height"])
    assert made.height is not None
    assert made.height.height_arp_m == pytest.approx(1.49464, abs=5e-6)
    assert bridge.heights(session, [{"method": "slant", "value": "0.1", "unit": "m", "when": "before"}]).problem


def test_a_recorded_file_is_begun_reduced_and_named_ready(tmp_path: Path) -> None:
    """The shipped sample through the real recorder process: what the screens show next is there."""
    clock = SystemClock()
    bridge = Bridge(tmp_path / "sample.book", clock, "R. Kell")
    tree = bridge.session_file(str(SAMPLE / "session.toml"))
    assert tree["receiver"]["link"] == f"file:{SAMPLE / 'receiver.nmea'}"  # no longer relative to the session file
    Book.create(bridge.path, clock=clock, observer="R. Kell", session_tree=tree).close_clean()
    assert bridge.begin(tree) == (1, False)
    wait_for(lambda: ended(bridge), "the end of the file")
    reduced = bridge.reduce()
    assert not reduced.failures
    (sheet,) = reduced.sheets
    made = sheet.reduction
    assert made.mark == tree["mark"]["name"]
    assert made.client is not None
    assert made.leave is not None
    assert bridge.missing(sheet) == []
    kinds = [entry.kind for entry in bridge.entries()]
    assert kinds.count("occupation") == kinds.count("end") == 1
    paper = bridge.certify(made.mark, 1, str(tmp_path / "paper.txt"), "A. Firth; 1234", "")
    assert paper.number is not None
    assert paper.number in Path(paper.path).read_text(encoding="utf-8")
    again = bridge.certify(made.mark, 1, str(tmp_path / "again.json"), "A. Firth; 1234", "")
    assert again.number == paper.number
    with pytest.raises(UsageError, match="exists already"):
        bridge.certify(made.mark, 1, str(tmp_path / "paper.txt"), "A. Firth; 1234", "")
    assert not bridge.strikeable(next(entry for entry in bridge.entries() if entry.kind == "raw"))


def test_occupations_of_a_mark_are_reduced_and_certified_together(
    tmp_path: Path, sample_books: dict[str, Path]
) -> None:
    """KR-07 was occupied twice: each by itself, and both together, with the figures of `reduce --json`'s marks."""
    path = Path(shutil.copy(sample_books["kestrel-ridge"], tmp_path))  # nobody has it open
    bridge = Bridge(path, SystemClock(), "R. Kell")
    first, second, together = bridge.reduce().sheets
    assert [sheet.numbers for sheet in (first, second, together)] == [(1,), (2,), (1, 2)]
    assert (first.title, together.title) == ("KR-07, occupation 1", "KR-07, occupations 1, 2 together")
    assert together.result is not None
    assert together.reduction.uncertainty == together.result.uncertainty
    assert together.reduction.uncertainty.horizontal95_m < first.reduction.uncertainty.horizontal95_m
    assert bridge.missing(together) == []
    made = bridge.certify("KR-07", None, str(tmp_path / "both.json"), "A. Firth; 1234", "")
    facts = json.loads(Path(made.path).read_text(encoding="utf-8"))
    assert made.number is not None
    assert [member["occupation"]["number"] for member in facts["members"]] == [1, 2]
    text = "\n".join("".join(part for part, _ in line) for line in evidence_rows(together, 60))
    assert "1 and 2: plan 12 of 20 mm, height 7 of 30 mm" in text
    assert "The mark is done" in text
    title = "".join(part for line in coordinate_rows(together, 60) for part, _ in line)
    assert "KR-07, occupations 1, 2 together" in title


def test_occupations_that_do_not_go_together_are_named(tmp_path: Path, sample_books: dict[str, Path]) -> None:
    path = Path(shutil.copy(sample_books["saltpan"], tmp_path))
    reduced = Bridge(path, SystemClock(), "R. Kell").reduce()
    assert [sheet.numbers for sheet in reduced.sheets] == [(1,), (2,)]
    ((mark, why),) = reduced.apart
    assert mark == "SP-12"
    assert "cannot be combined" in why


def test_simulated_receiver_is_recorded_and_ended_from_the_bridge(bridge: Bridge) -> None:
    bridge.clock = SystemClock()
    number, resumed = bridge.begin({**SESSION_TREE, "receiver": {"link": "sim:rtk?seed=7&speed=60"}})
    assert (number, resumed) == (1, False)
    wait_for(lambda: epochs(bridge) > 60, "a minute of epochs")
    height = bridge.add_height(1, {"method": "slant", "value": "1.5330", "unit": "m", "when": "after"})
    bridge.end(1)
    assert ended(bridge)
    height = bridge.add_height(1, {"method": "slant", "value": "1.5330", "unit": "m", "when": "after"})
    with Book.open(bridge.path, clock=bridge.clock) as book:
        assert [item.seq for item in book.state().occupations[1].heights][-1] == height.seq
    assert bridge.explain_heights(1, "the tripod sank").kind == "decision"
    assert "simulated" in " ".join(bridge.missing(bridge.reduce().sheets[0]))


def ended(bridge: Bridge) -> bool:
    with Book.open(bridge.path, clock=bridge.clock) as book:
        return book.state().open_occupation is None


def epochs(bridge: Bridge) -> int:
    with Book.open(bridge.path, clock=bridge.clock) as book:
        return len(book.epochs(1))


def wait_for(condition: Callable[[], bool], what: str, within_s: float = 30.0) -> None:
    deadline = time.monotonic() + within_s
    while not condition():
        assert time.monotonic() < deadline, f"never came: {what}"
        time.sleep(0.05)  # another process is waited for


def test_snapshot_is_the_picture_of_the_real_book(bridge: Bridge) -> None:
    bridge.clock = SystemClock()
    try:
        before = bridge.snapshot()
        assert before.occupation is None
        assert before.state.session is not None
        bridge.begin({**SESSION_TREE, "receiver": {"link": "sim:rtk?seed=7&speed=60"}})
        wait_for(lambda: bridge.snapshot().reduction is not None, "the first reduction")
        view = bridge.snapshot()
        assert view.recorder_alive
        assert view.trace is not None
        bridge.end(1)
        assert not bridge.snapshot().recorder_alive
    finally:
        bridge.close()


def test_frames_are_told_for_the_place_of_the_book(bridge: Bridge) -> None:
    with pytest.raises(UsageError, match="no place yet"):
        bridge.frames()
    bridge.add_mark({"name": "KR-07", "approximate": {"lat_deg": "-34.27", "lon_deg": "146.05"}})
    told = bridge.frames()
    assert "approximate position of KR-07" in told.place
    assert any("EPSG:8049" in line for line in told.pair)
    assert told.question[0] == "What corrects this receiver? Our own base, on a mark with known coordinates."


def test_a_coordinate_is_never_copied_bare(tmp_path: Path, sample_books: dict[str, Path]) -> None:
    path = Path(shutil.copy(sample_books["kestrel-ridge"], tmp_path))
    bridge = Bridge(path, SystemClock(), "R. Kell")
    together = bridge.reduce().sheets[-1]
    for form in FORMS:
        text = coordinate_text(together, form)
        assert text.startswith("KR-07, occupations 1, 2 together: ")
        assert "GDA2020 (EPSG:7843); 95 % 0.075 m circle, 0.062 m height" in text
    assert "34°16′27.538" in coordinate_text(together, "dms")
    assert "EPSG:7855  E 412720.705 m  N 6207021.000 m" in coordinate_text(together, "grid")
    out = bridge.write_text(str(tmp_path / "kr-07.txt"), text)
    assert Path(out).read_text(encoding="utf-8") == text + "\n"
    with pytest.raises(UsageError, match="exists already"):
        bridge.write_text(out, text)
    with pytest.raises(UsageError, match="cannot be written"):
        bridge.write_text(str(tmp_path / "no" / "kr-07.txt"), text)
    bare = replace(together, reduction=replace(together.reduction, grid=None))
    with pytest.raises(UsageError, match="No grid"):
        coordinate_text(bare, "grid")


def test_frames_that_cannot_be_used_are_refused_before_recording(bridge: Bridge, tmp_path: Path) -> None:
    """As on the command line: EPSG:4979 is an ensemble, and which realisation was meant cannot be found out later."""
    tree = {**SESSION_TREE, "frame": {**SESSION_TREE["frame"], "receiver": "EPSG:4979"}}
    with pytest.raises(UsageError, match="ensemble"):
        bridge.begin(tree)
    assert not any(entry.kind == "occupation" for entry in bridge.entries())
    text = (SAMPLE / "session.toml").read_text(encoding="utf-8").replace("EPSG:7912", "EPSG:4979")
    (tmp_path / "session.toml").write_text(text, encoding="utf-8")
    with pytest.raises(UsageError, match="ensemble"):
        bridge.session_file(str(tmp_path / "session.toml"))
