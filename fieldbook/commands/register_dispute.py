"""`fieldbook register dispute`: everything the register holds behind one number, as one JSON file."""

from __future__ import annotations

import json
from pathlib import Path

import click

from fieldbook.commands.open_register import reading
from fieldbook.commands.output import line, write_json
from fieldbook.errors import UsageError


@click.command("dispute")
@click.argument("register", type=click.Path(path_type=Path))
@click.argument("number")
@click.option("--out", type=click.Path(path_type=Path), help="File to write (.json); else it goes to standard output.")
@click.option("--json", "as_json", is_flag=True, help="JSON on standard output (there is no other form).")
def command(register: Path, number: str, out: Path | None, as_json: bool) -> None:  # noqa: ARG001 - for scripts' sake
    """What stands behind NUMBER, of a certificate or of a published value: digests, readings, rules met and not, revisions, who signed."""
    from fieldbook.register.dispute import dispute_pack

    if out is not None and out.exists():
        raise UsageError(f"{out} exists already.", "Name another file.", code="out_exists")
    with reading(register) as opened:
        tree = dispute_pack(opened, number)
    if out is None:
        write_json(tree)
        return
    out.write_bytes((json.dumps(tree, indent=1, ensure_ascii=True, allow_nan=False) + "\n").encode("ascii"))
    unmet = sum(len(item.get("rules_not_met", [])) for item in tree["occupations"])
    line(f"{out}: {len(tree['occupations'])} occupations, {unmet} rules not met, {len(tree['certificates'])} revisions")
