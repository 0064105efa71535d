"""Rows of all page images -> what they prove: entries by their own hash, chunks and packs as they lie, rows of the tail.

An entry counts when its hash holds; of two with one number the one that follows the entry before it. One that was
changed by a single bit is put right, because its hash, or the hash that the next entry carries, proves which bit.
"""

from __future__ import annotations

import json
from collections import Counter
from collections.abc import Iterable
from dataclasses import dataclass, field
from typing import Any

from fieldbook.model.entry import GENESIS, entry_hash
from fieldbook.model.item import Item, ItemKind

from . import bits, cells
from .cells import Row
from .pages import Pages

MOST_OCCUPATIONS = 100_000
MOST_ENTRIES = 2**31
MOST_REPAIR_BYTES = 20_000  # of an entry: longer ones are not searched for a flipped bit
NO_DATA = bytes(24)
BEYOND_ITEMS = 1_000_000  # an id further behind the last sealed one is a damaged number


@dataclass(frozen=True)
class OldEntry:
    """An entry as the damaged book holds it; `body` is the stored text. `mended`: one bit was put right."""

    seq: int
    utc: str
    kind: str
    body: str
    observer: str
    previous_hash: str
    hash: str
    mended: bool = False

    def tree(self) -> dict[str, Any]:
        """The body as a tree; empty if it is none."""
        try:
            tree = json.loads(self.body)
        except (ValueError, RecursionError):
            return {}
        return tree if isinstance(tree, dict) else {}


@dataclass(frozen=True)
class Stored:
    """Stored data of a chunk or a pack, with the holes in it (from, to)."""

    data: bytes
    holes: tuple[tuple[int, int], ...] = ()

    def good_until(self, start: int = 0) -> int:
        """The first place of obvious damage from a place on: a hole, or zeros, which compressed data never has many of."""
        zeros = self.data.find(NO_DATA, start)
        places = [begin for begin, _ in self.holes if begin >= start] + ([zeros] if zeros >= 0 else [])
        return min(places, default=len(self.data))


@dataclass(frozen=True)
class ChunkRow:
    """A row of `raw_chunk`."""

    occupation: int
    chunk: int
    first_id: int
    last_id: int
    items: int
    bytes: int
    sha256: str
    stored: Stored


@dataclass(frozen=True)
class PackRow:
    """A row of `raw_pack`."""

    occupation: int
    first_chunk: int
    last_chunk: int
    codec: str
    stored: Stored


@dataclass
class Found:
    """Everything that was found."""

    entries: dict[int, OldEntry] = field(default_factory=dict)  # hash holds
    damaged: dict[int, OldEntry] = field(default_factory=dict)  # no sound one of that number was found
    chunks: list[ChunkRow] = field(default_factory=list)
    packs: list[PackRow] = field(default_factory=list)
    tail: dict[int, tuple[int, Item]] = field(default_factory=dict)  # id -> (occupation, item)
    orphans: list[bytes] = field(default_factory=list)  # contents of overflow chains whose rows are lost
    sums: dict[int, tuple[int, int, str]] = field(default_factory=dict)  # occupation -> ids and SHA-256 of the tail
    heard: dict[int, tuple[int, int | None]] = field(default_factory=dict)  # occupation -> (bytes, last commit)

    @property
    def last_seq(self) -> int:
        """The highest number of a sound entry."""
        return max(self.entries, default=0)

    @property
    def empty(self) -> bool:
        """Nothing was found that is worth a book."""
        return not (self.entries or self.chunks or self.packs or self.tail)


def gather(pages: Pages) -> Found:
    """What the page images hold."""
    found = Found()
    candidates: dict[int, list[OldEntry]] = {}
    ruined: dict[int, Row] = {}
    tail: list[Row] = []
    chains = cells.Chains(pages)
    for row in cells.rows(pages, chains):
        if row.kinds == cells.ENTRY:
            _take_entry(row, candidates, ruined)
        elif row.kinds == cells.CHUNK:
            _take_chunk(row, found)
        elif row.kinds == cells.PACK:
            _take_pack(row, found)
        elif row.kinds == cells.STATE:
            _take_state(row, found)
        else:
            tail.append(row)
    _choose(candidates, found)
    _mend(ruined, found)
    _take_tail(tail, found)
    found.orphans = [content for content in chains.without_rows() if len(content) > 2 * pages.size]
    return found


