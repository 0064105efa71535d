"""`fieldbook register decide`: the operator's decisions, each an entry with who, when, why and what was seen."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from fieldbook.commands.open_register import writing
from fieldbook.commands.output import line, write_json
from fieldbook.errors import UsageError

if TYPE_CHECKING:
    from fieldbook.model.entry import Entry
    from fieldbook.register.store import Register

KINDS = ("same", "different", "reset", "separate", "exclude", "name", "frame", "rule", "strike")


@click.command("decide")
@click.argument("register", type=click.Path(path_type=Path))
@click.argument("kind", type=click.Choice(KINDS))
@click.argument("what", nargs=-1, required=True)
@click.option("--from", "from_utc", help="Of a reset: the date or time from which the mark is a new point.")
@click.option("--as", "known_as", help="Of a reset: the mark, known already, that it is from then on.")
@click.option("--epoch", help="Of a frame that moves: decimal year.")
@click.option("--within", type=float, help="Of a rule: distance in metres.")
@click.option("--reason", required=True, help="Why.")
@click.option("--by", required=True, help="Name of who decides.")
@click.option("--json", "as_json", is_flag=True, help="Result as JSON.")
def command(
    register: Path,
    kind: str,
    what: tuple[str, ...],
    from_utc: str | None,
    known_as: str | None,
    epoch: str | None,
    within: float | None,
    reason: str,
    by: str,
    as_json: bool,
) -> None:
    """Write a decision into REGISTER.

    \b
    same A B            two marks (numbers, or names that one mark bears) are one
    different A B       they are two; no proposal any more
    reset A --from D    from that date the mark is a new point, with a new number (or --as B)
    separate 3f2a91c0/2 an occupation is of another mark than its book says
    exclude 3f2a91c0/2  an occupation takes no part
    name A NAME         how the register calls a mark
    frame EPSG:7843     the frame of the register (--epoch where it moves)
    rule same-name --within 0.05   accept by itself where nothing speaks against it
    strike SEQ          take a decision out again
    """
    with writing(register) as opened:
        given = {"--from": from_utc, "--as": known_as, "--epoch": epoch, "--within": within}
        written = _decide(opened, kind, what, given, reason=reason, by=by)
    if as_json:
        trees = [{"seq": entry.seq, "kind": entry.kind, "hash": entry.hash, "body": entry.body} for entry in written]
        write_json({"schema": "fieldbook.register.decide/1", "written": trees})
        return
    for entry in written:
        line(f"{entry.seq} {entry.hash}  {entry.kind}{_result(entry)}")


def _result(entry: Entry) -> str:
    if entry.kind in ("reset", "separate"):
        return f": mark {entry.body['number']}"
    return f" {entry.body['marks'][0]} {entry.body['marks'][1]}" if "marks" in entry.body else ""


def _decide(
    register: Register, kind: str, what: tuple[str, ...], given: dict[str, Any], *, reason: str, by: str
) -> list[Entry]:
    from fieldbook.register import decisions

    takes = {"reset": ("--from", "--as"), "frame": ("--epoch",), "rule": ("--within",)}.get(kind, ())
    for option, value in given.items():
        if value is not None and option not in takes:
            raise UsageError(f"`decide {kind}` takes no {option}.", "Leave it out.")
    number = 2 if kind in ("same", "different", "name") else 1
    if len(what) != number:
        words = {"same": "two marks", "different": "two marks", "name": "a mark and its name"}
        raise UsageError(f"`decide {kind}` takes {words.get(kind, 'one thing')}, not {len(what)}.", "See --help.")
    who = {"by": by, "reason": reason}
    simple: dict[str, Callable[..., Entry]] = {
        "same": decisions.decide_same,
        "different": decisions.decide_different,
        "separate": decisions.decide_separate,
        "exclude": decisions.decide_exclude,
        "name": decisions.decide_name,
    }
    if kind in simple:
        return [simple[kind](register, *what, **who)]
    if kind == "frame":
        return [decisions.decide_frame(register, what[0], given["--epoch"], **who)]
    if kind == "strike":
        if not what[0].isdecimal():
            raise UsageError(f'"{what[0]}" is no number of an entry.', "`fieldbook register decisions` lists them.")
        return [decisions.strike(register, int(what[0]), **who)]
    if kind == "reset":
        if given["--from"] is None:
            raise UsageError("A reset needs the moment from which the mark is a new point.", "Give --from 2027-05-01.")
        return [decisions.decide_reset(register, what[0], given["--from"], given["--as"], **who)]
    if what[0] not in ("same-name", decisions.SAME_NAME_RULE):
        raise UsageError(f'There is no rule "{what[0]}".', "There is one: same-name.")
    if given["--within"] is None:
        raise UsageError("The rule needs a distance.", "Give --within 0.05.")
    return decisions.decide_rule(register, given["--within"], **who)
