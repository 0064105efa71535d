"""`fieldbook watch`: one plain line a second about a running recorder, for screen readers, logs and slow links."""

from __future__ import annotations

import sys
import time
from pathlib import Path

import click

from fieldbook.commands.output import line
from fieldbook.commands.status import status_tree
from fieldbook.commands.words import head_line
from fieldbook.errors import ExitCode


@click.command("watch", help="One plain line a second about the recorder of BOOK, until Ctrl+C or --count lines.")
@click.argument("book", type=click.Path(path_type=Path))
@click.option("--count", type=click.IntRange(min=1), help="Stop after so many lines.")
def command(book: Path, count: int | None) -> int:
    """Ask, tell, wait."""
    told = 0
    try:
        while True:
            line(head_line(status_tree(book)))
            sys.stdout.flush()
            told += 1
            if count is not None and told >= count:
                return int(ExitCode.OK)
            time.sleep(1.0)
    except KeyboardInterrupt:
        return int(ExitCode.INTERRUPTED)  # watching touches nothing: there is nothing to say
