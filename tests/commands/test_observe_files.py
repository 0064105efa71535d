"""`observe` on files: what is recorded, and what is refused with which exit code before anything is written."""

from __future__ import annotations

import gzip
import os
import shutil
import subprocess
import sys
from functools import reduce
from pathlib import Path

import pytest

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.model.item import ItemKind
from fieldbook.occupy.rebuild import compare


def sentence(body: str) -> bytes:
    return f"${body}*{reduce(lambda total, char: total ^ ord(char), body, 0):02X}\r\n".encode()


def log(epochs: int, *, start_s: int = 3600, quality: int = 4, date: bool = True) -> bytes:
    said = []
    for second in range(start_s, start_s + epochs):
        time = f"{second // 3600:02d}{second // 60 % 60:02d}{second % 60:02d}.00"
        place = f"1234.{5678901 + second % 7:07d},S,02345.{6789012 - second % 5:07d},W" if quality else ",,,"
        said.append(sentence(f"GNGGA,{time},{place},{quality},20,0.7,123.4{second % 9},M,-12.345,M,1.0,0061"))
        if date:
            said.append(sentence(f"GNRMC,{time},{'A' if quality else 'V'},{place},0.004,,040327,,,R,V"))
    return b"".join(said)


@pytest.fixture
def receiver(tmp_path: Path) -> Path:
    """receiver.nmea, named by the session, with 120 epochs."""
    path = tmp_path / "receiver.nmea"
    path.write_bytes(log(120))
    return path


def opened(path: Path) -> Book:
    return Book.open(path, clock=SystemClock())


def rewritten(session: Path, old: str, new: str) -> Path:
    text = session.read_text()
    assert old in text
    session.write_text(text.replace(old, new))
    return session


def test_a_file_is_recorded_ended_and_comes_back_identical(tmp_path, session, receiver, fieldbook) -> None:
    path = tmp_path / "job.book"
    said = fieldbook("observe", path, "--session", session, "--json")
    assert said.code == 0, said.err
    result = said.json
    assert result["schema"] == "fieldbook.observe/1"
    assert (result["occupation"], result["mark"], result["ended_by"]) == (1, "KR-07", "end of file")
    assert result["epochs"] == {"heard": 120, "with_fix": 120}
    assert (result["resumed"], result["findings"]) == (False, [])
    assert result["received_bytes"] == receiver.stat().st_size
    assert result["sentences"]["GNGGA"] == 120
    with opened(path) as book:
        assert compare(book, 1) == []
        assert all(item.monotonic_ms is None and item.utc_ms is None for item in book.items(1))
        state = book.state().occupations[1]
        assert state.day0 is not None
        assert state.day0.isoformat() == "2027-03-04"
    out = tmp_path / "out.nmea"
    assert fieldbook("export", path, "--raw", "--occupation", 1, "--out", out).code == 0
    assert out.read_bytes() == receiver.read_bytes()
    assert fieldbook("export", path, "--raw", "--occupation", 1, "--out", out).code == 2, "not written over"
    assert fieldbook("export", path, "--raw", "--out", out, "--replace", "--json").json["bytes"] == len(
        out.read_bytes()
    )
    assert fieldbook("export", path, "--raw", "--occupation", 2, "--out", tmp_path / "x").code == 2
    assert not (tmp_path / "job.book-wal").exists()


def test_the_same_file_twice_is_refused_under_any_name(tmp_path, session, receiver, fieldbook) -> None:
    path = tmp_path / "job.book"
    assert fieldbook("observe", path, "--session", session).code == 0
    before = path.read_bytes()
    assert fieldbook("observe", path, "--session", session, "--json").json["error"]["code"] == "same_file"
    shutil.copy(receiver, tmp_path / "other.nmea")
    rewritten(session, 'name = "KR-07"', 'name = "KR-08"')
    said = fieldbook("observe", path, "--session", session, "--link", f"file:{tmp_path / 'other.nmea'}", "--json")
    assert (said.code, said.json["error"]["code"]) == (2, "same_file")
    assert path.read_bytes() == before, "nothing was written"


def test_overlapping_fix_times_are_refused_for_the_mark_and_for_the_receiver(
    tmp_path, session, receiver, fieldbook
) -> None:
    path = tmp_path / "job.book"
    assert fieldbook("observe", path, "--session", session).code == 0
    receiver.write_bytes(log(120, start_s=3700))
    said = fieldbook("observe", path, "--session", session, "--json")
    assert (said.code, said.json["error"]["code"]) == (2, "overlap")
    rewritten(session, 'name = "KR-07"', 'name = "KR-08"')
    said = fieldbook("observe", path, "--session", session, "--json")
    assert said.code == 0, "another mark and no serial stated: nothing says that it was the same receiver"
    receiver.write_bytes(log(100, start_s=3710))
    rewritten(session, 'link = "file:receiver.nmea"', 'link = "file:receiver.nmea"\nserial = "R-77"')
    rewritten(session, 'name = "KR-08"', 'name = "KR-09"')
    assert fieldbook("observe", path, "--session", session).code == 0
    receiver.write_bytes(log(90, start_s=3715))
    rewritten(session, 'name = "KR-09"', 'name = "KR-10"')
    said = fieldbook("observe", path, "--session", session, "--json")
    assert (said.code, said.json["error"]["code"]) == (2, "overlap")
    receiver.write_bytes(log(120, start_s=8000))
    assert fieldbook("observe", path, "--session", session).code == 0, "apart in time"
    with opened(path) as book:
        assert list(book.state().occupations) == [1, 2, 3, 4]


