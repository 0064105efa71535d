"""`fieldbook certify`: the certificate of a mark, or a draft of it, in the format of the file's ending."""

from __future__ import annotations

from pathlib import Path

import click

from fieldbook.clock import SystemClock
from fieldbook.commands.output import line, note, plain, write_json


@click.command()
@click.argument("book", type=click.Path(path_type=Path))
@click.argument("mark")
@click.option("--out", required=True, type=click.Path(path_type=Path), help="File to write: .pdf .html .txt .json.")
@click.option("--occupation", type=int, help="Which occupation; without it all that can be combined.")
@click.option("--sign-off", help='"name; licence" of the responsible surveyor; without it a draft.')
@click.option("--supersede", metavar="REASON", help="Why a standing certificate is replaced.")
@click.option("--replace", is_flag=True, help="Overwrite the file.")
@click.option("--json", "as_json", is_flag=True, help="Say what was written as JSON.")
def command(
    book: Path,
    mark: str,
    out: Path,
    occupation: int | None,
    sign_off: str | None,
    supersede: str | None,
    replace: bool,
    as_json: bool,
) -> None:
    """Issue the certificate of MARK from BOOK."""
    from fieldbook.book.store import Book
    from fieldbook.commands.paper import issue

    with Book.open(book, clock=SystemClock(), write=True) as opened:
        issued = issue(
            opened, mark, out, occupation=occupation, sign_off=sign_off, supersede=supersede, replace=replace
        )
    if as_json:
        write_json(
            {
                "schema": "fieldbook.certify/1",
                "number": issued.number,
                "draft": issued.draft,
                "path": str(issued.path),
                "digest": issued.digest,
                "missing": issued.missing,
                "again": issued.again,
                "supersedes": issued.supersedes,
            }
        )
        return
    title = "draft, no number" if issued.draft else f"certificate {issued.number}"
    line(f"{plain(issued.path)}: {title} of {mark}, digest {issued.digest[:12]}…")
    if issued.supersedes:
        line(f"supersedes {issued.supersedes}")
    for item in issued.missing:
        note(f"keeps it a draft: {item}")
