"""`fieldbook register list`: the books and marks of a register, without reducing or combining anything."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from fieldbook.commands.open_register import reading
from fieldbook.commands.output import line, write_json

if TYPE_CHECKING:
    from fieldbook.register.fold import HeldBook, Mark, RegisterState


@click.command("list")
@click.argument("register", type=click.Path(path_type=Path))
@click.option("--json", "as_json", is_flag=True, help="Result as JSON.")
def command(register: Path, as_json: bool) -> None:
    """The books of REGISTER, who added them when, and its marks with their occupations."""
    with reading(register) as opened:
        state = opened.state()
    if as_json:
        write_json(
            {
                "schema": "fieldbook.register.list/1",
                "register": {
                    "path": str(register),
                    "id": state.id,
                    "head_seq": state.head_seq,
                    "head": state.head_hash,
                },
                "books": [_book(item) for item in state.books.values()],
                "marks": [_mark(item, state) for item in state.marks().values()],
            }
        )
        return
    _print(state)


def _book(held: HeldBook) -> dict[str, Any]:
    return {
        "id": held.id,
        "kind": "list" if held.entry.kind == "elsewhere" else "book",
        "path": held.path,
        "head_seq": held.head_seq,
        "head": held.head_hash,
        "added_utc": held.entry.utc,
        "by": held.entry.observer,
        "entry": held.entry.seq,
        "states": len(held.heads),
        "versions": held.entry.body["versions"],
        "occupations": [item.occupation for item in held.occupations],
        "failed": list(held.failed),
        "certificates": [item["number"] for item in held.certificates],
    }


def _mark(mark: Mark, state: RegisterState) -> dict[str, Any]:
    excluded = state.excluded()
    return {
        "mark": mark.number,
        "name": mark.name,
        "names": list(mark.names),
        "numbers": list(mark.numbers),
        "from_utc": mark.from_utc,
        "until_utc": mark.until_utc,
        "described": [{"book": book, "name": name, "mark": tree} for book, name, tree in mark.described],
        "occupations": [
            {
                "book": item.book,
                "occupation": item.occupation,
                "label": item.label,
                "started": item.started,
                "excluded": item.key in excluded,
            }
            for item in mark.occupations
        ],
    }


def _print(state: RegisterState) -> None:
    line(f"Register {state.id}, {state.head_seq} entries")
    line(f"{len(state.books)} books and lists:")
    for held in state.books.values():
        what = f"entry {held.head_seq}, {len(held.occupations)} occupations"
        if held.entry.kind == "elsewhere":
            what = f"{len(held.occupations)} coordinates from elsewhere"
        line(f"  {held.prefix}  {held.path}: {what}; added by {held.entry.observer}, {held.entry.utc}")
        for item in held.failed:
            line(f"            occupation {item['occupation']} of {item['mark']} was not reduced: {item['text']}")
    marks, excluded = state.marks(), state.excluded()
    line(f"{len(marks)} marks:")
    for mark in marks.values():
        also = f" (also {', '.join(name for name in mark.names if name != mark.name)})" if len(mark.names) > 1 else ""
        span = f", reset {mark.from_utc}" if mark.from_utc else ""
        span += f", until {mark.until_utc}" if mark.until_utc else ""
        named = [f"{one.label}{' set apart' if one.key in excluded else ''}" for one in mark.occupations]
        line(f"  {mark.number:>5}  {mark.name}{also}{span}: {', '.join(named) or 'no occupation'}")