def test_an_interrupted_file_goes_on_at_its_byte(tmp_path, session, receiver, fieldbook) -> None:
    """The first part of a file is recorded and left open, as after a crash; the same observe finishes it."""
    path, whole = tmp_path / "job.book", receiver.read_bytes()
    cut = 5_003  # in the middle of a sentence
    leave_open(path, session, whole[:cut])
    receiver.write_bytes(whole)
    said = fieldbook("observe", path, "--session", session, "--json")
    assert said.code == 0, said.out
    assert (said.json["occupation"], said.json["resumed"], said.json["ended_by"]) == (1, True, "end of file")
    with opened(path) as book:
        assert b"".join(book.received(1)) == whole
        assert len(book.epochs(1)) == 120, "the sentence at the cut is whole again"
        assert compare(book, 1) == []
        assert [entry.kind for entry in book.entries() if entry.kind in ("resumed", "gap")] == ["resumed"]
    uninterrupted = tmp_path / "once.book"
    assert fieldbook("observe", uninterrupted, "--session", session).code == 0
    with opened(path) as book, opened(uninterrupted) as once:
        assert book.epochs(1) == once.epochs(1)


@pytest.mark.parametrize("change", ["changed", "shorter"])
def test_a_file_that_changed_is_not_taken_up_again(tmp_path, session, receiver, fieldbook, change) -> None:
    path, whole = tmp_path / "job.book", receiver.read_bytes()
    leave_open(path, session, whole[:5_003])
    receiver.write_bytes(log(120, start_s=3601) if change == "changed" else whole[:3_000])
    before = path.read_bytes()
    said = fieldbook("observe", path, "--session", session, "--json")
    assert (said.code, said.json["error"]["code"]) == (2, "file_changed")
    assert path.read_bytes() == before


def leave_open(path: Path, session: Path, part: bytes) -> None:
    """What a recorder that was killed leaves behind: committed raw rows, an open occupation."""
    from fieldbook.links.address import parse_link
    from fieldbook.model.item import Item
    from fieldbook.occupy.begin import enter, plan_occupation
    from fieldbook.settings.session import load_session

    receiver = session.with_name("receiver.nmea")
    receiver.write_bytes(part)
    with Book.create(path, clock=SystemClock(), observer="R. Kell") as book:
        address = parse_link("file:receiver.nmea", session.parent)
        enter(book, plan_occupation(None, load_session(session), address), SystemClock())
        book.write_burst(1, [Item(ItemKind.OPENED, b"file"), Item(ItemKind.BYTES, part)])


BAD = {
    "empty": b"",
    "binary": os.urandom(20_000).replace(b"$", b"#").replace(b"!", b"#"),
    "text": b"Dear all,\nthe receiver is on the roof.\n",
    "bad checksums": log(20).replace(b"$GN", b"$GM"),  # one bit: no checksum can match
}


@pytest.mark.parametrize("name", BAD)
def test_a_file_without_one_valid_sentence_is_exit_3_and_leaves_no_book(tmp_path, session, fieldbook, name) -> None:
    (tmp_path / "receiver.nmea").write_bytes(BAD[name])
    said = fieldbook("observe", tmp_path / "job.book", "--session", session, "--json")
    assert said.code == 3
    assert said.json["error"]["remedy"]
    assert sorted(path.name for path in tmp_path.iterdir()) == ["receiver.nmea", "session.toml"]


def test_missing_file_and_folder_are_exit_3(tmp_path, session, fieldbook) -> None:
    assert fieldbook("observe", tmp_path / "job.book", "--session", session).code == 3
    (tmp_path / "receiver.nmea").mkdir()
    assert fieldbook("observe", tmp_path / "job.book", "--session", session).code == 3
    assert not (tmp_path / "job.book").exists()


def test_a_bad_file_leaves_an_existing_book_as_it_was(tmp_path, session, receiver, fieldbook) -> None:
    path = tmp_path / "job.book"
    assert fieldbook("observe", path, "--session", session).code == 0
    before = path.read_bytes()
    receiver.write_bytes(b"no sentence")
    assert fieldbook("observe", path, "--session", session).code == 3
    assert path.read_bytes() == before


def test_sentences_without_a_fix_are_exit_0_with_a_finding(tmp_path, session, receiver, fieldbook) -> None:
    receiver.write_bytes(log(30, quality=0))
    said = fieldbook("observe", tmp_path / "job.book", "--session", session, "--json")
    assert said.code == 0
    assert [finding["code"] for finding in said.json["findings"]] == ["no_fix"]
    assert said.json["epochs"] == {"heard": 30, "with_fix": 0}


