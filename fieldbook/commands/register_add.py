"""`fieldbook register add`: books into the register, each verified first. Exit 4 if one was refused; the others are added."""

from __future__ import annotations

from dataclasses import asdict
from pathlib import Path
from typing import TYPE_CHECKING

import click

from fieldbook.clock import SystemClock
from fieldbook.commands.open_register import writing
from fieldbook.commands.output import Progress, line, note, write_json
from fieldbook.errors import ExitCode, UsageError

if TYPE_CHECKING:
    from fieldbook.register.adding import Outcome


@click.command("add")
@click.argument("register", type=click.Path(path_type=Path))
@click.argument("books", nargs=-1, required=True, type=click.Path(path_type=Path))
@click.option("--by", required=True, help="Name of who adds them.")
@click.option("--json", "as_json", is_flag=True, help="Result as JSON.")
def command(register: Path, books: tuple[Path, ...], by: str, as_json: bool) -> int:
    """Verify BOOKS and add them to REGISTER, which is begun where there is none. Books are only read."""
    from fieldbook.commands.verify import book_findings
    from fieldbook.register.adding import add_book
    from fieldbook.register.decisions import apply_rule
    from fieldbook.signing.keyring import trust

    for path in books:
        if not path.exists():
            raise UsageError(f"{path} does not exist.", "Check the name; nothing was added.", code="missing")
    if not by.strip():
        raise UsageError("Whoever adds books must be named.", "Give --by NAME.", code="no_name")
    known, progress, outcomes = trust(), Progress(), []
    with writing(register, begin_by=by) as opened:
        for number, path in enumerate(books, 1):
            progress.show(f"{number} of {len(books)}: {path}")
            outcomes.append(
                add_book(opened, path, by=by, clock=SystemClock(), verify=lambda one: book_findings(one, known))
            )
        progress.close()
        accepted = apply_rule(opened, by=by)
        state = opened.state()
    refused = any(item.refused for item in outcomes)
    if as_json:
        held = {"path": str(register), "id": state.id, "head_seq": state.head_seq, "head": state.head_hash}
        tree = {"register": held, "books": [asdict(item) for item in outcomes]}
        write_json({"schema": "fieldbook.register.add/1", **tree, "accepted": [entry.seq for entry in accepted]})
    else:
        for item in outcomes:
            _say(item)
        if accepted:
            line(f"{len(accepted)} pairs of marks accepted as one by the rule of entry {accepted[0].body['rule']}")
    return int(ExitCode.BOOK if refused else ExitCode.OK)


def _say(item: Outcome) -> None:
    line(f"{item.path}: {item.outcome}. {item.text}")
    for text in item.details:
        line(f"  {text}")
    if item.remedy:
        note(f"  {item.path}: {item.remedy}")
