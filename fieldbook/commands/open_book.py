"""How the commands open a book: for reading, or for one entry, always closed again."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.errors import UsageError
from fieldbook.model.state import BookState, Occupation


@contextmanager
def reading(path: Path) -> Iterator[Book]:
    """A book for reading.

    Raises:
        UsageError: no such file.
        BookError: it is no book, or newer than this program.
    """
    _must_exist(path)
    book = Book.open(path, clock=SystemClock(), write=False)
    try:
        yield book
    finally:
        book.close()


@contextmanager
def writing(path: Path) -> Iterator[Book]:
    """A book for appending entries; a recorder may be running on it.

    Raises:
        UsageError: no such file.
        BookError: it is no book, newer than this program, or cannot be written.
    """
    _must_exist(path)
    book = Book.open(path, clock=SystemClock(), write=True)
    try:
        yield book
    finally:
        book.close_clean()


def chosen_occupation(state: BookState, number: int | None) -> Occupation:
    """The occupation of that number; without a number the open one, else the only one.

    Raises:
        UsageError: there is none, or several and none named.
    """
    have = ", ".join(f"{item.number} ({item.mark})" for item in state.occupations.values())
    if number is not None:
        if number not in state.occupations:
            raise UsageError(
                f"There is no occupation {number} in this book.",
                f"It has {have}." if have else "Begin one with `fieldbook observe`.",
                code="unknown_occupation",
            )
        return state.occupations[number]
    if state.open_occupation is not None:
        return state.open_occupation
    if len(state.occupations) == 1:
        return next(iter(state.occupations.values()))
    if not state.occupations:
        raise UsageError(
            "This book has no occupation yet.", "Begin one with `fieldbook observe`.", code="no_occupation"
        )
    raise UsageError(
        f"This book has several occupations: {have}.", "Name one with --occupation N.", code="which_occupation"
    )


def _must_exist(path: Path) -> None:
    if not path.exists():
        raise UsageError(
            f"There is no book {path}.", "Check the path; `fieldbook new` begins a book.", code="no_such_book"
        )