@pytest.mark.parametrize(
    ("arguments", "fragment"),
    [
        ((), "session file is needed"),
        (("--for", "15"), "15m"),
        (("--for", "1.5h"), "15m"),
        (("--for", "0m"), "15m"),
        (("--end", "--new"), "neither"),
    ],
)
def test_slips_of_the_options(tmp_path, session, receiver, fieldbook, arguments, fragment) -> None:
    given = () if not arguments else ("--session", session)
    said = fieldbook("observe", tmp_path / "job.book", *given, *arguments)
    assert said.code == 2
    assert fragment in said.err
    assert not (tmp_path / "job.book").exists()


def test_a_bad_session_or_link_leaves_no_book(tmp_path, session, receiver, fieldbook) -> None:
    path = tmp_path / "job.book"
    for link, code in (("ftp://x", {2, 3}), ("serial:///dev/x", {2, 3}), ("tcp://127.0.0.1:1", {3})):
        said = fieldbook("observe", path, "--session", session, "--link", link)
        assert said.code in code, link
        assert said.err.startswith("error: ")
    rewritten(session, "max_hdop", "max_hodp")
    assert fieldbook("observe", path, "--session", session).code == 2
    assert fieldbook("observe", path, "--session", tmp_path / "none.toml").code == 2
    assert sorted(item.name for item in tmp_path.iterdir()) == ["receiver.nmea", "session.toml"]


def test_what_is_no_book_is_exit_4(tmp_path, session, receiver, fieldbook) -> None:
    path = tmp_path / "job.book"
    path.write_bytes(b"my notes\n" * 100)
    assert fieldbook("observe", path, "--session", session).code == 4
    assert path.read_bytes() == b"my notes\n" * 100
    (tmp_path / "folder").mkdir()
    assert fieldbook("observe", tmp_path / "folder", "--session", session).code == 4
    assert fieldbook("observe", tmp_path / "none" / "x.book", "--session", session).code == 2
    assert sorted(item.name for item in tmp_path.iterdir()) == ["folder", "job.book", "receiver.nmea", "session.toml"]


def test_a_packed_file_is_received_as_its_content(tmp_path, session, fieldbook) -> None:
    (tmp_path / "receiver.nmea").write_bytes(gzip.compress(log(60)))
    said = fieldbook("observe", tmp_path / "job.book", "--session", session, "--json")
    assert said.code == 0
    with opened(tmp_path / "job.book") as book:
        assert b"".join(book.received(1)) == log(60)


def test_a_talker_decision_decodes_again(tmp_path, session, receiver, fieldbook) -> None:
    mixed = log(40) + b"".join(
        sentence(f"GPGGA,0201{s:02d}.00,1234.5,S,02345.6,W,1,9,1.1,120.0,M,-12.3,M,,") for s in range(40)
    )
    receiver.write_bytes(mixed)
    path = tmp_path / "job.book"
    assert fieldbook("observe", path, "--session", session).code == 0
    with opened(path) as book:
        before = len(book.epochs(1))
    keys = ("--set", "talker=GN", "--set", "reason=two receivers on one line")
    assert fieldbook("entry", path, "decision", *keys, "--by", "M. Orr").code == 0
    with opened(path) as book:
        assert {epoch.talker for epoch in book.epochs(1) if epoch.code is None} <= {"GN"}
        assert compare(book, 1) == []
        assert before >= len(book.epochs(1))


def test_a_changed_epoch_is_found_by_the_rebuild(tmp_path, session, receiver, fieldbook) -> None:
    path = tmp_path / "job.book"
    assert fieldbook("observe", path, "--session", session).code == 0
    with Book.open(path, clock=SystemClock(), write=True) as book:
        epochs = book.epochs(1)
        epochs[41].altitude_e5m = 1
        epochs[42].hdop_milli = None
        book.replace_epochs(1, epochs)
        said = compare(book, 1)
    assert len(said) == 2
    assert "epoch 42: altitude_e5m is 1 in the book" in said[0]
    assert "epoch 43: hdop_milli" in said[1]


def test_the_recorder_loads_neither_screen_nor_numbers(tmp_path, session, receiver) -> None:
    whole, path = receiver.read_bytes(), tmp_path / "job.book"
    leave_open(path, session, whole[:5_003])
    receiver.write_bytes(whole)
    code = (
        "import sys; from fieldbook.occupy.__main__ import main; "
        f"code = main([{str(path)!r}, '1']); "
        "heavy = {'numpy', 'pyproj', 'textual', 'scipy', 'sqlite_utils', 'pynmea2', 'click'} & set(sys.modules); "
        "sys.exit(code or len(heavy))"
    )
    environment = {**os.environ, "PYTHONPATH": str(Path(__file__).parents[2])}
    done = subprocess.run([sys.executable, "-c", code], check=False, cwd=tmp_path, env=environment)
    assert done.returncode == 0
    with opened(path) as book:
        assert len(book.epochs(1)) == 120
