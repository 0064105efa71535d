"""`fieldbook reduce`: occupations to coordinates of their marks, with uncertainty, findings and leave check."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from fieldbook import __version__
from fieldbook.clock import SystemClock
from fieldbook.commands.output import line, note, write_json
from fieldbook.errors import ExitCode

if TYPE_CHECKING:
    from fieldbook.model.reduction import MarkResult
    from fieldbook.occupy.reductions import Failure
    from fieldbook.reduce.occupation import Reduced


@click.command()
@click.argument("book", type=click.Path(path_type=Path))
@click.option("--mark", help="Only this mark.")
@click.option("--check", is_flag=True, help="Exit 1 unless every set-up line of the leave check is met.")
@click.option("--json", "as_json", is_flag=True, help="Result as JSON.")
def command(book: Path, mark: str | None, check: bool, as_json: bool) -> int:
    """Reduce the occupations of BOOK."""
    from fieldbook.book.store import Book
    from fieldbook.occupy.marks_combined import combine_marks
    from fieldbook.occupy.reductions import reduce_book, search_dirs
    from fieldbook.reduce.frames import versions

    with Book.open(book, clock=SystemClock()) as opened:
        reduced, failed = reduce_book(opened, mark)
        state = opened.state()
        marks = combine_marks(state, reduced, search_dirs(opened), failed)
        notes = opened.notes
        without_wal = opened.copied_without_wal
    for text in notes:
        note(text)
    if without_wal:
        note(f"{book} was copied without its -wal: what the recorder wrote last is missing.")
    if as_json:
        used = versions()
        write_json(
            {
                "schema": "fieldbook.reduce/1",
                "program": {"version": __version__, "proj": used.proj, "epsg": used.epsg},
                "book": {"id": state.id, "path": str(book), "head": state.head_hash},
                "reductions": [
                    {**item.reduction.to_json(), "convergence": item.convergence().to_json()} for item in reduced
                ],
                "marks": [item.to_json() for item in marks],
                "failed": [_failure(item) for item in failed],
            }
        )
    else:
        _print(reduced, marks, failed)
    if failed and not reduced:
        return int(ExitCode.REDUCTION)
    if not reduced:
        note("The book holds no occupation yet.")
        return int(ExitCode.REDUCTION)
    good = all(item.reduction.leave and item.reduction.leave.verdict == "good to leave" for item in reduced)
    return int(ExitCode.OK if not check or (good and not failed) else ExitCode.DOES_NOT_HOLD)


def _failure(item: Failure) -> dict[str, object]:
    error = {"code": item.error.code, "text": item.error.text, "remedy": item.error.remedy}
    return {"mark": item.mark, "occupation": item.occupation, "error": error}


def _print(reduced: list[Reduced], marks: list[MarkResult], failed: list[Failure]) -> None:
    from fieldbook.commands.marks_text import mark_lines
    from fieldbook.commands.reduction_text import reduction_lines, settled_line

    for item in reduced:
        for text in reduction_lines(item.reduction):
            line(text)
        line(settled_line(item.convergence()))
        line()
    for mark in marks:
        if len(mark.occupations) > 1:
            for text in mark_lines(mark):
                line(text)
            line()
    for failure in failed:
        note(f"{failure.mark}, occupation {failure.occupation}: not reduced. {failure.error}")
