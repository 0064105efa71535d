"""A chained list of entries that can be signed, and changed afterwards by somebody who has no key."""

from __future__ import annotations

import copy
from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any

from fieldbook.model.canonical import canonical_json
from fieldbook.model.entry import GENESIS, Entry, entry_hash
from fieldbook.signing import ed25519
from fieldbook.signing.signer import Signer


def signer(name: str = "R. Kell", seed: int = 1) -> Signer:
    """A key made from a number."""
    secret = bytes([seed]) * 32
    return Signer(name, ed25519.public_of(secret), secret)


class ListBook:
    """What `in_book` needs of a book."""

    def __init__(self) -> None:
        self.log: list[Entry] = []
        self.append("book", {"id": "3f2a91c0-5b1e-4c7d-9a44-7d0f6b2e8c15", "format": 1}, "R. Kell")

    def entries(self, after_seq: int = 0) -> list[Entry]:
        return self.log[after_seq:]

    def append(self, kind: str, body: dict[str, Any], observer: str) -> Entry:
        self.log = rehashed(
            [*self.log, Entry(0, f"2027-03-04T01:10:{len(self.log):02d}.000Z", kind, body, observer, "", "")]
        )
        return self.log[-1]

    @contextmanager
    def transaction(self) -> Iterator[None]:
        kept = list(self.log)
        try:
            yield
        except BaseException:
            self.log = kept
            raise


def rehashed(entries: list[Entry]) -> list[Entry]:
    """The entries numbered and chained anew, as anybody can do."""
    found: list[Entry] = []
    for item in entries:
        seq, previous = len(found) + 1, found[-1].hash if found else GENESIS
        own = entry_hash(seq, item.utc, item.kind, canonical_json(item.body), item.observer, previous)
        found.append(Entry(seq, item.utc, item.kind, copy.deepcopy(item.body), item.observer, previous, own))
    return found
