"""What was received, in order: tail, chunks, packs.

A burst becomes plain rows of `raw_tail` at once. Sealing moves the tail into one zlib `raw_chunk`, whose SHA-256 over
the canonical items enters the chain as a `raw` entry in the same transaction; a large piece of a file becomes chunks
without passing through the tail, made by `lines` as it will stand in its pack. At the end of an occupation packing moves chunks into `raw_pack`, several streams of
whole chunks behind one another, each made by `lines`; the hashes of the chunks stay those of the chain. (Measured on six
receiver logs: 0.31 to 0.44 x gzip -9 at 75 MB/s, or a tenth more at 110 MB/s; bz2, which packs of older books hold, 0.47 to 0.69 at 18 MB/s. Packing
belongs to recording a file, which must keep pace with reading it.) Item ids run through the whole book without a gap
inside a chunk, so that the place of an item in a chunk gives its id.

The functions take a connection; `store.Book` holds the transactions and the entries. Reading raises ValueError on
anything that does not fit, which `Book` words as a BookError and `audit` as a finding.
"""

from __future__ import annotations

import dataclasses
import hashlib
import sqlite3
import zlib
from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass

from fieldbook.errors import BookError
from fieldbook.model.canonical import Tree
from fieldbook.model.item import Item, ItemKind, canonical_items, parse_items

from . import lines
from .inflate import CODEC, inflate_chunk, inflate_pack, made_by_lines
from .press import LARGE_BYTES, press

CHUNK_BYTES = 512 * 1024  # a chunk of the tail is closed at about this size of data
LARGE_CHUNK_BYTES = 1024 * 1024  # one of a large piece of a file: with the heads of its items one piece of `lines`
PACK_BYTES = 8 * 1024 * 1024  # canonical bytes in one pack: bounds memory in writing and in reading
STREAM_BYTES = 900_000  # small chunks are compressed together up to about this size
Row = tuple[int, str, int | None, int | None, bytes]


@dataclass(frozen=True)
class Sealed:
    """A chunk as its `raw` entry states it.

    `bytes` counts canonical bytes: what `sha256` covers. `stored_sha256` covers the stored data of the chunk's row, so
    that not even a bit that inflates to the same bytes can change unseen.
    """

    occupation: int
    chunk: int
    first_id: int
    last_id: int
    items: int
    bytes: int
    sha256: str
    stored_sha256: str

    def body(self) -> Tree:
        """The body of the `raw` entry."""
        return dataclasses.asdict(self)

    def columns(self) -> tuple[int | str, ...]:
        """The columns of the chunk's row, without its data."""
        return self.occupation, self.chunk, self.first_id, self.last_id, self.items, self.bytes, self.sha256

    @classmethod
    def from_body(cls, body: Tree) -> Sealed:
        """From a `raw` entry.

        Raises:
            ValueError: a key is missing, or a value is no positive number or text.
        """
        numbers = (_count(body, key) for key in ("occupation", "chunk", "first_id", "last_id", "items", "bytes"))
        occupation, chunk, first, last, items, size = numbers
        hashes = _text(body, "sha256"), _text(body, "stored_sha256")
        return cls(occupation, chunk, first, last, items, size, *hashes)


@dataclass(frozen=True)
class Packed:
    """A pack as its `packed` entry states it; `bytes` and `sha256` are those of the stored data."""

    occupation: int
    first_chunk: int
    last_chunk: int
    codec: str
    bytes: int
    sha256: str

    def body(self) -> Tree:
        """The body of the `packed` entry."""
        return dataclasses.asdict(self)

    @classmethod
    def from_body(cls, body: Tree) -> Packed:
        """From a `packed` entry.

        Raises:
            ValueError: a key is missing, or a value is no positive number or text.
        """
        occupation, first, last = (_count(body, key) for key in ("occupation", "first_chunk", "last_chunk"))
        return cls(occupation, first, last, _text(body, "codec"), _count(body, "bytes"), _text(body, "sha256"))


def _text(body: Tree, key: str) -> str:
    value = body.get(key)
    if not isinstance(value, str):
        raise ValueError(f"the entry states no text '{key}'")
    return value


