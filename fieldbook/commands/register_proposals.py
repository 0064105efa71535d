"""`fieldbook register proposals`: which marks may be one, which may have been re-set, with what speaks for and against."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from fieldbook.commands.open_register import reading
from fieldbook.commands.output import line, write_json

if TYPE_CHECKING:
    from fieldbook.register.identity import Proposal


@click.command("proposals")
@click.argument("register", type=click.Path(path_type=Path))
@click.option("--mark", help="Only what concerns this mark (number or name).")
@click.option("--json", "as_json", is_flag=True, help="Result as JSON.")
def command(register: Path, mark: str | None, as_json: bool) -> None:
    """Open questions of REGISTER: nothing is merged until somebody decides (`register decide`)."""
    from fieldbook.register.decisions import find_mark
    from fieldbook.register.identity import proposals

    with reading(register) as opened:
        state = opened.state()
        found = proposals(state, None if mark is None else [find_mark(state, mark).number])
    if as_json:
        write_json({"schema": "fieldbook.register.proposals/1", "proposals": [tree_of(item) for item in found]})
        return
    if not found:
        line("no open question")
    for item in found:
        for text in lines_of(item):
            line(text)


def tree_of(item: Proposal) -> dict[str, Any]:
    """A proposal as JSON."""
    seen = item.seen
    return {
        "case": item.case,
        "marks": list(item.marks),
        "names": list(item.names),
        "suggested": list(item.suggested),
        "from_utc": item.from_utc,
        "distance_m": seen.distance_m,
        "height_difference_m": seen.height_difference_m,
        "joint_u95_m": seen.joint_u95_m,
        "comparable": seen.comparable,
        "together": seen.together,
        "for": list(seen.supports),
        "against": list(seen.against),
        "text": item.text,
    }


def lines_of(item: Proposal) -> list[str]:
    """A proposal for people, with the commands that answer it."""
    seen = item.seen
    found = [item.text]
    if seen.joint_u95_m is not None:
        up = "" if seen.height_difference_m is None else f", heights {seen.height_difference_m:+.3f} m"
        found.append(f"  both can be wrong by {seen.joint_u95_m:.3f} m (95 %){up}")
    found += [f"  for      {text}" for text in seen.supports]
    found += [f"  against  {text}" for text in seen.against]
    found += [f"  decide   {text}" for text in _answers(item)]
    return found


def _answers(item: Proposal) -> list[str]:
    pair = " ".join(map(str, item.marks))
    words = {
        "same": f"same {pair}",
        "different": f"different {pair}",
        "reset": f"reset {item.marks[0]} --from {item.from_utc}",
        "separate": "separate OCCUPATION",
        "exclude": "exclude OCCUPATION",
        "frame": "frame EPSG:CODE (then the distance can be told)",
    }
    if "reset" in item.suggested and len(item.marks) == 2:
        words["reset"] = f"reset {item.marks[0]} --from {item.from_utc} --as {item.marks[1]}"
    return list(dict.fromkeys(words[name] for name in item.suggested))
