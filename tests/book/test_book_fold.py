"""Entries -> state: strikes, set-ups, decisions, and that folding is quick."""

from __future__ import annotations

from dataclasses import replace
from datetime import date
from decimal import Decimal
from pathlib import Path
from typing import Any

import pytest
import small_books as small

from fieldbook.book.fold import fold, struck_by
from fieldbook.book.store import Book
from fieldbook.errors import BookError
from fieldbook.model.entry import Entry

HEIGHT = {"occupation": 1, "method": "vertical", "value": "1.6210", "unit": "m", "when": "after", "reader": "S. Marl"}


@pytest.fixture
def book(tmp_path: Path):
    with small.begun(tmp_path / "a.book") as opened:
        yield opened


def _append(book: Book, kind: str, **body: Any) -> int:
    return book.append(kind, {"occupation": 1, **body}, "S. Marl").seq


def test_a_new_book_offers_its_session(tmp_path: Path) -> None:
    with Book.create(tmp_path / "a.book", clock=small.clock(), observer="R. Kell", session_tree=small.tree()) as book:
        state = book.state()
    assert state.session is not None
    assert state.session.mark.name == "KR-07"
    assert state.marks["KR-07"]["description"] == "brass plate in rock"
    assert (state.occupations, state.open_occupation, state.head_seq) == ({}, None, 2)
    assert len(state.id) == 36


def test_an_occupation_starts_with_its_session(book: Book) -> None:
    state = book.state()
    occupation = state.occupations[1]
    assert state.open_occupation is occupation
    assert (occupation.mark, occupation.link, occupation.simulated) == ("KR-07", "file:receiver.nmea", False)
    assert occupation.session.antenna.slant_radius_m == 0.15
    assert occupation.session.setup.heights == ()
    assert [(item.value, item.seq) for item in occupation.heights] == [(Decimal("1.5320"), None)]
    assert state.of_mark("KR-07") == [occupation]


def test_a_struck_height_vanishes_and_stays_legible(book: Book) -> None:
    seq = book.append("height", HEIGHT, "S. Marl").seq
    assert [item.seq for item in book.state().occupations[1].heights] == [None, seq]
    strike = book.append("strike", {"seq": seq, "reason": "misread"}, "S. Marl")
    state = book.state()
    assert [item.seq for item in state.occupations[1].heights] == [None]
    assert [entry.seq for entry in state.occupations[1].struck] == [seq]
    assert state.strikes == {seq: strike}


def test_a_strike_of_a_strike_restores_and_so_on(book: Book) -> None:
    height = book.append("height", HEIGHT, "S. Marl").seq
    target, shown = height, []
    for _ in range(4):
        target = book.append("strike", {"seq": target, "reason": "second thoughts"}, "S. Marl").seq
        shown.append(len(book.state().occupations[1].heights))
    assert shown == [1, 2, 1, 2]


def test_a_setup_entry_changes_the_session_until_struck(book: Book) -> None:
    seq = _append(book, "setup", antenna={"serial": "0007"}, setup={"support": "pole", "pole_length_m": "2.000"})
    session = book.state().occupations[1].session
    assert (session.antenna.serial, session.setup.support, session.setup.pole_length_m) == ("0007", "pole", 2.0)
    assert session.antenna.model == "DEMO-A1 NONE"
    book.append("strike", {"seq": seq, "reason": "wrong antenna"}, "S. Marl")
    assert book.state().occupations[1].session.antenna.serial == "0001"


def test_decisions_and_dates(book: Book) -> None:
    book.append("date", {"occupation": 1, "date": "2007-07-19", "source": "RMC"}, "R. Kell")
    occupation = book.state().occupations[1]
    assert (occupation.day0, occupation.day0_source) == (date(2007, 7, 19), "RMC")
    _append(book, "decision", rollover_weeks=1024, reason="old receiver")
    _append(book, "decision", datum="999", reason="confirmed with the maker")
    _append(book, "decision", talker="GP", reason="two receivers on one line")
    _append(book, "decision", initialisation=2, used=False, reason="jump of 0.2 m")
    _append(book, "decision", operation="EPSG:9991 inverse, EPSG:8049", reason="client")
    _append(book, "decision", accuracy_over_limit=True, outside_area=True, reason="client agrees")
    decided = _append(book, "decision", date="2027-03-04", reason="clock of the office")
    book.append("date", {"occupation": 1, "date": "2007-07-20", "source": "ZDA"}, "R. Kell")
    occupation = book.state().occupations[1]
    assert (occupation.day0, occupation.day0_source) == (date(2027, 3, 4), "decision")
    assert (occupation.rollover_weeks, occupation.datum_confirmed, occupation.talker) == (1024, "999", "GP")
    assert occupation.initialisation_decisions == {2: (False, "jump of 0.2 m")}
    assert occupation.operation == ["EPSG:9991 inverse", "EPSG:8049"]
    assert occupation.accuracy_over_limit
    assert occupation.outside_area_accepted
    assert len(occupation.decisions) == 7
    book.append("strike", {"seq": decided, "reason": "the receiver was right"}, "S. Marl")
    assert book.state().occupations[1].day0 == date(2007, 7, 20)