def _take_entry(row: Row, candidates: dict[int, list[OldEntry]], ruined: dict[int, Row]) -> None:
    if not 0 < row.rowid < MOST_ENTRIES:
        return
    entry = None if row.holes else _entry(row.rowid, row.values[1:])
    if entry is None:
        ruined.setdefault(row.rowid, row)
    elif entry not in (known := candidates.setdefault(row.rowid, [])):
        known.append(entry)


def _entry(seq: int, values: Iterable[Any], *, hash_of: str | None = None, mended: bool = False) -> OldEntry | None:
    """The entry of these stored texts, if its hash holds."""
    try:
        texts = [value.decode("utf-8") for value in values]
    except UnicodeDecodeError:
        return None
    utc, kind, body, observer, previous, own = texts
    own = hash_of or own
    if entry_hash(seq, utc, kind, body, observer, previous) != own:
        return None
    return OldEntry(seq, utc, kind, body, observer, previous, own, mended)


def _choose(candidates: dict[int, list[OldEntry]], found: Found) -> None:
    before = GENESIS
    for seq in sorted(candidates):
        linked = [entry for entry in candidates[seq] if entry.previous_hash == before]
        found.entries[seq] = (linked or candidates[seq])[0]
        before = found.entries[seq].hash


def _mend(ruined: dict[int, Row], found: Found) -> None:
    """Entries that do not hold: one bit put right where that proves itself, else kept as damaged."""
    budget = bits.BUDGET_BYTES
    for seq in sorted(set(ruined) - set(found.entries)):
        if seq > found.last_seq + 1:
            break  # a damaged number
        row = ruined[seq]
        size = sum(len(value) for value in row.values if isinstance(value, bytes))
        price = bits.cost(size)
        mended = None
        if not row.holes and size <= MOST_REPAIR_BYTES and price <= budget:
            budget -= price
            mended = _mended(seq, [value for value in row.values if isinstance(value, bytes)], found)
        if mended is not None:
            found.entries[seq] = mended
        else:
            texts = [value.decode("utf-8", "replace") for value in row.values if isinstance(value, bytes)]
            utc, kind, body, observer, previous, own = texts
            found.damaged[seq] = OldEntry(seq, utc, kind, body, observer, previous, own)


def _mended(seq: int, values: list[bytes], found: Found) -> OldEntry | None:
    follower = found.entries.get(seq + 1)
    if follower is not None:  # the bit is in the hash itself
        entry = _entry(seq, values, hash_of=follower.previous_hash, mended=True)
        if entry is not None:
            return entry
    stated = [values[5].decode("ascii", "replace")]
    if follower is not None and follower.previous_hash not in stated:
        stated = [follower.previous_hash]
    parts = [str(seq).encode(), *values[:5]]
    framed = b"".join(len(part).to_bytes(8, "big") + part for part in parts)
    whole = bits.repaired(framed, stated[0])
    if whole is None:
        return None
    again, place = [], 0
    for part in parts:
        size = int.from_bytes(whole[place : place + 8], "big")
        if size != len(part):
            return None
        again.append(whole[place + 8 : place + 8 + size])
        place += 8 + size
    return _entry(seq, [*again[1:], stated[0].encode()], mended=True) if again[0] == parts[0] else None


def _whole(*values: Any) -> bool:
    return all(type(value) is int and 0 <= value < 2**62 for value in values)


def _take_chunk(row: Row, found: Found) -> None:
    *numbers, sha256, data = row.values
    if _whole(*numbers) and isinstance(sha256, bytes) and isinstance(data, bytes):
        occupation, chunk, first, last, items, size = (int(number) for number in numbers if number is not None)
        if occupation >= MOST_OCCUPATIONS:
            return
        text = sha256.decode("ascii", "replace")
        made = ChunkRow(occupation, chunk, first, last, items, size, text, Stored(data, row.holes))
        if made not in found.chunks[-50:]:
            found.chunks.append(made)


