"""`fieldbook export`: the received bytes of an occupation, identical."""

from __future__ import annotations

import hashlib
import os
import tempfile
from pathlib import Path

import click

from fieldbook.commands.open_book import chosen_occupation, reading
from fieldbook.commands.output import line, write_json
from fieldbook.errors import UsageError


@click.command("export", help="Write the received bytes of an occupation to a file, identical to what came in.")
@click.argument("book", type=click.Path(path_type=Path))
@click.option("--raw", is_flag=True, help="The received bytes (the only form there is).")
@click.option("--occupation", type=int, help="Number of the occupation; needed when there are several.")
@click.option("--out", required=True, type=click.Path(path_type=Path), help="File to write.")
@click.option("--replace", is_flag=True, help="Write over an existing file.")
@click.option("--json", "as_json", is_flag=True, help="The result as JSON on stdout.")
def command(book: Path, occupation: int | None, out: Path, *, raw: bool, replace: bool, as_json: bool) -> None:
    """Write beside, then rename, so that a half file never bears the name."""
    if not raw:
        raise UsageError("What is to be exported is not said.", "Add --raw for the received bytes.")
    if out.is_dir():
        raise UsageError(f"{out} is a folder.", "Name a file.")
    if os.path.realpath(out) == os.path.realpath(book):
        raise UsageError("--out names the book itself.", "Name another file.")
    if (out.exists() or out.is_symlink()) and not replace:
        raise UsageError(f"{out} exists already.", "Name another file, or add --replace.", code="out_exists")
    with reading(book) as opened:
        number = chosen_occupation(opened.state(), occupation).number
        size, sha256 = _write(opened.received(number), out)
    if as_json:
        tree = {"occupation": number, "file": str(out), "bytes": size, "sha256": sha256}
        write_json({"schema": "fieldbook.export/1", "book": str(book), **tree})
    else:
        line(f"{out}: {size} bytes of occupation {number}, SHA-256 {sha256}")


def _write(pieces, out: Path) -> tuple[int, str]:  # type: ignore[no-untyped-def]
    total, size = hashlib.sha256(), 0
    handle, name = tempfile.mkstemp(prefix=f".{out.name}.", dir=out.absolute().parent)
    part = Path(name)
    try:
        with os.fdopen(handle, "wb") as stream:
            for piece in pieces:
                stream.write(piece)
                total.update(piece)
                size += len(piece)
        part.replace(out)
    finally:
        part.unlink(missing_ok=True)
    return size, total.hexdigest()
