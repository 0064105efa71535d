"""Entries and their hash chain: append one, read many.

The head is read inside the writer's transaction, so screen and recorder may append at the same time.
"""

from __future__ import annotations

import json
import sqlite3
from collections.abc import Iterator
from typing import Any

from fieldbook.errors import BookError, UsageError
from fieldbook.model.canonical import Tree, canonical_json, normalised
from fieldbook.model.entry import GENESIS, Entry, entry_hash

from .connect import printable
from .kinds import MAX_BODY_BYTES, STRIKABLE, checked_body


def head(connection: sqlite3.Connection) -> tuple[int, str]:
    """(seq, hash) of the last entry; (0, 64 zeros) of an empty book."""
    row = connection.execute("SELECT seq, hash FROM entry ORDER BY seq DESC LIMIT 1").fetchone()
    if row and not isinstance(row[1], str):
        raise damaged_entry(row[0], "its hash is no text")
    return (row[0], row[1]) if row else (0, GENESIS)


def insert_entry(connection: sqlite3.Connection, kind: str, body: Tree, observer: str, utc: str) -> Entry:
    """Append one entry. The caller holds the write transaction.

    Raises:
        UsageError: kind, body or observer cannot be stored, or a strike of what cannot be struck.
    """
    tree = checked_body(kind, body)
    name = str(normalised(observer))
    text = canonical_json(tree)
    _check_text(kind, text, name)
    if kind == "strike":
        _check_strike(connection, tree["seq"])
    seq, previous = head(connection)
    seq += 1
    entry = Entry(seq, utc, kind, tree, name, previous, entry_hash(seq, utc, kind, text, name, previous))
    connection.execute(
        "INSERT INTO entry (seq, utc, kind, body, observer, previous_hash, hash) VALUES (?, ?, ?, ?, ?, ?, ?)",
        (seq, utc, kind, text, name, previous, entry.hash),
    )
    return entry


def _check_text(kind: str, text: str, observer: str) -> None:
    if not observer.strip():
        raise UsageError(f"The entry '{kind}' names no observer.", "Every entry is signed: say who writes it.")
    try:
        size = len(text.encode("utf-8")) + len(observer.encode("utf-8"))
    except UnicodeEncodeError as error:
        raise UsageError(
            f"The entry '{kind}' holds characters that are no text.", "Type it again in a UTF-8 terminal."
        ) from error
    if size > MAX_BODY_BYTES:
        raise UsageError(f"The entry '{kind}' is {size} bytes long, more than {MAX_BODY_BYTES}.", "Shorten it.")


def _check_strike(connection: sqlite3.Connection, seq: int) -> None:
    row = connection.execute("SELECT kind, body FROM entry WHERE seq = ?", (max(-1, min(seq, 2**62)),)).fetchone()
    if row is None:
        raise UsageError(f"There is no entry {seq} to strike.", "`fieldbook status` lists the last entries.")
    kind, body = row
    if kind not in STRIKABLE:
        raise UsageError(
            f"Entry {seq} is a '{kind}' entry: what a machine wrote or a certificate states cannot be struck.",
            f"Only these can: {', '.join(sorted(STRIKABLE))}.",
        )
    if kind == "occupation" and not _ended(connection, json.loads(body)["occupation"]):
        raise UsageError(f"Entry {seq} is an open occupation.", "End it first, then strike it.")


def _ended(connection: sqlite3.Connection, occupation: int) -> bool:
    rows = connection.execute("SELECT body FROM entry WHERE kind = 'end'")
    return any(json.loads(row[0]).get("occupation") == occupation for row in rows)


def read_entries(connection: sqlite3.Connection, after_seq: int = 0, until_seq: int | None = None) -> Iterator[Entry]:
    """Entries after a seq, in order, up to another one if given.

    Raises:
        BookError: a body is no JSON tree.
    """
    rows = connection.execute(
        "SELECT seq, utc, kind, body, observer, previous_hash, hash FROM entry WHERE seq > ? AND seq <= ? ORDER BY seq",
        (after_seq, 2**62 if until_seq is None else until_seq),
    )
    for seq, utc, kind, text, observer, previous, own in rows:
        if not all(isinstance(value, str) for value in (utc, kind, text, observer, previous, own)):
            raise damaged_entry(seq, "it holds a value that is no text")  # a damaged page can, STRICT or not
        yield Entry(seq, utc, kind, _parsed(seq, text), observer, previous, own)


def _parsed(seq: int, text: str) -> Tree:
    try:
        tree: Any = json.loads(text)
    except (ValueError, RecursionError) as error:
        raise damaged_entry(seq, "its body is no JSON") from error
    if not isinstance(tree, dict):
        raise damaged_entry(seq, "its body is no tree")
    return tree


def damaged_entry(seq: int, why: str) -> BookError:
    """The error for an entry that cannot be read."""
    return BookError(
        f"Entry {seq} is damaged: {printable(why)}.", "`fieldbook verify` says what is wrong.", code="damaged"
    )
