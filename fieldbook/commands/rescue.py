"""`fieldbook rescue`: a new, sound book from what a damaged one still holds, and what was lost."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from fieldbook.clock import SystemClock
from fieldbook.commands.output import line, note, write_json

if TYPE_CHECKING:
    from fieldbook.model.rescue import RescuedOccupation, RescueReport

MOST_PROBLEMS, MOST_HOLES = 5, 10


@click.command(
    "rescue",
    help="Salvage what the damaged book BOOK still holds into a new book, and say what was lost. BOOK is only read.",
)
@click.argument("book", type=click.Path(path_type=Path))
@click.option("--out", required=True, type=click.Path(path_type=Path), help="The new book; never overwrites.")
@click.option("--json", "as_json", is_flag=True, help="The report as JSON on stdout.")
def command(book: Path, out: Path, *, as_json: bool) -> None:
    """Call, tell."""
    from fieldbook.occupy.rescuing import rescue

    report = rescue(book, out, SystemClock())
    if as_json:
        write_json(report.to_json())
    else:
        for text in lines_of(report):
            line(text)
    if not report.holds:
        note("The new book does not hold in every point: `fieldbook verify` says where.")


def lines_of(report: RescueReport) -> list[str]:
    """The report in words."""
    if report.outcome == "copy":
        if report.end_known:
            return [f"{report.book}: nothing is damaged; {report.new} is a complete copy of the same book"]
        return [*report.problems, f"{report.book}: nothing else is damaged; {report.new} is a copy of the same book"]
    problems = [f"damaged: {text}" for text in report.problems[:MOST_PROBLEMS]]
    if len(report.problems) > MOST_PROBLEMS:
        problems.append(f"damaged: and {len(report.problems) - MOST_PROBLEMS} more findings")
    if report.outcome == "repaired":
        done = f"{report.new}: the same book, its epochs decoded again from the received bytes; nothing was lost"
        return [*problems, done]
    said = [*problems, f"{report.new}: book {report.new_id}, rescued from {report.old_id or 'a book of unknown id'}"]
    said.append(f"entries: {report.entries_carried} carried{_entries(report)}")
    if not report.end_known:
        said.append("the end of the old book cannot be read for certain: entries written last may be missing")
    for occupation in report.occupations:
        said += _occupation(occupation)
    if report.certificates:
        numbers = ", ".join(report.certificates)
        said.append(f"certificates of the old book, not standing in the new one: {numbers}. Issue them anew.")
    return said


def _entries(report: RescueReport) -> str:
    parts = [
        (f"{_spans(report.entries_lost)} lost", report.entries_lost),
        (f"{_spans(report.entries_damaged)} damaged", report.entries_damaged),
        (f"one bit put right in {', '.join(map(str, report.entries_mended))}", report.entries_mended),
    ]
    return "".join(f"; {text}" for text, found in parts if found)


def _spans(spans: list[list[int]]) -> str:
    return ", ".join(str(first) if first == last else f"{first} to {last}" for first, last in spans)


def _occupation(done: RescuedOccupation) -> list[str]:
    name = f"occupation {done.occupation}" + (f" of {done.mark}" if done.mark else "")
    if done.whole and done.mark is not None:
        return [f"{name}: whole, {done.received_bytes} bytes, {done.epochs} epochs"]
    stated = f" of {done.stated_bytes}" if done.stated_bytes is not None else ""
    kinds = [
        (done.proven_bytes, "proven"),
        (done.own_hash_bytes, "by their own hash"),
        (done.unsealed_bytes, "not sealed yet"),
        (done.unproven_bytes, "unproven"),
    ]
    how = ", ".join(f"{count} {words}" for count, words in kinds if count) or "none"
    said = [f"{name}: {done.received_bytes}{stated} bytes salvaged ({how}), {done.epochs} epochs"]
    for hole in done.lost[:MOST_HOLES]:
        size = "bytes" if hole.bytes is None else f"{hole.bytes} bytes"
        said.append(f"  lost: {size}, {hole.from_utc or 'unknown'} to {hole.to_utc or 'unknown'}")
    if len(done.lost) > MOST_HOLES:
        said.append(f"  lost: and {len(done.lost) - MOST_HOLES} more pieces")
    if done.file is not None:
        said.append(f"  its beginning is lost, so mark and frame are unknown; the bytes are in {done.file}")
    if done.finding and done.mark is not None:
        said.append(f"  {done.severity}: {done.finding}")
    return said
