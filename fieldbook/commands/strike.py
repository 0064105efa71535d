"""`fieldbook strike`: strike out an entry, with reason, observer and time; the struck entry stays legible."""

from __future__ import annotations

from pathlib import Path

import click

from fieldbook.book.kinds import STRIKABLE
from fieldbook.commands.open_book import writing
from fieldbook.commands.output import line, write_json
from fieldbook.commands.signing import chosen, key_option, say_unsigned, signed_tree
from fieldbook.errors import UsageError
from fieldbook.signing.in_book import signed_by


@click.command(
    "strike",
    help="Strike out entry SEQ. What an observer wrote may be struck (remark, height, setup, mark, decision, session, "
    "occupation, an earlier strike); what was received or computed stands.",
)
@click.argument("book", type=click.Path(path_type=Path))
@click.argument("seq", type=int)
@click.option("--reason", required=True, help="Why; it is printed wherever the entry was used.")
@click.option("--by", "observer", required=True, help="Name of who strikes.")
@key_option
@click.option("--json", "as_json", is_flag=True, help="The result as JSON on stdout.")
def command(book: Path, seq: int, reason: str, observer: str, key_path: Path | None, *, as_json: bool) -> None:
    """Check that the entry may be struck, then append the strike."""
    if not reason.strip() or not observer.strip():
        raise UsageError("A strike needs a reason and a name.", "Give both --reason and --by.")
    choice = chosen(observer, key_path)
    with writing(book) as opened:
        target = next((entry for entry in opened.entries(after_seq=seq - 1) if entry.seq == seq), None)
        if target is None:
            raise UsageError(
                f"There is no entry {seq} in {book}.",
                f"Entries run from 1 to {opened.state().head_seq}.",
                code="unknown_entry",
            )
        if target.kind not in STRIKABLE:
            raise UsageError(
                f"Entry {seq} is a '{target.kind}' and cannot be struck.",
                f"Only these can: {', '.join(sorted(STRIKABLE))}.",
                code="not_strikable",
            )
        opened_one = opened.state().open_occupation
        if opened_one is not None and opened_one.entry_seq == seq:
            raise UsageError(
                f"Entry {seq} begins occupation {opened_one.number}, which is open.",
                "End it first: `fieldbook entry BOOK end`.",
                code="occupation_open",
            )
        already = opened.state().strikes.get(seq)
        if already is not None:
            raise UsageError(
                f"Entry {seq} was struck by entry {already.seq} already: {already.body['reason']}.",
                "Strike that strike if it was wrong.",
                code="struck_already",
            )
        with signed_by(opened, choice.signer):
            written = opened.append("strike", {"seq": seq, "reason": reason}, observer)
        say_unsigned(opened, observer, choice)
    if as_json:
        tree = {"seq": written.seq, "hash": written.hash, "kind": "strike", "signed": signed_tree(choice.signer)}
        write_json({"schema": "fieldbook.entry/1", **tree})
    else:
        line(f"{written.seq} {written.hash}  strikes entry {seq} ({target.kind})")
