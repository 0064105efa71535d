"""Copies while recording: whole at any moment, the one of before kept until then, nothing else ever overwritten."""

from __future__ import annotations

import json
import shutil
import sqlite3
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from fieldbook.book import backup
from fieldbook.book.backup import refuse_other, target_of, write_copy
from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.errors import BookError, UsageError
from fieldbook.occupy.backup_thread import BackupThread
from fieldbook.occupy.verifying import verify_stored
from fieldbook.settings.user import user_backup

CLOCK = SystemClock()
Run = Callable[..., tuple[int, str, str]]


@pytest.fixture
def book(tmp_path: Path, sample_books: dict[str, Path]) -> Path:
    """A copy of a sample book."""
    return Path(shutil.copy(sample_books["kestrel-ridge"], tmp_path / "job.book"))


@pytest.fixture
def stick(tmp_path: Path) -> Path:
    """Where copies go."""
    folder = tmp_path / "stick"
    folder.mkdir()
    return folder


def entries_of(path: Path) -> list[Any]:
    with Book.open(path, clock=CLOCK) as opened:
        return opened.entries()


def remark(path: Path, text: str) -> None:
    with Book.open(path, clock=CLOCK, write=True) as opened:
        opened.append("remark", {"occupation": 1, "text": text}, "R. Kell")


def names(folder: Path) -> list[str]:
    return sorted(path.name for path in folder.iterdir())


def test_a_copy_is_the_book_and_the_next_one_takes_its_place(book: Path, stick: Path) -> None:
    target = target_of(stick, book)
    assert write_copy(book, target)
    assert entries_of(target) == entries_of(book)
    remark(book, "later")
    assert write_copy(book, target)
    assert entries_of(target) == entries_of(book)
    assert all(item.holds for item in verify_stored(target))
    assert names(stick) == ["job.book"]


def test_a_copy_while_a_writer_writes_is_one_moment_of_the_book(book: Path, stick: Path) -> None:
    with Book.open(book, clock=CLOCK, write=True) as writer:
        seen = 0

        def busy() -> bool:
            nonlocal seen
            seen += 1
            writer.append("remark", {"occupation": 1, "text": f"during page group {seen}"}, "R. Kell")
            return False

        before = len(writer.entries())
        assert write_copy(book, stick / "a.book", stopped=busy, pause_s=0.0)
        assert seen > 0
        assert writer.entries()[:before] == entries_of(stick / "a.book")
    assert all(item.holds for item in verify_stored(stick / "a.book"))