def test_what_the_recorder_writes(book: Book) -> None:
    gap = {"reason": "unplugged", "from_utc": "x", "to_utc": "y", "seconds": 7}
    gaps = [_append(book, "gap", **gap), _append(book, "resumed", after_s=12)]
    found = _append(book, "finding", code="overlap", severity="stop", text="x", figures={})
    _append(book, "operation", steps=["EPSG:9991 inverse"])
    remark, other = _append(book, "remark", text="dog"), _append(book, "remark", occupation=None, text="rain")
    small.record(book, 1, 1, 3)
    small.end(book, 1, 3)
    state = book.state()
    occupation = state.occupations[1]
    assert [entry.seq for entry in occupation.gaps] == gaps
    assert [entry.seq for entry in occupation.findings] == [found]
    assert occupation.operation == ["EPSG:9991 inverse"]
    assert ([entry.seq for entry in occupation.remarks], [entry.seq for entry in state.remarks]) == ([remark], [other])
    assert occupation.origin_e8min == (small.epoch(1).latitude_e8min, small.epoch(1).longitude_e8min)
    assert (occupation.received_bytes, occupation.received_sha256) == small.received(1, 3)
    assert (occupation.ended_by, occupation.open, state.open_occupation) == ("end of file", False, None)


def test_marks_documents_and_renderings(book: Book) -> None:
    book.append("mark", {"name": "KR-08", "description": "bolt"}, "S. Marl")
    last = book.append("mark", {"name": "KR-08", "description": "bolt, bent"}, "S. Marl").seq
    certificate = {"number": "0123abcd-1", "mark": "KR-07", "occupation": 1, "facts": {}, "digest": "0"}
    book.append("certificate", certificate, "R. Kell")
    book.append("draft", {"facts": {}, "digest": "1"}, "R. Kell")
    book.append("rendered", {"digest": "0", "format": "pdf", "name": "x.pdf", "sha256": "2"}, "R. Kell")
    state = book.state()
    assert state.marks["KR-08"]["description"] == "bolt, bent"
    assert [entry.kind for entry in state.documents] == ["certificate", "draft"]
    assert len(state.rendered) == 1
    book.append("strike", {"seq": last, "reason": "straightened"}, "S. Marl")
    assert book.state().marks["KR-08"]["description"] == "bolt"


def test_a_struck_occupation_is_gone_with_all_its_entries(tmp_path: Path) -> None:
    path = small.ended(tmp_path / "a.book")
    with Book.open(path, clock=small.clock(), write=True) as book:
        seq = book.state().occupations[1].entry_seq
        book.append("strike", {"seq": seq, "reason": "wrong mark"}, "S. Marl")
        assert list(book.state().occupations) == [2]
        assert len(book.epochs(1)) == 50


def test_the_state_is_folded_again_after_news_from_elsewhere(book: Book) -> None:
    first = book.state()
    assert book.state() is first
    with Book.open(book.path, clock=small.clock(), write=True) as screen:
        screen.append("height", HEIGHT, "S. Marl")
    assert len(book.state().occupations[1].heights) == 2
    list(book.items(1))
    assert book.state().head_seq == 4


@pytest.mark.parametrize(
    ("kind", "body"),
    [
        ("occupation", {"occupation": 1, "mark": "x", "session": {"nonsense": 1}, "link": "x", "simulated": False}),
        ("occupation", {"occupation": 1}),
        ("height", {**HEIGHT, "unit": "ell"}),
        ("height", {**HEIGHT, "value": "tall"}),
        ("date", {"occupation": 1, "date": "yesterday", "source": "RMC"}),
        ("decision", {"occupation": 1, "initialisation": "two", "used": True, "reason": "x"}),
        ("end", {"occupation": 1}),
    ],
)
def test_entries_that_make_no_sense_are_named(book: Book, kind: str, body: dict[str, Any]) -> None:
    entries = book.entries()
    bad = Entry(4, entries[-1].utc, kind, body, "R. Kell", entries[-1].hash, "0" * 64)
    with pytest.raises(BookError, match="Entry 4"):
        fold([*entries, bad])


def test_a_book_without_first_entry_is_damaged() -> None:
    with pytest.raises(BookError, match="no first entry"):
        fold([])


def test_kinds_of_a_later_version_are_passed_over(book: Book) -> None:
    entries = book.entries()
    later = replace(entries[-1], seq=4, kind="poem", body={"verse": 1})
    assert fold([*entries, later]).head_seq == 4


def test_strikes_of_later_entries_do_nothing() -> None:
    strike = Entry(5, "", "strike", {"seq": 9, "reason": "x"}, "", "", "")
    assert struck_by([strike]) == {}


def test_ten_thousand_entries_fold(book: Book) -> None:
    entries = book.entries()
    body = {**HEIGHT}
    many = [
        Entry(seq, entries[-1].utc, ("height", "raw", "remark")[seq % 3], {**body, "text": "x"}, "R. Kell", "", "")
        for seq in range(4, 10_004)
    ]
    state = fold([*entries, *many])
    assert len(state.occupations[1].heights) > 3000
