"""`fieldbook register check`: what is not in order. Exit 1 when anything is found."""

from __future__ import annotations

from collections import Counter
from dataclasses import asdict
from pathlib import Path

import click

from fieldbook.commands.open_register import reading
from fieldbook.commands.output import line, write_json
from fieldbook.errors import ExitCode


@click.command("check")
@click.argument("register", type=click.Path(path_type=Path))
@click.option("--classes", type=click.Path(path_type=Path), help="TOML file with the office's accuracy classes.")
@click.option("--json", "as_json", is_flag=True, help="Result as JSON.")
def command(register: Path, classes: Path | None, as_json: bool) -> int:
    """Marks of REGISTER with one occupation, ties out of tolerance, classes not met, frames mixed, and the like."""
    from fieldbook.register.checks import check_register
    from fieldbook.register.classes import load_classes

    known = [] if classes is None else load_classes(classes)
    with reading(register) as opened:
        found = check_register(opened, known)
        marks = len(opened.state().marks())
    if as_json:
        tree = {"in_order": not found, "marks": marks, "found": [asdict(item) for item in found]}
        write_json({"schema": "fieldbook.register.check/1", "register": str(register), **tree})
    else:
        for item in found:
            who = "register" if item.mark is None else f"{item.mark} {item.name}"
            line(f"{item.severity:<8} {item.code:<22} {who}: {item.text}")
        counts = ", ".join(f"{count} {code}" for code, count in Counter(item.code for item in found).most_common())
        line(f"{marks} marks: {counts or 'in order'}")
    return int(ExitCode.DOES_NOT_HOLD if found else ExitCode.OK)
