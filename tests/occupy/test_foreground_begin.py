"""`observe` and a book that another version made, or that another recorder makes while this one is looking."""

from __future__ import annotations

import threading
from pathlib import Path

import pytest

from fieldbook.book import migrations
from fieldbook.book.lock import RecorderLock
from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.errors import BookError
from fieldbook.links.address import parse_link
from fieldbook.occupy import foreground
from fieldbook.occupy.foreground import Wish, observe
from fieldbook.settings.session import load_session

SIMULATED = "sim:rtk?seed=1&rate=10"


def recorded(path: Path, session: Path) -> int:
    """Observe until the first heartbeat; the number of the occupation."""
    stop = threading.Event()
    wish = Wish(load_session(session), parse_link(SIMULATED))
    return observe(path, wish, SystemClock(), stop, on_state=lambda _state: stop.set()).occupation


def occupations(path: Path) -> list[int]:
    with Book.open(path, clock=SystemClock()) as book:
        return list(book.state().occupations)


def older(path: Path, session: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A book as the program made it before its second migration."""
    with monkeypatch.context() as patch:
        patch.setattr(migrations, "MIGRATIONS", migrations.MIGRATIONS[:1])
        tree = load_session(session).tree
        Book.create(path, clock=SystemClock(), observer="R. Kell", session_tree=tree).close()


def test_a_book_of_an_older_version_is_brought_up_to_date_and_recorded_into(
    tmp_path: Path, session: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "job.book"
    older(path, session, monkeypatch)
    assert recorded(path, session) == 1
    with Book.open(path, clock=SystemClock()) as book:
        assert [entry.kind for entry in book.entries()][:3] == ["book", "session", "migrated"]


def test_a_book_of_an_older_version_that_is_being_recorded_is_left_alone(
    tmp_path: Path, session: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "job.book"
    older(path, session, monkeypatch)
    before = path.read_bytes()  # nobody has it open
    monkeypatch.setattr("fieldbook.book.lock.RETRY_S", 0.01)
    with RecorderLock(path):
        with pytest.raises(BookError) as caught:
            recorded(path, session)
    assert caught.value.code == "locked"
    assert path.read_bytes() == before


def test_a_book_that_another_recorder_made_meanwhile_is_judged_again(
    tmp_path: Path, session: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Two recorders begin one book; the first stops while the other waits for the lock: one occupation, not two open ones."""
    path = tmp_path / "job.book"
    checked = foreground._checked

    def rival_first(book_path: Path, wish: Wish, clock: SystemClock) -> object:
        found = checked(book_path, wish, clock)
        monkeypatch.setattr(foreground, "_checked", checked)
        assert recorded(path, session) == 1
        return found

    monkeypatch.setattr(foreground, "_checked", rival_first)
    assert recorded(path, session) == 1
    assert occupations(path) == [1]
