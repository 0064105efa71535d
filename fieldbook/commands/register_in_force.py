"""`fieldbook register in-force`: which value of a mark was in force on a date; superseded ones say so first."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from fieldbook.commands.open_register import reading
from fieldbook.commands.output import line, note, write_json

if TYPE_CHECKING:
    from fieldbook.register.history import Published


@click.command("in-force")
@click.argument("register", type=click.Path(path_type=Path))
@click.argument("mark")
@click.option("--on", help="Date (2027-03-01: at its end) or time; today without.")
@click.option("--all", "every", is_flag=True, help="The whole history of the mark.")
@click.option("--json", "as_json", is_flag=True, help="Result as JSON.")
def command(register: Path, mark: str, on: str | None, every: bool, as_json: bool) -> None:
    """The published value of MARK in force on a date, with its evidence and what followed it."""
    from fieldbook.register.decisions import find_mark
    from fieldbook.register.history import history, in_force, published_tree

    with reading(register) as opened:
        state = opened.state()
        found = find_mark(state, mark)
        held = in_force(state, found.number, on)
        values = history(state, found.number) if every else [held] if held is not None else []
    if as_json:
        tree = {"mark": found.number, "name": found.name, "on": on, "values": [published_tree(item) for item in values]}
        write_json({"schema": "fieldbook.register.in-force/1", **tree})
        return
    if not values:
        note(
            f"No published value of {found.name} (mark {found.number}) was in force{'' if on is None else f' on {on}'}."
        )
    for item in values:
        for text in lines_of(item):
            line(text)


def lines_of(item: Published) -> list[str]:
    """A published value for people; the warning comes before the figures."""
    body, place, accuracy = item.entry.body, item.entry.body["place"], item.entry.body["datum_accuracy"]
    found = []
    if item.withdrawn is not None:
        found.append(
            f"WITHDRAWN {str(item.until_utc)[:10]} by {item.withdrawn.observer}: {item.withdrawn.body['reason']} Do not use."
        )
    elif item.successor is not None:
        found.append(f"SUPERSEDED {str(item.until_utc)[:10]} by {item.successor}. Do not use for new work.")
    epoch = "" if place["epoch"] is None else f" at {place['epoch']}"
    found.append(f"{item.number}  {body['name']}  in force from {item.entry.utc} ({item.entry.observer})")
    found.append(
        f"   {place['lat_deg']} {place['lon_deg']} h {place['h_m']} m, {place['frame_name']} ({place['frame']}){epoch}"
    )
    found.append(
        f"   relative to the datum, 95 %: plan {accuracy['horizontal95_m']} m, height {accuracy['vertical95_m']} m"
    )
    change = body["change"]["verdict"]
    over = "" if body["supersedes"] is None else f", supersedes {body['supersedes']} ({change})"
    labels = ", ".join(f"{book[:8]}/{number}" for book, number, _ in body["evidence"])
    found.append(f"   from {labels}{over}: {body['reason']}")
    return found
