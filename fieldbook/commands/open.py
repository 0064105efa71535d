"""`fieldbook open`: the screen."""

from __future__ import annotations

import sys
from pathlib import Path

import click

from fieldbook.commands.open_book import reading
from fieldbook.errors import UsageError


@click.command("open", help="Open BOOK on the screen: set-up, occupation, reduction, certificate, by keyboard.")
@click.argument("book", type=click.Path(path_type=Path))
def command(book: Path) -> int:
    """Make sure that it is a book and that there is a terminal, then hand over to the screen."""
    with reading(book):
        pass
    if not (sys.stdin.isatty() and sys.stdout.isatty()):
        raise UsageError(
            "The screen needs a terminal.", "Run it in one, or use `fieldbook status` and `fieldbook watch`."
        )
    from fieldbook.screens.app import run

    return run(book)
