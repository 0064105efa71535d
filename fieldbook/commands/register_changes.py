"""`fieldbook register changes`: what is not in force any more as it was on a date, by how much, and why."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from fieldbook.commands.open_register import reading
from fieldbook.commands.output import line, write_json

if TYPE_CHECKING:
    from fieldbook.register.history import Since


@click.command("changes")
@click.argument("register", type=click.Path(path_type=Path))
@click.option("--since", required=True, help="Date (2027-03-01: what was in force at its end) or time.")
@click.option("--json", "as_json", is_flag=True, help="Result as JSON.")
def command(register: Path, since: str, as_json: bool) -> None:
    """Published values of REGISTER that changed since a date."""
    from fieldbook.register.history import changes_since

    with reading(register) as opened:
        found = changes_since(opened.state(), since)
    if as_json:
        trees = [_tree(item) for item in found]
        write_json({"schema": "fieldbook.register.changes/1", "since": since, "marks": trees})
        return
    if not found:
        line(f"nothing changed since {since}")
    for item in found:
        line(f"{item.mark} {item.name}: {item.then or 'nothing'} then, {item.now or 'nothing'} now{_by(item)}")
        for step in item.steps:
            what = step.body["change"]["verdict"] if step.kind == "published" else "withdrawn"
            line(f"   {step.utc[:10]} {step.observer}: {step.body['number']}, {what}. {step.body['reason']}")


def _by(item: Since) -> str:
    if item.difference_enu_m is None:
        return ""
    east, north, up = item.difference_enu_m
    height = "not known" if up is None else f"{1000 * up:+.1f}"
    return f"; east {1000 * east:+.1f}, north {1000 * north:+.1f}, up {height} mm"


def _tree(item: Since) -> dict[str, Any]:
    steps = [
        {
            "utc": step.utc,
            "by": step.observer,
            "kind": step.kind,
            "number": step.body["number"],
            "change": step.body.get("change"),
            "reason": step.body["reason"],
        }
        for step in item.steps
    ]
    difference = None if item.difference_enu_m is None else list(item.difference_enu_m)
    return {
        "mark": item.mark,
        "name": item.name,
        "then": item.then,
        "now": item.now,
        "difference_enu_m": difference,
        "steps": steps,
    }
