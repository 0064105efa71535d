"""Audit of what was received: every column of tail, chunks and packs against the `raw` and `end` entries.

Streams: one chunk or pack is in memory at a time, and no more is inflated than the entries state (at most 64 MiB).
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterator, Sequence, Set
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

from fieldbook.model.item import ItemKind, parse_items

from . import heartbeat, raw, tail
from .inflate import inflate_chunk

if TYPE_CHECKING:
    from .audit import Audit


@dataclass
class _Received:
    """What one occupation received, gathered from its pieces."""

    chunks: list[tuple[int, raw.Sealed]] = field(default_factory=list)  # (seq of the raw entry, what it states)
    size: int = 0  # received bytes
    sha256: Any = field(default_factory=hashlib.sha256)
    whole: bool = True

    def add(self, sealed: raw.Sealed, plain: bytes) -> None:
        """Count one chunk's received bytes.

        Raises:
            ValueError: the chunk holds no items, or another number of them.
        """
        items = 0
        for item in parse_items(plain):
            items += 1
            if item.kind is ItemKind.BYTES:
                self.size += len(item.data)
                self.sha256.update(item.data)
        if items != sealed.items or items != sealed.last_id - sealed.first_id + 1:
            raise ValueError(f"it holds {items} items, its entry states {sealed.items}")


def audit_raw(audit: Audit) -> None:
    """Compare all received bytes with the chain."""
    known = {occupation for occupation, _, _ in audit.by_occupation("occupation")}
    ended = {occupation: (seq, body) for occupation, seq, body in audit.by_occupation("end")}
    received = _stated(audit)
    _check_tail(audit, known, ended.keys())
    _check_tail_sum(audit, received)
    _check_strangers(audit, received)
    _check_packs(audit)
    for occupation, found in received.items():
        with audit.part(f"raw of occupation {occupation}"):
            _check_occupation(audit, occupation, found)
    for occupation, (seq, body) in ended.items():
        found = received.get(occupation, _Received())
        stated = (body.get("received_bytes"), body.get("received_sha256"))
        if found.whole and stated != (found.size, found.sha256.hexdigest()):
            text = f"occupation {occupation}: {found.size} bytes received, not those that entry {seq} states"
            audit.find("raw", text, seq)


def _stated(audit: Audit) -> dict[int, _Received]:
    received: dict[int, _Received] = {}
    for seq, body in audit.of("raw"):
        try:
            sealed = raw.Sealed.from_body(body)
        except ValueError as error:
            audit.find("raw", f"entry {seq}: {error}", seq)
            continue
        found = received.setdefault(sealed.occupation, _Received())
        before = found.chunks[-1][1] if found.chunks else None
        if sealed.chunk != (before.chunk + 1 if before else 1) or (before and sealed.first_id <= before.last_id):
            audit.find("raw", f"entry {seq} does not follow the chunk before it", seq)
        found.chunks.append((seq, sealed))
    return received


def _check_tail(audit: Audit, known: set[int], ended: Set[int]) -> None:
    rows = audit.connection.execute("SELECT occupation, count(*) FROM raw_tail GROUP BY occupation").fetchall()
    for occupation, count in rows:
        if occupation not in known:
            audit.find("raw", f"{count} rows in the tail belong to occupation {occupation}, which nothing begins")
        elif occupation in ended:
            audit.find("raw", f"{count} rows in the tail belong to occupation {occupation}, which has ended")
    wrong = audit.connection.execute(
        "SELECT count(*) FROM raw_tail WHERE kind NOT IN (SELECT value FROM json_each(?))",
        (f"[{','.join(chr(34) + kind.value + chr(34) for kind in ItemKind)}]",),
    ).fetchone()[0]
    if wrong:
        audit.find("raw", f"{wrong} rows in the tail are of a kind that does not exist")


def _check_tail_sum(audit: Audit, received: dict[int, _Received]) -> None:
    """The tail against the recorder's last heartbeat: all of it, but for what came after that."""
    try:
        stated = heartbeat.tree(audit.connection).get("tail")
    except ValueError:
        audit.find("raw", "what the recorder last said of itself cannot be read")
        return
    sealed = [chunk.last_id for found in received.values() for _, chunk in found.chunks]
    if wrong := tail.problem(audit.connection, stated, max(sealed, default=0)):
        audit.find("raw", f"the tail: {wrong}")