def _count(body: Tree, key: str) -> int:
    value = body.get(key)
    if type(value) is not int or not 0 <= value < 2**62:
        raise ValueError(f"the entry states no number '{key}'")
    return value


def insert_tail(connection: sqlite3.Connection, occupation: int, first_id: int, items: Iterable[Item]) -> int:
    """Write items as tail rows from an id on; return the next free id. The caller holds the transaction."""
    rows = [
        (number, occupation, item.kind.value, item.monotonic_ms, item.utc_ms, item.data)
        for number, item in enumerate(items, first_id)
    ]
    connection.executemany(
        "INSERT INTO raw_tail (id, occupation, kind, monotonic_ms, utc_ms, data) VALUES (?, ?, ?, ?, ?, ?)", rows
    )
    return first_id + len(rows)


def last_tail_id(connection: sqlite3.Connection) -> int:
    """The highest id in the tail, 0 if it is empty.

    Raises:
        BookError: a number that no recorder reaches.
    """
    last = int(connection.execute("SELECT coalesce(max(id), 0) FROM raw_tail").fetchone()[0])
    if last >= 2**62:
        text = "The numbering of the received items is damaged."
        raise BookError(text, "`fieldbook verify` says what still holds.", code="damaged")
    return last


def tail_rows(
    connection: sqlite3.Connection, occupation: int, after_id: int, limit_bytes: int = CHUNK_BYTES
) -> list[Row]:
    """Tail rows of an occupation after an id, up to about `limit_bytes` of data."""
    cursor = connection.execute(
        "SELECT id, kind, monotonic_ms, utc_ms, data FROM raw_tail WHERE occupation = ? AND id > ? ORDER BY id",
        (occupation, after_id),
    )
    rows: list[Row] = []
    size = 0
    for row in cursor:
        rows.append(row)
        size += len(row[4]) if isinstance(row[4], bytes | str) else 0
        if size >= limit_bytes:
            break
    cursor.close()
    return rows


def item_of(row: Row) -> Item:
    """The item of a tail row.

    Raises:
        ValueError: no item. A damaged page can hand out a text where STRICT promised bytes.
    """
    if type(row[4]) is not bytes or not all(value is None or type(value) is int for value in row[2:4]):
        raise ValueError(f"received item {row[0]} holds values of another type")
    return Item(ItemKind(row[1]), row[4], row[2], row[3])


@dataclass(frozen=True)
class Chunk:
    """A new chunk: its description and its stored data; `large`: made by `lines`, else by zlib."""

    sealed: Sealed
    large: bool
    data: bytes


def chunk_of(
    occupation: int,
    chunk: int,
    first_id: int,
    items: Sequence[Item],
    ready: Callable[[str], bytes | None] = lambda _sha256: None,
) -> Chunk:
    """A new chunk of items, whose ids run on from `first_id`.

    `ready` may give what `press` made of the canonical bytes with this SHA-256.

    Raises:
        ValueError: a large chunk did not read back as it was (failing memory).
    """
    plain = canonical_items(items)
    name, large = sha256_of(plain), len(plain) >= LARGE_BYTES
    data = ready(name) or press(plain, lines.QUICK) if large else zlib.compress(plain, 6)
    last_id = first_id + len(items) - 1
    hashes = name, sha256_of(data)
    return Chunk(Sealed(occupation, chunk, first_id, last_id, len(items), len(plain), *hashes), large, data)


def chunks_of(
    occupation: int, chunk: int, first_id: int, items: Sequence[Item], ready: Callable[[str], bytes | None]
) -> Iterator[Chunk]:
    """New chunks of about LARGE_CHUNK_BYTES from many items, as `chunk_of`."""
    for number, group in enumerate(groups_of(items), chunk):
        yield chunk_of(occupation, number, first_id, group, ready)
        first_id += len(group)


