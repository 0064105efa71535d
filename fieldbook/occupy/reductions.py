"""Reductions of a book: every occupation (or those of one mark) from its epoch rows to findings and leave check.

In: an open book. Out: `Reduced` results and failures, never an exception for a single occupation that cannot be
reduced. The leave check needs the mark's other occupations, so reductions are made first and judged second.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

from fieldbook.book.store import Book
from fieldbook.check.findings import findings_of
from fieldbook.check.identity import identity_findings
from fieldbook.check.leave import Figures, OtherOccupation, leave_check
from fieldbook.check.mark_leave import reaches_accuracy
from fieldbook.errors import FieldbookError, ReductionError, UsageError
from fieldbook.model.canonical import Tree
from fieldbook.model.reduction import Finding
from fieldbook.model.session import Requirement
from fieldbook.model.sky import Picture
from fieldbook.model.state import BookState, Occupation
from fieldbook.nmea.sky_history import sky_history
from fieldbook.occupy.local_positions import attach_to_reductions
from fieldbook.reduce import frames
from fieldbook.reduce.occupation import Reduced, reduce_occupation
from fieldbook.settings.grids import grid_folders

SEVERITIES = ("stop", "caution", "info")


@dataclass(frozen=True)
class Failure:
    """An occupation that could not be reduced, and what to do about it."""

    mark: str
    occupation: int
    error: FieldbookError


def search_dirs(book: Book) -> list[Path]:
    """Where grids of a book are looked for before the package's own: beside it, `grids/` there, the user's own."""
    return grid_folders(book.path.resolve().parent)


def reduce_book(book: Book, mark: str | None = None) -> tuple[list[Reduced], list[Failure]]:
    """Reduce all occupations, or those of one mark, each with findings and leave check.

    Raises:
        UsageError: no such mark in the book.
    """
    state = book.state()
    if mark is not None and not state.of_mark(mark):
        known = ", ".join(sorted({item.mark for item in state.occupations.values()})) or "none"
        raise UsageError(f'There is no occupation of a mark "{mark}" in {book.path}.', f"Occupied marks: {known}.")
    chosen = state.of_mark(mark) if mark is not None else list(state.occupations.values())
    reduced: list[Reduced] = []
    failed: list[Failure] = []
    for occupation in chosen:
        try:
            reduced.append(reduce_one(book, occupation))
        except (ReductionError, UsageError) as error:
            failed.append(Failure(occupation.mark, occupation.number, error))
    for item in reduced:
        occupation = state.occupations[item.reduction.occupation]
        judge(item, occupation, others_of(item, reduced, occupation.session.requirement), state.marks)
    attach_to_reductions(state, reduced)
    return reduced, failed


def reduce_one(book: Book, occupation: Occupation) -> Reduced:
    """One occupation, without leave check.

    Raises:
        ReductionError: it cannot be reduced.
        UsageError: its frames are refused by kind.
    """
    return reduce_occupation(
        occupation, book.epochs(occupation.number), search_dirs(book), pictures_of(book, occupation)
    )


def pictures_of(book: Book, occupation: Occupation) -> list[Picture] | None:
    """The satellites used, minute by minute, where the antenna's pattern has to be taken off; else None.

    Raises:
        BookError: the received bytes cannot be read.
    """
    antenna = occupation.session.antenna
    if antenna.calibration is None or "pattern" in (antenna.receiver_applies or ""):
        return None
    return sky_history(book.received(occupation.number))


def reductions_of_mark(book: Book, number: int) -> tuple[Reduced, list[Reduced]]:
    """The reduction of one occupation, and those of the mark's others (what cannot be reduced is left out).

    Raises:
        ReductionError: that occupation cannot be reduced.
        UsageError: no such occupation, or its frames are refused by kind.
    """
    state = book.state()
    if number not in state.occupations:
        raise UsageError(f"There is no occupation {number} in {book.path}.", "`fieldbook reduce` lists them.")
    reduced, failed = reduce_book(book, state.occupations[number].mark)
    for failure in failed:
        if failure.occupation == number:
            raise failure.error
    own = next(item for item in reduced if item.reduction.occupation == number)
    return own, [item for item in reduced if item is not own]


def others_of(item: Reduced, all_reduced: list[Reduced], requirement: Requirement) -> list[OtherOccupation]:
    """The mark's other occupations that have kept epochs, held against this one's requirement."""
    return [
        OtherOccupation(
            other.reduction.occupation,
            other.reduction.started,
            other.reduction.ended,
            reaches_accuracy(requirement, other.reduction),
        )
        for other in all_reduced
        if other.reduction.mark == item.reduction.mark
        and other is not item
        and other.reduction.started is not None
        and other.reduction.ended is not None
    ]


def judge(
    item: Reduced, occupation: Occupation, others: list[OtherOccupation], marks: Mapping[str, Tree] | None = None
) -> None:
    """Add what the book says beside the epochs, and the leave check; marks: as described in the book, by name."""
    reduction = item.reduction
    reduction.findings = [
        *book_findings(occupation),
        *item.notes,
        *identity_findings(occupation.session, reduction, marks or {}),
        *findings_of(item, occupation),
    ]
    reduction.findings.sort(key=lambda finding: SEVERITIES.index(finding.severity))
    figures = Figures(item.horizontal, item.vertical, item.horizontal_forbidden_by, item.vertical_forbidden_by)
    reduction.leave = leave_check(occupation.session.requirement, reduction, figures, others, item.screened.gates)


def book_findings(occupation: Occupation) -> list[Finding]:
    """Findings that stand in the book itself: those of the recorder, a simulated receiver, struck evidence, gaps."""
    findings = [
        Finding(
            str(entry.body["code"]),
            str(entry.body["severity"]),
            str(entry.body["text"]),
            dict(entry.body.get("figures") or {}),
        )
        for entry in occupation.findings
    ]
    if occupation.simulated:
        text = "Recorded from a simulated receiver: good for practice; certificates stay drafts."
        findings.append(Finding("simulated", "stop", text))
    if occupation.struck:
        seqs = [entry.seq for entry in occupation.struck]
        text = f"Evidence was struck out (entries {', '.join(map(str, seqs))}); what rested on it was reduced anew."
        findings.append(Finding("evidence_struck", "info", text, {"entries": seqs}))
    gaps = [entry for entry in occupation.gaps if entry.kind == "gap"]
    if gaps:
        longest_s = max(float(entry.body.get("seconds") or 0) for entry in gaps)
        text = f"The link was interrupted {len(gaps)} times, at most {longest_s:.0f} s; see the diary."
        findings.append(Finding("gaps", "info", text, {"count": len(gaps), "longest_s": longest_s}))
    return findings


def known_marks(state: BookState) -> list[str]:
    """Names of all marks of a book, described or occupied, in order of appearance."""
    return list(dict.fromkeys([*state.marks, *(item.mark for item in state.occupations.values())]))


def record_operation(book: Book, item: Reduced) -> None:
    """Keep the frame operation of an ended occupation as an entry, so that a later PROJ cannot quietly choose another,
    and the hashes of the grid files that were used.

    Nothing is written when it is recorded already, or when nothing was computed (identity).
    """
    state = book.state()
    occupation = state.occupations[item.reduction.occupation]
    steps = frames.operation_codes(item.reduction.operation)
    files = {grid.name: grid.sha256 for grid in item.reduction.operation.grids}
    if item.reduction.height is not None:
        files[item.reduction.height.model] = item.reduction.height.model_sha256
    new_steps = bool(steps) and occupation.operation is None
    if occupation.open or not (new_steps or files.items() - occupation.grid_hashes.items()):
        return
    body: Tree = {"occupation": occupation.number, "steps": occupation.operation or steps}
    book.append("operation", {**body, "files": files} if files else body, occupation.observer)
