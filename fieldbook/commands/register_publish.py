"""`fieldbook register publish`: what the evidence gives today becomes the value in force, with a number."""

from __future__ import annotations

from dataclasses import asdict
from pathlib import Path

import click

from fieldbook.commands.open_register import writing
from fieldbook.commands.output import line, note, write_json
from fieldbook.errors import UsageError


@click.command("publish")
@click.argument("register", type=click.Path(path_type=Path))
@click.argument("marks", nargs=-1)
@click.option("--all", "every", is_flag=True, help="All marks that have a coordinate and no stop.")
@click.option(
    "--withdraw", is_flag=True, help="Withdraw the value in force instead; the reason is told to whoever asks."
)
@click.option("--reason", required=True, help="Why.")
@click.option("--by", required=True, help="Name of who publishes.")
@click.option("--json", "as_json", is_flag=True, help="Result as JSON.")
def command(
    register: Path, marks: tuple[str, ...], every: bool, withdraw: bool, reason: str, by: str, as_json: bool
) -> None:
    """Publish MARKS (numbers or names). What is in force with the same evidence is left as it is."""
    from fieldbook.register import history
    from fieldbook.register.decisions import find_mark

    if every == bool(marks) or (withdraw and every):
        raise UsageError("Name marks, or give --all.", "--withdraw takes named marks only.")
    with writing(register) as opened:
        state = opened.state()
        chosen = [find_mark(state, text) for text in marks]
        if withdraw:
            with opened.transaction():
                entries = [history.withdraw(opened, mark, by=by, reason=reason) for mark in chosen]
            outcomes = [
                history.Outcome(mark.number, mark.name, "withdrawn", reason, str(entry.body["number"]))
                for mark, entry in zip(chosen, entries, strict=True)
            ]
        else:
            only = None if every else [mark.number for mark in chosen]
            outcomes = history.publish(opened, only, by=by, reason=reason)
    if as_json:
        write_json({"schema": "fieldbook.register.publish/1", "marks": [asdict(item) for item in outcomes]})
    else:
        for item in outcomes:
            number = "" if item.number is None else f" {item.number}"
            line(f"{item.mark} {item.name}: {item.outcome}{number}. {item.text}")
    refused = [item for item in outcomes if item.outcome == "refused"]
    if refused and not every:
        raise UsageError(
            f"{', '.join(item.name for item in refused)} cannot be published.",
            "Answer what stops it, then publish again; the others named were published.",
            code="not_published",
        )
    if refused:
        note(f"{len(refused)} marks were not published: `fieldbook register check` says what stops them.")