def test_a_copy_given_up_or_failed_leaves_the_one_of_before(
    book: Path, stick: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    target = stick / "job.book"
    write_copy(book, target)
    before = target.read_bytes()
    remark(book, "later")
    assert not write_copy(book, target, stopped=lambda: True)
    assert target.read_bytes() == before

    def full(_source: Path, part: Path, **_how: Any) -> bool:
        part.write_bytes(b"half of it")
        raise BookError("The book cannot grow: the disk is full.", "", code="disk_full")

    monkeypatch.setattr(backup, "copy_book", full)
    with pytest.raises(BookError):
        write_copy(book, target)
    assert target.read_bytes() == before
    assert names(stick) == ["job.book"]


def test_what_is_no_copy_of_this_book_is_never_overwritten(
    book: Path, stick: Path, sample_books: dict[str, Path]
) -> None:
    other = Path(shutil.copy(sample_books["saltpan"], stick / "job.book"))
    for make in (lambda: None, lambda: other.write_bytes(b"a letter"), lambda: other.write_bytes(b"")):
        make()
        before = other.read_bytes()
        with pytest.raises(UsageError) as raised:
            write_copy(book, other)
        assert raised.value.code == "backup_other"
        assert other.read_bytes() == before
    with pytest.raises(UsageError, match="the book itself"):
        target_of(book, book)


def test_a_copy_that_knows_more_than_the_book_is_kept(book: Path, stick: Path) -> None:
    write_copy(book, stick / "job.book")
    remark(stick / "job.book", "only here")
    with pytest.raises(UsageError, match="may be the better one"):
        refuse_other(stick / "job.book", book)


def test_the_stick_is_pulled_and_put_back(book: Path, stick: Path, tmp_path: Path) -> None:
    thread = BackupThread(book, stick, CLOCK, first_s=0.0, every_s=0.05)
    thread.start()
    try:
        wait(lambda: thread.status.last_utc_ms is not None)
        stick.rename(tmp_path / "pulled")
        wait(lambda: thread.status.problem != "")
        assert thread.status.last_utc_ms is not None
    finally:
        thread.halt()
    again = BackupThread(book, stick, CLOCK, first_s=0.0, every_s=0.05)
    (tmp_path / "pulled").rename(stick)
    again.start()
    wait(lambda: again.status.last_utc_ms is not None)
    again.halt()
    assert again.last_copy().problem == ""
    assert entries_of(stick / "job.book") == entries_of(book)


def wait(condition: Callable[[], bool]) -> None:
    end = time.monotonic() + 20
    while not condition():
        assert time.monotonic() < end
        time.sleep(0.01)


def test_observe_leaves_a_complete_copy(tmp_path: Path, stick: Path, short_session: Path, run_fieldbook: Run) -> None:
    path = tmp_path / "a.book"
    code, out, _ = run_fieldbook("observe", path, "--session", short_session, "--backup", stick, "--json")
    assert code == 0
    tree = json.loads(out)
    assert tree["backup"]["path"] == str(stick / "a.book")
    assert tree["backup"]["problem"] is None
    assert entries_of(stick / "a.book") == entries_of(path)
    assert all(item.holds for item in verify_stored(stick / "a.book"))


def test_observe_refuses_a_strangers_file(tmp_path: Path, stick: Path, short_session: Path, run_fieldbook: Run) -> None:
    (stick / "a.book").write_bytes(b"somebody's")
    code, out, _ = run_fieldbook(
        "observe", tmp_path / "a.book", "--session", short_session, "--backup", stick, "--json"
    )
    assert code == 2
    assert json.loads(out)["error"]["code"] == "backup_other"
    assert not (tmp_path / "a.book").exists()
    assert (stick / "a.book").read_bytes() == b"somebody's"


@pytest.mark.slow
def test_a_live_recording_copies_and_says_why_not(tmp_path: Path, stick: Path, run_fieldbook: Run) -> None:
    sample = Path(__file__).parents[1] / "settings" / "contract_sample.toml"
    path, gone = tmp_path / "a.book", stick / "not there"
    live = ("--session", sample, "--link", "sim:rtk?seed=7")
    code, out, _ = run_fieldbook("observe", path, *live, "--for", "7s", "--backup", gone / "a.book", "--json")
    assert code == 0
    assert "not there" in json.loads(out)["backup"]["problem"]
    with Book.open(path, clock=CLOCK) as opened:
        codes = [entry.body["code"] for entry in opened.entries() if entry.kind == "alarm"]
        state = opened.recorder_state()
    assert "backup_failed" in codes
    assert state is not None
    assert "not there" in state.backup_problem
    code, out, _ = run_fieldbook("status", path)
    assert "no copy yet" in out or "no recorder runs" in out


def test_the_place_in_the_users_settings(tmp_path: Path) -> None:
    settings = tmp_path / "fieldbook.toml"
    assert user_backup(settings) is None
    settings.write_text(f'[backup]\npath = "{(tmp_path / "stick").as_posix()}"\n')
    assert user_backup(settings) == tmp_path / "stick"
    for wrong in ('[backup]\npath = "stick"\n', "[backup]\nevery = 3\n", "[backup]\n", "backup = 3\n"):
        settings.write_text(wrong)
        with pytest.raises(UsageError):
            user_backup(settings)


def test_a_copy_is_one_plain_file(book: Path, stick: Path) -> None:
    with Book.open(book, clock=CLOCK, write=True):  # in WAL mode
        write_copy(book, stick / "a.book")
    assert names(stick) == ["a.book"]
    connection = sqlite3.connect(stick / "a.book")
    assert connection.execute("PRAGMA journal_mode").fetchone()[0] == "delete"
    connection.close()
