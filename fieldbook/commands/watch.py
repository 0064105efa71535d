"""`fieldbook watch`: one plain line a second about a running recorder, for screen readers, logs and slow links."""

from __future__ import annotations

import sys
import time
from pathlib import Path

import click

from fieldbook.commands.output import line
from fieldbook.commands.status import live_reader, status_tree
from fieldbook.commands.words import figures_line, head_line
from fieldbook.errors import ExitCode


@click.command("watch", help="One plain line a second about the recorder of BOOK, until Ctrl+C or --count lines.")
@click.argument("book", type=click.Path(path_type=Path))
@click.option("--count", type=click.IntRange(min=1), help="Stop after so many lines.")
def command(book: Path, count: int | None) -> int:
    """Look, tell, wait."""
    reader, told = live_reader(book), 0
    try:
        while True:
            tree = status_tree(book, reader.snapshot())
            line(f"{head_line(tree)}; {figures_line(tree)}")
            sys.stdout.flush()
            told += 1
            if count is not None and told >= count:
                return int(ExitCode.OK)
            time.sleep(1.0)
    except KeyboardInterrupt:
        return int(ExitCode.INTERRUPTED)  # watching touches nothing: there is nothing to say
    finally:
        reader.close()
