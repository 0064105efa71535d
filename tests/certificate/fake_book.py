"""A book in memory: entries chained as in the real one, state folded as far as certificates need it."""

from __future__ import annotations

import copy
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import kestrel_ridge as job

from fieldbook.model.canonical import Tree, canonical_json
from fieldbook.model.entry import GENESIS, Entry, entry_hash
from fieldbook.model.state import BookState


class FakeBook:
    """Entries in a list; occupations are those of `kestrel_ridge`, one or two."""

    def __init__(self, path: Path | None = None, *, occupations: int = 1) -> None:
        self.path = path
        self.base = job.state()
        if occupations == 1:
            del self.base.occupations[2]
        self.log: list[Entry] = []
        self.append("book", {"id": job.BOOK_ID, "format": 1, "program": "0.1.0"}, "R. Kell")

    def entries(self, after_seq: int = 0) -> Iterator[Entry]:
        return iter([entry for entry in self.log if entry.seq > after_seq])

    def append(self, kind: str, body: Tree, observer: str) -> Entry:
        seq, utc = len(self.log) + 1, f"2027-03-09T14:{len(self.log):02d}:00.000Z"
        previous = self.log[-1].hash if self.log else GENESIS
        made = Entry(
            seq,
            utc,
            kind,
            copy.deepcopy(body),
            observer,
            previous,
            entry_hash(seq, utc, kind, canonical_json(body), observer, previous),
        )
        self.log.append(made)
        return made

    @contextmanager
    def transaction(self) -> Iterator[None]:
        kept = list(self.log)
        try:
            yield
        except BaseException:
            self.log = kept
            raise

    def state(self) -> BookState:
        state = copy.deepcopy(self.base)
        state.head_seq, state.head_hash = self.log[-1].seq, self.log[-1].hash
        struck = {entry.body["seq"]: entry for entry in self.log if entry.kind == "strike"}
        state.strikes.update(struck)
        state.documents = [
            entry for entry in self.log if entry.kind in {"certificate", "draft"} and entry.seq not in struck
        ]
        state.rendered = [entry for entry in self.log if entry.kind == "rendered"]
        return state
