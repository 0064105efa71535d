"""Rescue: a new, sound book from whatever a damaged one still holds, and a report that claims no more than that.

    nothing is wrong                          a complete copy: the same book, the same id
    only decoded epochs are wrong             a complete copy, the epochs decoded again: nothing was lost
    anything else                             a book of its own: new id, entry `rescued`, certificates withdrawn

A damaged book cannot prove that its last entries were found, so a rescued one never goes on as the same book: a
superseded certificate could stand again without anybody knowing. Entries keep their numbers and texts; occupations that
are whole are carried as they were stored and reduce to the same coordinates to the last bit; the others are made anew
from what is left and carry the finding `rescued`.
"""

from __future__ import annotations

import hashlib
import uuid
from contextlib import suppress
from pathlib import Path

from fieldbook.book import connect, foreign
from fieldbook.book.audit import audit_book
from fieldbook.book.begin import give_name
from fieldbook.book.copying import copy_book
from fieldbook.book.salvage.gather import Found, gather
from fieldbook.book.salvage.pages import commits_behind_a_break, page_size_of, pages_of
from fieldbook.book.store import Book
from fieldbook.clock import Clock
from fieldbook.errors import BookError, FieldbookError, UsageError
from fieldbook.model.rescue import RescueReport
from fieldbook.occupy.rebuild import compare, rebuild
from fieldbook.occupy.rescue_anew import Old, rescue_anew

TORN = (
    "-wal: its last commit is not whole; a power cut leaves that, and it was never acknowledged then, or it is damage"
)
REMAKEABLE = frozenset({"epoch"})


def rescue(path: Path, out: Path, clock: Clock) -> RescueReport:
    """Salvage a book into a new file.

    Raises:
        UsageError: there is no such file, or `out` exists.
        BookError: a recorder is on it, nothing of a book is in it, it is newer, or the new book cannot be written.
    """
    if out.exists() or out.is_symlink():
        raise UsageError(f"{out} exists already.", "Choose another name; a book is never overwritten.", code="exists")
    if not path.is_file():
        raise UsageError(f"There is no book {path}.", "Check the name.", code="missing")
    if not out.absolute().parent.is_dir():
        raise UsageError(f"There is no folder {out.absolute().parent}.", "Make it first, or correct the path.")
    copy = foreign.copy_for_rescue(path, connect.connections_here(path))
    part = out.with_name(f".{out.name}.{uuid.uuid4().hex}.part")
    try:
        old = _read(path, copy)
        report = _sound_copy(copy.path, part, clock, old) or rescue_anew(old, _found(old), part, out, clock)
        give_name(part, out)
        report.new = str(out)
        return report
    finally:
        copy.remove()
        for ending in ("", "-wal", "-shm", "-journal"):
            with suppress(OSError):
                part.with_name(part.name + ending).unlink(missing_ok=True)


def _read(path: Path, copy: foreign.Copy) -> Old:
    """The bytes of the copy, after SQLite has rolled back what a killed process left half done in a -journal."""
    data, wal = copy.content(), copy.content("-wal")
    sums = [hashlib.sha256(part).hexdigest() if part else None for part in (data, wal)]
    size = len(data)
    if copy.content("-journal"):
        with suppress(BookError):
            connect.open_writer(copy.path).close()
            data, wal = copy.content(), copy.content("-wal")
    return Old(str(path), data, wal, size, sums[0] or hashlib.sha256().hexdigest(), sums[1])


def _sound_copy(copied: Path, part: Path, clock: Clock, old: Old) -> RescueReport | None:
    """A complete copy if everything that cannot be made again is there and holds; else None, and `old` knows why.

    Raises:
        BookError: the book is newer than this program.
    """
    problems = audit_book(copied)
    old.problems = [f"{item.where}: {item.text}" for item in problems]
    unseen = commits_behind_a_break(old.wal, page_size_of(old.data, old.wal)) if old.wal else 0
    if unseen > 1:
        old.problems.append(f"-wal: {unseen} commits stand behind a damaged place, where SQLite does not look for them")
        return None
    old.torn = unseen == 1
    try:
        with Book.open(copied, clock=clock) as book:
            numbers = list(book.state().occupations)
            old.end_seq = book.state().head_seq
            differing = [] if problems else [text for number in numbers for text in compare(book, number)]
            old.end_known = not book.copied_without_wal
    except BookError as error:
        if error.code == "newer":
            raise BookError(error.text.replace(str(copied), old.path), error.remedy, code="newer") from None
        return None
    except FieldbookError:
        return None
    old.problems += differing
    if not old.end_known or any(item.where not in REMAKEABLE for item in problems):
        return None
    if not copy_book(copied, part, pause_s=0.0):
        return None
    if old.problems and not _epochs_again(part, clock, numbers):
        part.unlink(missing_ok=True)
        return None
    with Book.open(part, clock=clock) as book:
        state = book.state()
        report = RescueReport(old.path, None, "repaired" if old.problems else "copy", problems=old.problems)
        report.old_id = report.new_id = state.id
        report.old_head_seq, report.old_head_hash = state.head_seq, state.head_hash
        report.old_bytes, report.old_sha256, report.old_wal_sha256 = old.size, old.sha256, old.wal_sha256
        report.entries_carried = state.head_seq
    if old.torn:
        report.end_known = False
        report.problems = [*old.problems, TORN]
    return report


def _epochs_again(part: Path, clock: Clock, numbers: list[int]) -> bool:
    """Decode all epochs again; whether everything holds then."""
    try:
        with Book.open(part, clock=clock, write=True) as book:
            for number in numbers:
                book.replace_epochs(number, rebuild(book, number)[0])
            wrong = [text for number in numbers for text in compare(book, number)]
    except FieldbookError:
        return False
    return not wrong and not audit_book(part)


def _found(old: Old) -> Found:
    """What the page images hold.

    Raises:
        BookError: nothing of a book.
    """
    found = gather(pages_of(old.data, old.wal, page_size_of(old.data, old.wal)))
    if found.empty:
        raise BookError(
            f"Nothing of a book can be found in {old.path}.",
            "Is it the right file? Its -wal beside it may hold more; else ask for another copy.",
            code="nothing_salvageable",
        )
    return found
