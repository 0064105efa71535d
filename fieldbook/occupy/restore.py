"""Putting a writer where an earlier recorder of the same occupation stopped.

The whole occupation is decoded again: the simplest way that is surely right, because the decoder is a pure function of
the recorded items. Epochs that the earlier recorder had not got round to are appended. That takes a while after a long
occupation, so new bursts are committed in between as raw rows only; they come by at the end of the same pass, in order,
and are decoded there. Nothing waits in memory for the past.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from fieldbook.book.store import Book
from fieldbook.model.epoch import Epoch
from fieldbook.model.item import Item
from fieldbook.occupy.writer import Writer

BATCH = 5000


@dataclass(frozen=True)
class Meanwhile:
    """The live link during a restore: the item with which this recorder began, and what has arrived since."""

    start: Item
    take: Callable[[], list[Item]]


def catch_up(writer: Writer, book: Book, number: int, meanwhile: Meanwhile | None = None) -> None:
    """Decode what is recorded and append the epochs that are missing.

    With `meanwhile`, new bursts are committed in between, and where the new recorder's first item comes by, it is
    entered that the occupation was resumed and since when nothing was heard.
    """
    stored = _last_stored(book, number)
    last = stored[-1].number if stored else 0
    known = {epoch.number: epoch for epoch in stored}
    missing: list[Epoch] = []
    as_stored, fresh = True, False
    if meanwhile is not None:
        writer.write_raw(meanwhile.take())
    for item in book.items(number):
        if meanwhile is not None:
            if item == meanwhile.start:
                writer.resumed(live=True)
                fresh = True
            writer.write_raw(meanwhile.take())
        for epoch in writer.take(item, fresh=fresh):
            as_stored = as_stored and known.get(epoch.number, epoch) == epoch
            if epoch.number > last:
                missing.append(epoch)
        if len(missing) >= BATCH and as_stored:
            writer.commit([], missing)
            missing = []
    if not as_stored or writer.heard.epochs < last:
        # an entry has changed an option of the decoder since these rows were written
        writer.decode_again()
    elif missing:
        writer.commit([], missing)
    writer.note_date()


def _last_stored(book: Book, number: int) -> list[Epoch]:
    """The last stored epochs: all after the count in the heartbeat, which may lag but never leads."""
    state = book.recorder_state()
    count = state.epochs if state is not None and state.occupation == number else 0
    return book.epochs(number, after=max(0, count - 1)) or book.epochs(number)
