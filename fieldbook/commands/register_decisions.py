"""`fieldbook register decisions`: who decided what, when and why; struck ones stay legible."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from fieldbook.commands.open_register import reading
from fieldbook.commands.output import line, write_json


@click.command("decisions")
@click.argument("register", type=click.Path(path_type=Path))
@click.option("--json", "as_json", is_flag=True, help="Result as JSON.")
def command(register: Path, as_json: bool) -> None:
    """All decisions of REGISTER in their order."""
    from fieldbook.register.kinds import STRIKABLE

    with reading(register) as opened:
        state = opened.state()
    found: list[dict[str, Any]] = [
        {
            "seq": entry.seq,
            "utc": entry.utc,
            "by": entry.observer,
            "kind": entry.kind,
            "body": entry.body,
            "hash": entry.hash,
            "struck_by": state.struck[entry.seq].seq if entry.seq in state.struck else None,
        }
        for entry in state.entries
        if entry.kind in STRIKABLE
    ]
    if as_json:
        write_json({"schema": "fieldbook.register.decisions/1", "decisions": found})
        return
    for item in found:
        struck = f"  STRUCK by entry {item['struck_by']}" if item["struck_by"] else ""
        line(f"{item['seq']:>5}  {item['utc'][:16]}  {item['by']}: {_words(item['kind'], item['body'])}{struck}")


def _words(kind: str, body: dict[str, Any]) -> str:
    what = {
        "same": lambda: f"marks {body['marks'][0]} and {body['marks'][1]} are one",
        "different": lambda: f"marks {body['marks'][0]} and {body['marks'][1]} are two",
        "reset": lambda: f"mark {body['mark']} was re-set; from {body['from_utc']} it is mark {body['number']}",
        "separate": lambda: f"occupation {body['book'][:8]}/{body['occupation']} is of mark {body['number']}",
        "exclude": lambda: f"occupation {body['book'][:8]}/{body['occupation']} is set apart",
        "name": lambda: f"mark {body['mark']} is called {body['name']}",
        "frame": lambda: f"the register is in {body['frame']}" + (f" at {body['epoch']}" if body["epoch"] else ""),
        "rule": lambda: f"{body['rule']} within {body['within_m']} m is accepted where nothing speaks against it",
        "strike": lambda: f"entry {body['seq']} is struck",
    }[kind]()
    return f"{what}: {body['reason']}"
