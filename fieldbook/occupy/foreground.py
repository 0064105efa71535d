"""`observe`: the same recorder, in the process that was called, from nothing to the end of an occupation.

The order matters. A book that is there is locked first, so that 'another recorder' is said before anything else; a book
that is not there is made last, when the session, the file or the port have proved good: an error leaves no empty book. If
another recorder has made it by then, everything is judged again under the lock.
"""

from __future__ import annotations

import threading
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from fieldbook.book.lock import RecorderLock
from fieldbook.book.store import Book
from fieldbook.clock import Clock
from fieldbook.errors import BookError, UsageError
from fieldbook.links import open_link
from fieldbook.links.address import LinkAddress
from fieldbook.links.base import Link
from fieldbook.model.recorder import RecorderState
from fieldbook.model.session import Session
from fieldbook.occupy.begin import Plan, enter, plan_occupation
from fieldbook.occupy.recorder import Recorder, RecorderResult
from fieldbook.signing.signer import Signer


@dataclass(frozen=True)
class Wish:
    """What the operator asked for."""

    session: Session
    address: LinkAddress
    limit_s: float | None = None
    new: bool = False
    backup: Path | None = None  # file or folder for copies of the book
    signer: Signer | None = None  # key of the observer: signs the beginning; the recorder itself holds no key


def observe(
    book_path: Path,
    wish: Wish,
    clock: Clock,
    stop: threading.Event,
    *,
    on_start: Callable[[], None] = lambda: None,
    on_state: Callable[[RecorderState], None] = lambda _state: None,
) -> RecorderResult:
    """Record one occupation in this process.

    Raises:
        UsageError, LinkError: as `begin.plan_occupation`; nothing was written, no book was made.
        BookError: not a book, newer, or another recorder holds it.
    """
    lock = RecorderLock(book_path)
    was_there = book_path.exists()
    if was_there:
        _lock_book(lock, book_path, clock)
    elif not book_path.absolute().parent.is_dir():
        raise UsageError(f"There is no folder {book_path.absolute().parent}.", "Make it first, or correct the path.")
    try:
        plan, link = _checked(book_path, wish, clock)
        try:
            lock.acquire()
            if not was_there and book_path.exists():
                plan = _planned(book_path, wish, clock)  # another recorder made it while this one was looking
            number = _entered(book_path, plan, clock, wish.signer)
        except BaseException:
            if link is not None:
                link.close()
            raise
        recorder = Recorder(
            book_path,
            number,
            clock,
            address=wish.address,
            link=link,
            lock=lock,
            backup=wish.backup,
            on_start=on_start,
            on_state=on_state,
        )
        return recorder.run(stop, wish.limit_s)
    finally:
        lock.release()


def _lock_book(lock: RecorderLock, book_path: Path, clock: Clock) -> None:
    """Lock a book that is there, and bring one of an older version up to date."""
    try:
        Book.open(book_path, clock=clock).close()  # what is no book gets no lock file beside it either
    except BookError as error:
        if error.code != "older":
            raise
        lock.acquire()  # first: an older program may be recording into it
        try:
            Book.open(book_path, clock=clock, write=True).close()
        except BaseException:
            lock.release()
            raise
    lock.acquire()


def _checked(book_path: Path, wish: Wish, clock: Clock) -> tuple[Plan, Link | None]:
    """The plan, and for a live link the link itself, opened."""
    plan = _planned(book_path, wish, clock)
    if not wish.address.live:
        return plan, None
    return plan, open_link(wish.address, clock=clock)


def _planned(book_path: Path, wish: Wish, clock: Clock) -> Plan:
    if not book_path.exists():
        return plan_occupation(None, wish.session, wish.address, new=wish.new)
    with Book.open(book_path, clock=clock) as book:
        return plan_occupation(book, wish.session, wish.address, new=wish.new)


def _entered(book_path: Path, plan: Plan, clock: Clock, signer: Signer | None) -> int:
    if book_path.exists():
        book = Book.open(book_path, clock=clock, write=True)
    else:
        session = plan.session
        book = Book.create(book_path, clock=clock, observer=session.job.observer, session_tree=session.tree)
    try:
        return enter(book, plan, clock, signer)
    finally:
        book.close()