def groups_of(items: Sequence[Item]) -> Iterator[Sequence[Item]]:
    """Many items in groups of about LARGE_CHUNK_BYTES."""
    begin = size = 0
    for end, item in enumerate(items, 1):
        size += len(item.data)
        if size >= LARGE_CHUNK_BYTES or end == len(items):
            yield items[begin:end]
            begin, size = end, 0


def items_of(rows: Sequence[Row]) -> list[Item]:
    """The items of tail rows.

    Raises:
        ValueError: their ids have a gap, or a row is no item.
    """
    first, last = rows[0][0], rows[-1][0]
    if last - first + 1 != len(rows):
        raise ValueError(f"received items {first} to {last} have a gap")
    return [item_of(row) for row in rows]


def sha256_of(data: bytes) -> str:
    """SHA-256, 64 lower-case hex digits."""
    return hashlib.sha256(data).hexdigest()


def insert_chunk(connection: sqlite3.Connection, chunk: Chunk) -> None:
    """Write a chunk. The caller holds the transaction."""
    connection.execute(
        "INSERT INTO raw_chunk (occupation, chunk, first_id, last_id, items, bytes, sha256, data)"
        " VALUES (?, ?, ?, ?, ?, ?, ?, ?)",
        (*chunk.sealed.columns(), chunk.data),
    )


def clear_tail(connection: sqlite3.Connection, sealed: Sealed) -> None:
    """Take a chunk's rows from the tail. The caller holds the transaction.

    Raises:
        ValueError: the tail does not hold exactly these rows any more.
    """
    gone = connection.execute(
        "DELETE FROM raw_tail WHERE occupation = ? AND id BETWEEN ? AND ?",
        (sealed.occupation, sealed.first_id, sealed.last_id),
    ).rowcount
    if gone != sealed.items:
        raise ValueError(f"the tail of occupation {sealed.occupation} changed while it was sealed")


def checked(sealed: Sealed, plain: bytes) -> bytes:
    """The canonical bytes, if they are those the chain names.

    Raises:
        ValueError: another SHA-256.
    """
    if sha256_of(plain) != sealed.sha256:
        raise ValueError(f"chunk {sealed.chunk} of occupation {sealed.occupation} is not what entry 'raw' states")
    return plain


def read_chunk(connection: sqlite3.Connection, sealed: Sealed) -> bytes | None:
    """The checked canonical bytes of a chunk that is not packed; None if it is not in `raw_chunk`."""
    found = _read_chunk(connection, sealed)
    return None if found is None else found[0]


def _read_chunk(connection: sqlite3.Connection, sealed: Sealed) -> tuple[bytes, bytes] | None:
    """The same with the stored data."""
    row = connection.execute(
        "SELECT data FROM raw_chunk WHERE occupation = ? AND chunk = ?", (sealed.occupation, sealed.chunk)
    ).fetchone()
    return None if row is None else (checked(sealed, inflate_chunk(row[0], sealed.bytes)), row[0])


def split_pack(codec: str, data: bytes, chunks: Sequence[Sealed]) -> Iterator[tuple[Sealed, bytes]]:
    """Each chunk of a pack with its checked canonical bytes.

    Raises:
        ValueError: the pack does not hold these chunks.
    """
    plain = inflate_pack(codec, data, sum(sealed.bytes for sealed in chunks))
    position = 0
    for sealed in chunks:
        yield sealed, checked(sealed, plain[position : position + sealed.bytes])
        position += sealed.bytes


def pack_groups(chunks: Sequence[Sealed]) -> Iterator[list[Sealed]]:
    """Consecutive chunks in groups of about PACK_BYTES."""
    group: list[Sealed] = []
    size = 0
    for sealed in chunks:
        if group and (size + sealed.bytes > PACK_BYTES or sealed.chunk != group[-1].chunk + 1):
            yield group
            group, size = [], 0
        group.append(sealed)
        size += sealed.bytes
    if group:
        yield group


