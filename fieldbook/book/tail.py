"""What stands in the tail, summed up in the heartbeat: no entry covers it yet, and it must not change unseen either.

Until a chunk is sealed, received items are plain rows, and a bit that flips in them would pass for what the receiver
sent. So each heartbeat states the first and last id of the tail and the SHA-256 of its canonical bytes; what came
after it (at most a quarter of a second) waits for the next one. Against damage, not against forgers: nothing chains it.
"""

from __future__ import annotations

import hashlib
import sqlite3
from collections.abc import Sequence
from contextlib import closing, suppress
from pathlib import Path
from typing import Any

from fieldbook.model.canonical import Tree
from fieldbook.model.item import Item

from . import connect, heartbeat, raw
from .known import Known

_ROWS = "SELECT id, kind, monotonic_ms, utc_ms, data FROM raw_tail WHERE id >= ? ORDER BY id"


class TailSum:
    """The sum over the rows of the tail, kept up with what is written. Belongs to one connection."""

    def __init__(self, connection: sqlite3.Connection) -> None:
        self._connection = connection
        self._known = False
        self.forget()

    def forget(self) -> None:
        """The rows may have changed: a rollback, a seal, another connection. They are read again when asked."""
        self._known = False
        self._first = self._last = 0
        self._total = hashlib.sha256()

    def add(self, first_id: int, items: Sequence[Item]) -> None:
        """Items written behind the last row."""
        if self._known:
            self._count(first_id, items)

    def stated(self) -> Tree | None:
        """For the heartbeat: first and last id and the sum; None if the tail is empty, or no row of it is whole."""
        if not self._known:
            self.forget()
            with suppress(ValueError):
                for row in self._connection.execute(_ROWS, (0,)):
                    self._count(row[0], [raw.item_of(row)])
            self._known = True
        if not self._first:
            return None
        return {"first_id": self._first, "last_id": self._last, "sha256": self._total.hexdigest()}

    def _count(self, first_id: int, items: Sequence[Item]) -> None:
        if items:
            self._first = self._first or first_id
            self._last = first_id + len(items) - 1
            for item in items:
                self._total.update(item.canonical())


def problem(connection: sqlite3.Connection, stated: Any, sealed_to: int) -> str:
    """What of the tail is not as a heartbeat stated it, in words; empty if all is.

    Args:
        stated: what `TailSum.stated` gave, as read back.
        sealed_to: the last item id that a chunk holds; a sum over items that were sealed since says nothing.
    """
    if stated is None:
        return ""
    first, last = (stated.get("first_id"), stated.get("last_id")) if isinstance(stated, dict) else (None, None)
    if type(first) is not int or type(last) is not int or not 0 < first < 2**62:
        return "what the recorder stated about the tail cannot be read"
    if sealed_to >= first:
        return ""
    total, expected = hashlib.sha256(), first
    for row in connection.execute(_ROWS, (first,)):
        if row[0] != expected or row[0] > last:
            break
        expected += 1
        try:
            total.update(raw.item_of(row).canonical())
        except ValueError as error:
            return str(error)
    if expected <= last:
        return f"received items {expected} to {last}, which the recorder had written, are missing"
    if total.hexdigest() != stated.get("sha256"):
        return f"received items {first} to {last} are not those that the recorder wrote"
    return ""


def problem_of_book(path: Path) -> str:
    """The same for a book whose recorder is gone, asked before another one writes to it.

    Raises:
        BookError: it cannot be read.
    """
    with connect.book_errors(path), closing(connect.open_reader(path)) as connection:
        try:
            stated = heartbeat.tree(connection).get("tail")
        except ValueError:
            return ""  # a heartbeat that makes no sense states nothing
        return problem(connection, stated, Known(connection).last_sealed_id())
