"""The new book: entries under their old numbers, whole occupations as they were stored, the others made anew.

Written to a file without a name yet; whoever calls decodes the epochs, states what was lost and gives it its name.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator, Sequence
from itertools import groupby
from pathlib import Path

from fieldbook import __version__
from fieldbook.book import chain, connect, migrations, raw
from fieldbook.book.begin import FORMAT
from fieldbook.model.canonical import Tree
from fieldbook.model.entry import entry_hash
from fieldbook.model.item import Item, ItemKind

from .fill import Piece, Proof
from .plan import Line, withdrawn_body
from .streams import Stream

SIGNED = f"fieldbook {__version__}"


def write_book(
    part: Path, book_id: str, lines: Sequence[Line], streams: Sequence[Stream], utc: str
) -> dict[int, list[Tree]]:
    """Write entries and received items; returns {occupation: [{first, last, proof}]} of the chunks made anew.

    Args:
        part: where no file is yet.
        book_id: the UUID4 of the new book.
        lines: what stands at the numbers 2, 3, ...
        streams: what the occupations that have begun received.
        utc: time of the entries that are not carried.

    Raises:
        BookError: it cannot be written.
    """
    with connect.book_errors(part):
        connection = connect.open_writer(part, create=True)
        try:
            connection.execute("BEGIN IMMEDIATE")
            connection.execute(f"PRAGMA application_id = {migrations.APPLICATION_ID}")
            rows = migrations.apply(connection)
            body: Tree = {"id": book_id, "format": FORMAT, "program": __version__}
            chain.insert_entry(connection, "book", {**body, "migrations": [list(row) for row in rows]}, SIGNED, utc)
            for line in lines:
                _line(connection, line, utc)
            made = {stream.occupation: _stream(connection, stream, utc) for stream in streams}
            connection.execute("COMMIT")
        finally:
            connection.close()
    return {number: chunks for number, chunks in made.items() if chunks}


def _line(connection: sqlite3.Connection, line: Line, utc: str) -> None:
    if line.reason or line.entry is None:
        chain.insert_entry(connection, "withdrawn", withdrawn_body(line), SIGNED, utc)
        return
    entry = line.entry
    _, previous = chain.head(connection)
    own = entry_hash(entry.seq, entry.utc, entry.kind, entry.body, entry.observer, previous)
    connection.execute(
        "INSERT INTO entry (seq, utc, kind, body, observer, previous_hash, hash) VALUES (?, ?, ?, ?, ?, ?, ?)",
        (entry.seq, entry.utc, entry.kind, entry.body, entry.observer, previous, own),
    )


def _stream(connection: sqlite3.Connection, stream: Stream, utc: str) -> list[Tree]:
    if not stream.whole:
        return _anew(connection, stream, utc)
    for row in stream.chunks:
        connection.execute(
            "INSERT INTO raw_chunk (occupation, chunk, first_id, last_id, items, bytes, sha256, data)"
            " VALUES (?, ?, ?, ?, ?, ?, ?, ?)",
            (
                *(row.occupation, row.chunk, row.first_id, row.last_id, row.items, row.bytes, row.sha256),
                row.stored.data,
            ),
        )
    for pack in stream.packs:
        connection.execute(
            "INSERT INTO raw_pack (occupation, first_chunk, last_chunk, codec, data) VALUES (?, ?, ?, ?, ?)",
            (pack.occupation, pack.first_chunk, pack.last_chunk, pack.codec, pack.stored.data),
        )
    for piece in stream.pieces:
        raw.insert_tail(connection, stream.occupation, piece.first_id, piece.items)
    return []


def _anew(connection: sqlite3.Connection, stream: Stream, utc: str) -> list[Tree]:
    """Chunks with `raw` entries of the new book; a hole is an item that says how many bytes are missing."""
    stated: list[Tree] = []
    number = 1
    for proof, first_id, items in runs_of(stream):
        for chunk in raw.chunks_of(stream.occupation, number, first_id, items, lambda _sha256: None):
            raw.insert_chunk(connection, chunk)
            chain.insert_entry(connection, "raw", chunk.sealed.body(), SIGNED, utc)
            if stated and stated[-1]["proof"] == proof:
                stated[-1]["last"] = number
            else:
                stated.append({"first": number, "last": number, "proof": proof})
            number += 1
    return stated


def runs_of(stream: Stream) -> Iterator[tuple[Proof, int, list[Item]]]:
    """(proof, first id, items): each proven chunk by itself, other consecutive items together, holes as items."""
    marks = [
        Piece(hole.first_id, (_hole_item(stream, hole.first_id, hole.data_bytes),), "none") for hole in stream.holes
    ]
    ordered = sorted([*stream.pieces, *marks], key=lambda piece: (piece.first_id, piece.last_id))
    joined: list[tuple[Piece, int]] = []
    group = 0
    for piece in ordered:
        before = joined[-1][0] if joined else None
        together = before is not None and piece.sealed is None and before.sealed is None and before.proof == piece.proof
        if not (together and before is not None and before.last_id + 1 == piece.first_id):
            group += 1
        joined.append((piece, group))
    for _, same in groupby(joined, key=lambda pair: pair[1]):
        pieces = [piece for piece, _ in same]
        yield pieces[0].proof, pieces[0].first_id, [item for piece in pieces for item in piece.items]


def _hole_item(stream: Stream, first_id: int, data_bytes: int | None) -> Item:
    before = [piece for piece in stream.pieces if piece.last_id < first_id]
    last = before[-1].items[-1] if before else None
    times = (None, None) if last is None else (last.monotonic_ms, last.utc_ms)
    return Item(ItemKind.DROPPED, str(data_bytes or 0).encode("ascii"), *times)


def old_texts(
    entries: Sequence[tuple[int, str, str, str, str]], old_book: Tree | None
) -> dict[int, tuple[str, str, str, str]]:
    """seq -> (utc, kind, text, observer) of the old entries, from the rows (seq, utc, kind, text, observer) of a new book."""
    import json

    found: dict[int, tuple[str, str, str, str]] = {}
    if old_book is not None:
        found[1] = old_book["utc"], old_book["kind"], old_book["body"], old_book["observer"]
    for seq, utc, kind, text, observer in entries:
        if seq == 1:
            continue
        original = json.loads(text).get("original") if kind == "withdrawn" else None
        if kind != "withdrawn":
            found[seq] = utc, kind, text, observer
        elif original is not None:
            found[seq] = original["utc"], original["kind"], original["body"], original["observer"]
    return found
