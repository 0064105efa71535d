"""One flipped bit put right: the change that makes a SHA-256 hold again is the proof that it was the only one.

Every bit of the data is turned in turn; what stands before it is hashed once. Twenty kilobytes take a few seconds, so
there is a budget of bytes to hash, spent on the smallest first by whoever calls.
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterator

BUDGET_BYTES = 6_000_000_000  # about ten seconds


def cost(size: int) -> int:
    """Bytes that a search through data of this size hashes at most; a call costs as much as 500 bytes."""
    return 8 * size * (size // 2 + 500)


def flips(data: bytes) -> Iterator[bytes]:
    """The data with each bit turned."""
    for place in range(len(data)):
        for bit in range(8):
            yield data[:place] + bytes([data[place] ^ (1 << bit)]) + data[place + 1 :]


def repaired(data: bytes, sha256: str) -> bytes | None:
    """The data with the one bit turned that makes its SHA-256 the stated one; None if there is no such bit."""
    try:
        wanted = bytes.fromhex(sha256)
    except ValueError:
        return None
    before = hashlib.sha256()
    view = memoryview(data)
    for place in range(len(data)):
        behind = view[place + 1 :]
        for bit in range(8):
            turned = bytes([data[place] ^ (1 << bit)])
            total = before.copy()
            total.update(turned)
            total.update(behind)
            if total.digest() == wanted:
                return data[:place] + turned + data[place + 1 :]
        before.update(view[place : place + 1])
    return None
