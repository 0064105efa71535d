"""One line of the book, and the time stamp rules that go with it."""

from __future__ import annotations

from dataclasses import dataclass

from fieldbook.model.canonical import Tree, canonical_json, chain_hash

GENESIS = "0" * 64


@dataclass(frozen=True, slots=True)
class Entry:
    """One dated, chained line of the book. `body` is the parsed canonical JSON of the stored text."""

    seq: int
    utc: str  # 2027-03-04T01:10:00.000Z
    kind: str
    body: Tree
    observer: str
    previous_hash: str
    hash: str

    def expected_hash(self) -> str:
        """The hash this entry must have (contract, section 4)."""
        return entry_hash(self.seq, self.utc, self.kind, canonical_json(self.body), self.observer, self.previous_hash)


def entry_hash(seq: int, utc: str, kind: str, body_text: str, observer: str, previous_hash: str) -> str:
    """SHA-256 over seq, utc, kind, body, observer, previous hash, each preceded by its length."""
    return chain_hash((str(seq), utc, kind, body_text, observer, previous_hash))