def compress_pack(
    connection: sqlite3.Connection, chunks: Sequence[Sealed], ready: Callable[[Sealed], bytes | None]
) -> bytes:
    """Streams of consecutive chunks. `press` reads each back and compares, before anything is let go.

    `ready` may give the stream of a chunk that this process has just written; the others are read from `raw_chunk` and
    compared with the SHA-256 of their entry. A large chunk goes into the pack as it is stored.

    Raises:
        ValueError: a chunk is missing or damaged.
    """
    streams: list[bytes] = []
    waiting: list[bytes] = []
    for sealed in chunks:
        stream = ready(sealed)
        if stream is None:
            found = _read_chunk(connection, sealed)
            if found is None:
                raise ValueError(f"chunk {sealed.chunk} of occupation {sealed.occupation} is missing")
            if made_by_lines(found[1]):
                stream = found[1]
            else:
                waiting.append(found[0])
        if waiting and (stream is not None or sum(map(len, waiting)) >= STREAM_BYTES):
            streams.append(press(b"".join(waiting)))
            waiting.clear()
        if stream is not None:
            streams.append(stream)
    if waiting:
        streams.append(press(b"".join(waiting)))
    return b"".join(streams)


def insert_pack(connection: sqlite3.Connection, chunks: Sequence[Sealed], data: bytes) -> Packed:
    """Write the pack and take its chunks from `raw_chunk`. The caller holds the transaction."""
    occupation, first, last = chunks[0].occupation, chunks[0].chunk, chunks[-1].chunk
    connection.execute(
        "INSERT INTO raw_pack (occupation, first_chunk, last_chunk, codec, data) VALUES (?, ?, ?, ?, ?)",
        (occupation, first, last, CODEC, data),
    )
    connection.execute(
        "DELETE FROM raw_chunk WHERE occupation = ? AND chunk BETWEEN ? AND ?", (occupation, first, last)
    )
    return Packed(occupation, first, last, CODEC, len(data), sha256_of(data))


def unpacked(connection: sqlite3.Connection, occupation: int) -> set[int]:
    """Numbers of the chunks of an occupation that are still in `raw_chunk`."""
    rows = connection.execute("SELECT chunk FROM raw_chunk WHERE occupation = ?", (occupation,))
    return {row[0] for row in rows}


Snapshot = Callable[[], list[Sealed]]


def iterate(connection: sqlite3.Connection, occupation: int, sealed_now: Snapshot, after_id: int = 0) -> Iterator[Item]:
    """Items of an occupation in order, also while a recorder seals and packs.

    Each step is one short read transaction over entries, packs, chunks and tail together, so that a row moving
    from the tail into a chunk between two steps is neither lost nor seen twice; no transaction stays open
    between two items. `sealed_now` gives the occupation's `raw` entries as of the current transaction.
    """
    after = after_id
    while True:
        connection.execute("BEGIN")
        try:
            step = list(_next_piece(connection, occupation, sealed_now(), after))
        finally:
            connection.execute("COMMIT")
        if not step:
            return
        for number, item in step:
            after = number
            yield item


def _next_piece(
    connection: sqlite3.Connection, occupation: int, chunks: Sequence[Sealed], after: int
) -> Iterator[tuple[int, Item]]:
    due = next((sealed for sealed in chunks if sealed.last_id > after), None)
    if due is None:
        for row in tail_rows(connection, occupation, after):
            yield row[0], item_of(row)
        return
    plain = read_chunk(connection, due)
    pieces = [(due, plain)] if plain is not None else _pack_of(connection, chunks, due)
    for sealed, content in pieces:
        for number, item in enumerate(parse_items(content), sealed.first_id):
            if number > after:
                yield number, item


def _pack_of(
    connection: sqlite3.Connection, chunks: Sequence[Sealed], wanted: Sealed
) -> Iterable[tuple[Sealed, bytes]]:
    row = connection.execute(
        "SELECT first_chunk, last_chunk, codec, data FROM raw_pack"
        " WHERE occupation = ? AND ? BETWEEN first_chunk AND last_chunk",
        (wanted.occupation, wanted.chunk),
    ).fetchone()
    if row is None:
        raise ValueError(f"chunk {wanted.chunk} of occupation {wanted.occupation} is missing")
    inside = [sealed for sealed in chunks if row[0] <= sealed.chunk <= row[1]]
    return split_pack(row[2], row[3], inside)
