"""What a recorder writes down: received bytes and link events, in order of arrival.

The decoder is a pure function of a sequence of items; so is the SHA-256 of a raw chunk. A file has no arrival
times, so items from a file carry none and no timer of the decoder fires.

Canonical form of one item (contract, section 4): kind (1 byte), monotonic ms and UTC ms (signed 8 bytes
big-endian, -2**63 = none), length of the data (8 bytes big-endian), data.
"""

from __future__ import annotations

import struct
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from enum import StrEnum

NO_TIME = -(2**63)
_HEAD = struct.Struct(">cqqQ")


class ItemKind(StrEnum):
    """One letter per kind; the letter is the canonical byte."""

    BYTES = "B"  # received bytes, exactly as they came
    OPENED = "O"  # link opened for the first time; data = link address
    LOST = "L"  # link lost; data = reason
    REOPENED = "R"  # link open again; data = link address
    STARTED = "S"  # a recorder process (re)started on an open occupation; data = program version
    DROPPED = "D"  # bytes lost because the disk could not follow; data = decimal count
    END = "E"  # end of a file, or of the occupation; data = reason


@dataclass(frozen=True, slots=True)
class Item:
    """One recorded item. `monotonic_ms` and `utc_ms` are those of the first byte's arrival; None for files."""

    kind: ItemKind
    data: bytes
    monotonic_ms: int | None = None
    utc_ms: int | None = None

    def canonical(self) -> bytes:
        """The canonical bytes of this item."""
        mono = NO_TIME if self.monotonic_ms is None else self.monotonic_ms
        utc = NO_TIME if self.utc_ms is None else self.utc_ms
        return _HEAD.pack(self.kind.value.encode("ascii"), mono, utc, len(self.data)) + self.data


def canonical_items(items: Iterable[Item]) -> bytes:
    """Canonical bytes of a sequence of items: what a raw chunk holds and what its SHA-256 covers."""
    return b"".join(item.canonical() for item in items)


def parse_items(data: bytes) -> Iterator[Item]:
    """The items of a raw chunk.

    Raises:
        ValueError: the bytes are no canonical sequence of items.
    """
    position = 0
    while position < len(data):
        if position + _HEAD.size > len(data):
            raise ValueError(f"raw chunk ends inside an item head at byte {position}")
        kind, mono, utc, length = _HEAD.unpack_from(data, position)
        position += _HEAD.size
        if position + length > len(data):
            raise ValueError(f"raw chunk ends inside an item of {length} bytes at byte {position}")
        yield Item(
            ItemKind(kind.decode("ascii")),
            data[position : position + length],
            None if mono == NO_TIME else mono,
            None if utc == NO_TIME else utc,
        )
        position += length
