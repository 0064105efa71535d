"""The entries this connection has read so far, and the questions a book asks of them again and again.

Entries are append-only, so what was read once stays true; only a rollback forgets. Reading on from the last known
entry makes the state of a long book cheap to ask for.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator

from fieldbook.errors import UsageError
from fieldbook.model.entry import Entry
from fieldbook.model.state import BookState

from . import chain, raw
from .epochs import Origin
from .fold import fold


class Known:
    """All entries up to the last look, or up to one entry for ever. Every question looks again first."""

    def __init__(self, connection: sqlite3.Connection, until_seq: int | None = None) -> None:
        self._connection, self._until = connection, until_seq
        self._entries: list[Entry] = []
        self._state: BookState | None = None
        self._origins: dict[int, Origin] = {}

    def forget(self) -> None:
        """After a rollback: what was read inside it may never have been."""
        self._entries.clear()
        self._state = None
        self._origins.clear()

    def entries(self) -> list[Entry]:
        """All entries; not to be changed by the caller."""
        after = self._entries[-1].seq if self._entries else 0
        if self._until is None or after < self._until:
            self._entries.extend(chain.read_entries(self._connection, after, self._until))
        return self._entries

    def state(self) -> BookState:
        """The folded state, folded again only after news."""
        entries = self.entries()
        if self._state is None or self._state.head_seq != len(entries):
            self._state = fold(entries)
        return self._state

    def of(self, kind: str, occupation: int) -> Iterator[Entry]:
        """Entries of a kind that belong to an occupation, in order."""
        entries = self.entries()
        return (item for item in entries if item.kind == kind and item.body.get("occupation") == occupation)

    def observer_of(self, occupation: int) -> str:
        """Who began the occupation, and so signs what its recorder writes.

        Raises:
            UsageError: it has not begun.
        """
        entry = next(self.of("occupation", occupation), None)
        if entry is None:
            raise UsageError(f"There is no occupation {occupation} in this book.", "Begin it first.")
        return entry.observer

    def has_ended(self, occupation: int) -> bool:
        """Whether an `end` entry stands for the occupation."""
        return any(self.of("end", occupation))

    def origin_of(self, occupation: int) -> Origin | None:
        """The origin of the occupation's epoch rows; None as long as it has no position."""
        if occupation not in self._origins:
            entry = next(self.of("origin", occupation), None)
            if entry is None:
                return None
            self._origins[occupation] = _integer(entry, "latitude_e8min"), _integer(entry, "longitude_e8min")
        return self._origins[occupation]

    def sealed(self, occupation: int) -> list[raw.Sealed]:
        """The chunks of an occupation, as their `raw` entries state them.

        Raises:
            ValueError: such an entry makes no sense.
        """
        return [raw.Sealed.from_body(entry.body) for entry in self.of("raw", occupation)]

    def last_sealed_id(self) -> int:
        """The highest item id in any chunk of the book; 0 if there is none."""
        return max((_integer(item, "last_id") for item in self.entries() if item.kind == "raw"), default=0)

    def recorder_runs(self) -> bool:
        """Whether the last recorder entry says 'running': a recorder is alive, or it ended without closing."""
        states = [item.body.get("state") for item in self.entries() if item.kind == "recorder"]
        return bool(states) and states[-1] == "running"


def _integer(entry: Entry, key: str) -> int:
    value = entry.body.get(key)
    if type(value) is not int or abs(value) >= 2**62:
        raise chain.damaged_entry(entry.seq, f"'{key}' is no number")
    return value