def _check_strangers(audit: Audit, received: dict[int, _Received]) -> None:
    """Rows that no `raw` entry states, and chunks that stand in two places."""
    left = {key: [sealed.chunk for _, sealed in found.chunks] for key, found in received.items()}
    rows = audit.connection.execute(
        "SELECT occupation, chunk, chunk, 'chunk' FROM raw_chunk"
        " UNION ALL SELECT occupation, first_chunk, last_chunk, 'pack' FROM raw_pack"
    ).fetchall()
    for occupation, first, last, what in rows:
        stated = left.get(occupation, [])
        if first > last or last - first >= len(stated) or not {first, last} <= set(stated):
            text = f"a {what} of occupation {occupation} (chunks {first} to {last}) fits no entries, or comes twice"
            audit.find("raw", text)
        else:
            left[occupation] = [chunk for chunk in stated if not first <= chunk <= last]


def _check_occupation(audit: Audit, occupation: int, found: _Received) -> None:
    position = 0
    while position < len(found.chunks):
        audit.in_time("raw")
        seq, sealed = found.chunks[position]
        where = f"chunk {sealed.chunk} of occupation {occupation}"
        taken = 1
        try:
            pieces, taken = _piece(audit, [item for _, item in found.chunks[position:]])
            for part, plain in pieces:
                found.add(part, plain)
        except (ValueError, MemoryError) as error:
            found.whole = False
            audit.find("raw", f"{where}: {error}", seq)
        position += taken


def _piece(audit: Audit, left: Sequence[raw.Sealed]) -> tuple[Iterator[tuple[raw.Sealed, bytes]], int]:
    """The next chunk, or the pack that begins with it, and how many chunks that is."""
    sealed, connection = left[0], audit.connection
    pack = connection.execute(
        "SELECT first_chunk, last_chunk, codec, data FROM raw_pack"
        " WHERE occupation = ? AND ? BETWEEN first_chunk AND last_chunk",
        (sealed.occupation, sealed.chunk),
    ).fetchone()
    row = connection.execute(
        "SELECT occupation, chunk, first_id, last_id, items, bytes, sha256, data FROM raw_chunk"
        " WHERE occupation = ? AND chunk = ?",
        (sealed.occupation, sealed.chunk),
    ).fetchone()
    if row is not None:
        if row[:7] != sealed.columns() or raw.sha256_of(row[7]) != sealed.stored_sha256:
            raise ValueError("its row is not what its entry states")
        if pack is not None:
            raise ValueError("it stands in a chunk and in a pack")
        return iter([(sealed, raw.checked(sealed, inflate_chunk(row[7], sealed.bytes)))]), 1
    if pack is None:
        raise ValueError("it is missing")
    if pack[0] != sealed.chunk:
        raise ValueError(f"its pack begins with chunk {pack[0]}")
    inside = [item for item in left if item.chunk <= pack[1]]
    return iter(list(raw.split_pack(pack[2], pack[3], inside))), len(inside)


def _check_packs(audit: Audit) -> None:
    """Every column of every pack against its `packed` entry."""
    stated: dict[tuple[int, int], tuple[int, raw.Packed]] = {}
    for seq, body in audit.of("packed"):
        try:
            packed = raw.Packed.from_body(body)
        except ValueError as error:
            audit.find("raw", f"entry {seq}: {error}", seq)
            continue
        stated[packed.occupation, packed.first_chunk] = seq, packed
    for occupation, first, last, codec, data in audit.connection.execute(
        "SELECT occupation, first_chunk, last_chunk, codec, data FROM raw_pack"
    ):
        where = f"the pack of chunks {first} to {last} of occupation {occupation}"
        entry = stated.pop((occupation, first), None)
        if entry is None:
            audit.find("raw", f"{where} is stated by no entry")
        elif entry[1] != raw.Packed(occupation, first, last, codec, len(data), raw.sha256_of(data)):
            audit.find("raw", f"{where} is not what entry {entry[0]} states", entry[0])
    for seq, packed in stated.values():
        where = f"the pack of chunks {packed.first_chunk} to {packed.last_chunk} of occupation {packed.occupation}"
        audit.find("raw", f"{where} is missing", seq)
