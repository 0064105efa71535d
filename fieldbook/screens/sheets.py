"""Sheets of a reduced book: what one page of reduction and one certificate are of."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

from fieldbook.errors import FieldbookError, UsageError
from fieldbook.model.reduction import MarkResult, Reduction

if TYPE_CHECKING:
    from fieldbook.book.store import Book
    from fieldbook.model.state import BookState
    from fieldbook.reduce.occupation import Reduced as OwnReduced


@dataclass(frozen=True)
class Sheet:
    """What one page of reduction and one certificate are of: an occupation, or several of a mark together.

    reduction: of the occupation, or the combined mark in the shape of one. result: of the mark, where it is combined.
    missing: what keeps the paper of a combined mark a draft, besides the sign-off.
    """

    reduction: Reduction
    numbers: tuple[int, ...]
    result: MarkResult | None = None
    missing: tuple[str, ...] = ()

    @property
    def title(self) -> str:
        """`KR-07, occupation 2` or `KR-07, occupations 1, 2 together`."""
        words = ", ".join(map(str, self.numbers))
        return (
            f"{self.reduction.mark}, occupation{'s' if self.result else ''} {words}{' together' if self.result else ''}"
        )

    @property
    def state(self) -> str:
        """`open`, `ended by operator`; nothing of a combined mark, whose occupations have ended each by itself."""
        if self.result is not None:
            return ""
        return "open" if self.reduction.open else f"ended by {self.reduction.ended_by}"

    @property
    def key(self) -> tuple[str, tuple[int, ...]]:
        """Tells it from every other sheet of the book."""
        return self.reduction.mark, self.numbers


@dataclass(frozen=True)
class Reduced:
    """The whole book reduced.

    sheets: every occupation, and after the last one of a mark all of them together where they combine.
    failures: what could not be reduced, (mark, occupation, text, remedy). apart: marks with several occupations that do
    not go together, (mark, why).
    """

    sheets: tuple[Sheet, ...] = ()
    failures: tuple[tuple[str, int, str, str], ...] = ()
    apart: tuple[tuple[str, str], ...] = ()


def reduced_sheets(book: Book) -> Reduced:
    """Every occupation of the book, and every mark with several of them, reduced."""
    from fieldbook.occupy.marks_combined import combine_marks
    from fieldbook.occupy.reductions import reduce_book, search_dirs

    reduced, failed = reduce_book(book)
    state = book.state()
    failures = tuple((item.mark, item.occupation, item.error.text, item.error.remedy) for item in failed)
    sheets: list[Sheet] = []
    apart: list[tuple[str, str]] = []
    for mark in combine_marks(state, reduced, search_dirs(book), failed):
        own = [item for item in reduced if item.reduction.mark == mark.mark]
        sheets += [Sheet(item.reduction, (item.reduction.occupation,)) for item in own]
        if len(mark.occupations) > 1:
            try:
                sheets.append(_together(state, mark, reduced))
            except FieldbookError as problem:
                apart.append((mark.mark, problem.text))
    return Reduced(tuple(sheets), failures, tuple(apart))


def coordinate_text(sheet: Sheet, form: str) -> str:
    """The coordinate of a sheet in one of the forms of `model.coordinates`, never without frame, epoch and 95 %.

    Raises:
        UsageError: a grid where none was chosen, geocentric without a height.
    """
    from fieldbook.model.rounding import decimals_for, rounded_up
    from fieldbook.reduce.frames import printed

    item = sheet.reduction
    place, stated = item.client or item.receiver, item.uncertainty
    if item.client is not None and item.uncertainty_client is not None:
        stated = item.uncertainty_client
    if form == "grid" and item.grid is None:
        raise UsageError("No grid was chosen in this session.", "Copy another form.", code="no_grid")
    decimals = decimals_for(stated.horizontal95_m, most=4)
    text = printed(
        (place.lat_deg, place.lon_deg, place.h_m),
        place.frame,
        form,
        decimals,
        grid=item.grid.crs if item.grid else None,
        outside_area_accepted=item.grid is not None,  # judged in the reduction
    )
    epoch = "" if place.epoch is None else f" at epoch {place.epoch:.4f}"
    plan = f"95 % {rounded_up(stated.horizontal95_m, decimals)} m circle"
    height = "" if stated.vertical95_m is None else f", {rounded_up(stated.vertical95_m, decimals)} m height"
    return f"{sheet.title}: {text}; {place.frame_name} ({place.frame}){epoch}; {plan}{height}"


def _together(state: BookState, mark: MarkResult, reduced: Sequence[OwnReduced]) -> Sheet:
    """The combined mark as a sheet; a UsageError says why its occupations do not go together."""
    from fieldbook.certificate.combined import missing_of_mark
    from fieldbook.issuing import evidence_of
    from fieldbook.occupy.whole_mark import whole_of

    whole = whole_of(state, mark, reduced)
    missing = tuple(str(item["text"]) for item in missing_of_mark(evidence_of(whole), signed=True))
    return Sheet(whole.reduction, tuple(item.occupation for item in mark.used), mark, missing)