def _take_pack(row: Row, found: Found) -> None:
    *values, codec, data = row.values
    if not (_whole(*values) and isinstance(codec, bytes) and isinstance(data, bytes)):
        return
    numbers = int(values[0] or 0), int(values[1] or 0), int(values[2] or 0)
    made = PackRow(*numbers, codec.decode("ascii", "replace"), Stored(data, row.holes))
    if numbers[0] < MOST_OCCUPATIONS and numbers[1] <= numbers[2] and made not in found.packs[-10:]:
        found.packs.append(made)


def _take_state(row: Row, found: Found) -> None:
    """The recorder's heartbeat: how much it had received at its last commit."""
    try:
        tree = json.loads(row.values[1]) if isinstance(row.values[1], bytes) else None
    except (ValueError, RecursionError):
        return
    if not isinstance(tree, dict):
        return
    _take_tail_sum(tree, found)
    occupation, received, commit = (tree.get(key) for key in ("occupation", "received_bytes", "last_commit_utc_ms"))
    if type(occupation) is int and type(received) is int and received >= found.heard.get(occupation, (-1, None))[0]:
        found.heard[occupation] = received, commit if type(commit) is int else None


def _take_tail_sum(tree: dict[str, Any], found: Found) -> None:
    """What a heartbeat states about the tail (`book.tail`): the one that reaches furthest counts."""
    occupation, stated = tree.get("occupation"), tree.get("tail")
    if not isinstance(stated, dict) or type(occupation) is not int:
        return
    first, last, sha256 = stated.get("first_id"), stated.get("last_id"), stated.get("sha256")
    if not (type(first) is int and type(last) is int and isinstance(sha256, str)):
        return
    if 0 < first <= last < first + 10_000 and last > found.sums.get(occupation, (0, 0, ""))[1]:
        found.sums[occupation] = first, last, sha256


def _take_tail(rows: list[Row], found: Found) -> None:
    """Rows of the tail. Ids run on without a gap inside a page; a row that stands out has a damaged number."""
    sealed = [chunk.last_id for chunk in found.chunks]
    sealed += [tree["last_id"] for tree in _trees(found, "raw") if _whole(tree.get("last_id"))]
    most = max(sealed, default=0) + BEYOND_ITEMS
    known = {tree.get("occupation") for tree in _trees(found, "occupation")}
    pages: dict[tuple[int, bool], list[Row]] = {}
    for row in rows:
        if not row.loose:
            pages.setdefault((row.page, row.newest), []).append(row)
    good: list[Row] = []
    for on_page in pages.values():
        base = Counter(row.rowid - place for place, row in enumerate(on_page)).most_common(1)[0][0]
        good += [row for place, row in enumerate(on_page) if abs(row.rowid - place - base) < 200 and row.rowid <= most]
    last = max((row.rowid for row in good), default=max(sealed, default=0))
    good += [row for row in rows if row.loose and row.values[1] in known and row.rowid <= last + 1000]
    for row in good:
        item = _item(row)
        occupation = row.values[1]
        if item is not None and type(occupation) is int and 0 < occupation < MOST_OCCUPATIONS:
            found.tail.setdefault(row.rowid, (occupation, item))


def _trees(found: Found, kind: str) -> list[dict[str, Any]]:
    return [entry.tree() for entry in found.entries.values() if entry.kind == kind]


def _item(row: Row) -> Item | None:
    kind, mono, utc, data = row.values[2:]
    if row.holes or (row.overflows and not row.newest) or not isinstance(kind, bytes) or not isinstance(data, bytes):
        return None
    try:
        name = ItemKind(kind.decode("ascii", "replace"))
    except ValueError:
        return None
    times = [value if type(value) is int else None for value in (mono, utc)]
    return Item(name, data, times[0], times[1])
