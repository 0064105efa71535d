"""The entries of a book as far as its chain holds, whatever comes after."""

from __future__ import annotations

import json
import sqlite3
from contextlib import suppress
from pathlib import Path

from fieldbook.model.canonical import canonical_json
from fieldbook.model.entry import GENESIS, Entry, entry_hash

from . import connect


def sound_entries(path: Path) -> tuple[list[Entry], int]:
    """(entries 1, 2, ... up to the first that does not follow or was changed, number of entries in the book).

    Raises:
        BookError: not to be opened, no book, or with tables that are not a book's.
    """
    connection = connect.open_reader(path)
    try:
        with connect.book_errors(path):
            connect.check_identity(connection, path)
        connection.text_factory = lambda data: data.decode("utf-8", "surrogateescape")
        found: list[Entry] = []
        total = 0
        with suppress(sqlite3.Error):  # a damaged page: as far as it can be read
            connection.execute("BEGIN")
            total = int(connection.execute("SELECT max(count(*), coalesce(max(seq), 0)) FROM entry").fetchone()[0])
            rows = connection.execute(
                "SELECT seq, utc, kind, body, observer, previous_hash, hash FROM entry ORDER BY seq"
            )
            for row in rows:
                entry = _sound(row, found)
                if entry is None:
                    break
                found.append(entry)
        return found, max(total, len(found))
    finally:
        connection.close()


def _sound(row: tuple[object, ...], before: list[Entry]) -> Entry | None:
    """The row as an entry, if it follows those before and is what its hash says."""
    seq, *texts = row
    utc, kind, text, observer, previous, own = (value if isinstance(value, str) else "" for value in texts)
    if seq != len(before) + 1 or previous != (before[-1].hash if before else GENESIS):
        return None
    try:
        if entry_hash(len(before) + 1, utc, kind, text, observer, previous) != own:
            return None
        body = json.loads(text)
        if not isinstance(body, dict) or canonical_json(body) != text:
            return None
    except (ValueError, TypeError, RecursionError):
        return None
    return Entry(len(before) + 1, utc, kind, body, observer, previous, own)
