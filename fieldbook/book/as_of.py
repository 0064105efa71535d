"""A book as it stood when one of its entries was the last: what was certified is judged by what was known then."""

from __future__ import annotations

import copy

from .known import Known
from .store import Book


def book_as_of(book: Book, seq: int) -> Book:
    """The same open book, whose state is folded from the entries up to `seq`; for reading, closed with the original.

    What was received does not change, so items and epochs are those of today (epochs decoded again since, by another
    talker, are the one exception).
    """
    earlier = copy.copy(book)
    earlier.writable = False
    earlier._known = Known(book._connection, until_seq=seq)
    return earlier
