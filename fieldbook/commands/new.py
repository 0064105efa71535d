"""`fieldbook new`: begin a book from a session file."""

from __future__ import annotations

from pathlib import Path

import click

from fieldbook.clock import SystemClock
from fieldbook.commands.output import line, write_json
from fieldbook.commands.signing import chosen, key_option, signed_tree


@click.command("new", help="Begin BOOK. The session file is kept in it and offered for the first occupation.")
@click.argument("book", type=click.Path(path_type=Path))
@click.option("--from", "session_path", required=True, type=click.Path(path_type=Path), help="Session file (TOML).")
@key_option
@click.option("--json", "as_json", is_flag=True, help="The result as JSON on stdout.")
def command(book: Path, session_path: Path, key_path: Path | None, *, as_json: bool) -> None:
    """Check the session, then make the file."""
    from fieldbook.book.store import Book
    from fieldbook.links.address import parse_link
    from fieldbook.occupy.frame_check import check_session_frames
    from fieldbook.settings.session import load_session, merged
    from fieldbook.signing.in_book import sign_head

    session = load_session(session_path)
    check_session_frames(session, session_path.resolve().parent)
    address = parse_link(session.receiver.link, session_path.resolve().parent)
    tree = merged(
        session.tree, {"receiver": {"link": address.text}}
    )  # a relative file stays the one beside the session
    choice = chosen(session.job.observer, key_path)
    made = Book.create(book, clock=SystemClock(), observer=session.job.observer, session_tree=tree)
    try:
        if choice.signer is not None:
            sign_head(made, choice.signer)
        state = made.state()
    finally:
        made.close_clean()
    choice.say()
    if as_json:
        head = {"seq": state.head_seq, "hash": state.head_hash}
        write_json(
            {
                "schema": "fieldbook.new/1",
                "book": {"path": str(book), "id": state.id, "head": head},
                "signed": signed_tree(choice.signer),
            }
        )
    else:
        line(f"{book}: book {state.id}, mark {session.mark.name} ready for its first occupation")
