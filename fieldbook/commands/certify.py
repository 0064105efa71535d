"""`fieldbook certify`: the certificate of a mark, or a draft of it, in the format of the file's ending."""

from __future__ import annotations

from pathlib import Path

import click

from fieldbook.clock import SystemClock
from fieldbook.commands.output import line, note, plain, write_json
from fieldbook.commands.signing import Choice, chosen, key_option, signed_tree


@click.command()
@click.argument("book", type=click.Path(path_type=Path))
@click.argument("mark")
@click.option("--out", required=True, type=click.Path(path_type=Path), help="File to write: .pdf .html .txt .json.")
@click.option("--occupation", type=int, help="Which occupation; without it all that can be combined.")
@click.option("--sign-off", help='"name; licence" of the responsible surveyor; without it a draft.')
@click.option("--supersede", metavar="REASON", help="Why a standing certificate is replaced.")
@click.option("--replace", is_flag=True, help="Overwrite the file.")
@key_option
@click.option("--json", "as_json", is_flag=True, help="Say what was written as JSON.")
def command(
    book: Path,
    mark: str,
    out: Path,
    occupation: int | None,
    sign_off: str | None,
    supersede: str | None,
    key_path: Path | None,
    replace: bool,
    as_json: bool,
) -> None:
    """Issue the certificate of MARK from BOOK."""
    from fieldbook.book.store import Book
    from fieldbook.certificate.facts import parse_sign_off
    from fieldbook.issuing import issue

    signed_off = parse_sign_off(sign_off)
    choice = Choice(None, "a draft is nobody's statement")
    if signed_off is not None:
        choice = chosen(signed_off["name"], key_path, any_name=True)
    signer = choice.signer
    with Book.open(book, clock=SystemClock(), write=True) as opened:
        issued = issue(
            opened,
            mark,
            out,
            occupation=occupation,
            sign_off=sign_off,
            supersede=supersede,
            replace=replace,
            signer=signer,
        )
    choice.say()
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
                "signature": issued.signature,
                "signed": signed_tree(signer),
            }
        )
        return
    title = "draft, no number" if issued.draft else f"certificate {issued.number}"
    line(f"{plain(issued.path)}: {title} of {mark}, digest {issued.digest[:12]}…")
    if signer is not None and issued.signature is None:
        note(f"The certificate {issued.number} stands as it was issued, unsigned; only its new entries are signed.")
    if issued.supersedes:
        line(f"supersedes {issued.supersedes}")
    for item in issued.missing:
        note(f"keeps it a draft: {item}")
