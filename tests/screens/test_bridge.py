"""The real bridge on a real book: what the screens write is in the book, signed, and read back."""

from __future__ import annotations

from pathlib import Path

import pytest

from fieldbook.book.store import Book
from fieldbook.clock import FakeClock
from fieldbook.errors import UsageError
from fieldbook.screens.bridge import Bridge

from .fakes import NOW_MS, SESSION_TREE


@pytest.fixture
def bridge(tmp_path: Path) -> Bridge:
    clock = FakeClock(0, NOW_MS)
    path = tmp_path / "kestrel.book"
    Book.create(path, clock=clock, observer="R. Kell", session_tree=SESSION_TREE).close_clean()
    return Bridge(path, clock, "R. Kell")


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
