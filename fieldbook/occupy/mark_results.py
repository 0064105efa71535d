"""The result of one mark by its name, for whoever wants its coordinates and not its whole story."""

from __future__ import annotations

from dataclasses import dataclass

from fieldbook.book.store import Book
from fieldbook.errors import ReductionError
from fieldbook.model.reduction import ClientPosition, MarkResult, Uncertainty
from fieldbook.occupy.marks_combined import combine_marks
from fieldbook.occupy.reductions import reduce_book, search_dirs
from fieldbook.reduce.occupation import Reduced


@dataclass(frozen=True)
class MarkPosition:
    """A mark with coordinates in the client's frame. `members`: the combined occupations in order of number."""

    result: MarkResult
    client: ClientPosition
    uncertainty: Uncertainty
    members: list[Reduced]


def mark_position(book: Book, mark: str) -> MarkPosition:
    """The combined mark in the client's frame.

    Raises:
        UsageError: no occupation of that mark.
        ReductionError: it cannot be reduced, or has no coordinates in the client's frame.
    """
    reduced, failed = reduce_book(book, mark)
    results = combine_marks(book.state(), reduced, search_dirs(book), failed)
    result = next((item for item in results if item.mark == mark), None)
    if result is None:
        raise failed[0].error
    if result.client is None or result.uncertainty_client is None:
        why = "; ".join(item.text for item in result.not_combined) or "its ellipsoidal height is not known"
        raise ReductionError(
            f"Mark {mark} has no coordinates in the client's frame: {why}.".replace("..", "."),
            "`fieldbook reduce BOOK` says what each occupation lacks.",
            code="no_client_position",
        )
    by_number = {item.reduction.occupation: item for item in reduced}
    members = [by_number[item.occupation] for item in result.used]
    return MarkPosition(result, result.client, result.uncertainty_client, members)
