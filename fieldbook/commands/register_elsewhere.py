"""`fieldbook register elsewhere`: published control and post-processed results from a CSV file."""

from __future__ import annotations

from pathlib import Path

import click

from fieldbook.commands.open_register import writing
from fieldbook.commands.output import line
from fieldbook.errors import UsageError


@click.command("elsewhere")
@click.argument("register", type=click.Path(path_type=Path))
@click.argument("file", type=click.Path(path_type=Path), required=False)
@click.option("--by", help="Name of who takes them in.")
@click.option("--columns", is_flag=True, help="Say what the columns are, and read nothing.")
def command(register: Path, file: Path | None, by: str | None, columns: bool) -> None:
    """Take the coordinates of FILE into REGISTER, with frame, epoch, uncertainty and source of each."""
    from fieldbook.register import elsewhere

    if columns:
        line(
            (elsewhere.__doc__ or "")
            .partition("Columns")[2]
            .partition("Nothing has a default")[0]
            .partition("\n\n")[2]
            .rstrip()
        )
        return
    if file is None or not (by or "").strip():
        raise UsageError("A list needs a file and a name.", "Give FILE and --by NAME.")
    with writing(register, begin_by=by) as opened:
        entry, count = elsewhere.add_elsewhere(opened, file, by=str(by))
    line(
        f"{file}: unchanged, in the register already"
        if entry is None
        else f"{file}: {count} coordinates, entry {entry.seq}"
    )
