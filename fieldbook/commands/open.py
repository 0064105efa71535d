"""`fieldbook open`: the screen."""

from __future__ import annotations

import sys
from pathlib import Path

import click

from fieldbook.commands.open_book import reading
from fieldbook.errors import BookError, UsageError


@click.command("open", help="Open BOOK on the screen: set-up, occupation, reduction, certificate, by keyboard.")
@click.argument("book", type=click.Path(path_type=Path))
def command(book: Path) -> int:
    """Make sure that it is a book and that there is a terminal, then hand over to the screen."""
    _look(book)
    if not (sys.stdin.isatty() and sys.stdout.isatty()):
        raise UsageError(
            "The screen needs a terminal.", "Run it in one, or use `fieldbook status` and `fieldbook watch`."
        )
    from fieldbook.screens.app import run

    return run(book)


def _look(book: Path) -> None:
    """Is it a book? One of an older version is brought up to date here, by opening it once for writing.

    Raises:
        BookError: not a book, newer, damaged.
    """
    try:
        with reading(book):
            return
    except BookError as error:
        if error.code != "older":
            raise
    from fieldbook.book.store import Book
    from fieldbook.clock import SystemClock

    with Book.open(book, clock=SystemClock(), write=True):
        pass
