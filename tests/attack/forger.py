"""A forger who knows SQLite and this program: takes the triggers off and puts them back, and makes every hash anew."""

from __future__ import annotations

import hashlib
import json
import sqlite3
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from fieldbook.book import heartbeat, raw, tail
from fieldbook.model.canonical import canonical_json
from fieldbook.model.entry import GENESIS, entry_hash
from fieldbook.model.item import canonical_items


@contextmanager
def forging(path: Path) -> Iterator[sqlite3.Connection]:
    """A plain connection without the append-only triggers; they are back afterwards, so that only values differ."""
    connection = sqlite3.connect(path, isolation_level=None)
    try:
        connection.execute("PRAGMA foreign_keys=OFF")
        triggers = connection.execute("SELECT name, sql FROM sqlite_master WHERE type = 'trigger'").fetchall()
        for name, _ in triggers:
            connection.execute(f'DROP TRIGGER "{name}"')
        yield connection
        for _, text in triggers:
            connection.execute(text)
    finally:
        connection.close()


def change(connection: sqlite3.Connection, seq: int, edit: Callable[[dict[str, Any]], object]) -> None:
    """Change the body of one entry, in canonical form again."""
    (text,) = connection.execute("SELECT body FROM entry WHERE seq = ?", (seq,)).fetchone()
    body = json.loads(text)
    edit(body)
    connection.execute("UPDATE entry SET body = ? WHERE seq = ?", (canonical_json(body), seq))


def seqs(connection: sqlite3.Connection, kind: str) -> list[int]:
    """Numbers of the entries of a kind."""
    return [row[0] for row in connection.execute("SELECT seq FROM entry WHERE kind = ? ORDER BY seq", (kind,))]


def reseal(connection: sqlite3.Connection) -> None:
    """A chain that is consistent in itself, from the first entry to the last."""
    previous = GENESIS
    for seq, utc, kind, body, observer in connection.execute(
        "SELECT seq, utc, kind, body, observer FROM entry ORDER BY seq"
    ).fetchall():
        own = entry_hash(seq, utc, kind, body, observer, previous)
        connection.execute("UPDATE entry SET previous_hash = ?, hash = ? WHERE seq = ?", (previous, own, seq))
        previous = own


def resum(connection: sqlite3.Connection) -> None:
    """The heartbeat's sum over the tail, made anew."""
    tree = heartbeat.tree(connection)
    tree["tail"] = tail.TailSum(connection).stated()
    connection.execute("UPDATE recorder_state SET state = ?", (json.dumps(tree),))


def put_items(connection: sqlite3.Connection, occupation: int, items: list[Any]) -> None:
    """Other received items for an ended, packed occupation: one chunk in one pack, and all entries about it to match."""
    plain = canonical_items(items)
    received = b"".join(item.data for item in items if item.kind.value == "B")
    entries = [seq for seq in seqs(connection, "raw") if _of(connection, seq) == occupation]
    (pack,) = [seq for seq in seqs(connection, "packed") if _of(connection, seq) == occupation]
    (end,) = [seq for seq in seqs(connection, "end") if _of(connection, seq) == occupation]
    assert len(entries) == 1, "a short file is one chunk"
    from fieldbook.book.press import press

    data = press(plain)
    stated = {"items": len(items), "last_id": len(items), "first_id": 1, "bytes": len(plain)}
    hashes = {"sha256": raw.sha256_of(plain), "stored_sha256": raw.sha256_of(data)}
    change(connection, entries[0], lambda body: body.update({**stated, **hashes}))
    change(connection, pack, lambda body: body.update(bytes=len(data), sha256=raw.sha256_of(data)))
    total = {"received_bytes": len(received), "received_sha256": hashlib.sha256(received).hexdigest()}
    change(connection, end, lambda body: body.update(total))
    connection.execute("UPDATE raw_pack SET data = ? WHERE occupation = ?", (data, occupation))


def _of(connection: sqlite3.Connection, seq: int) -> Any:
    (text,) = connection.execute("SELECT body FROM entry WHERE seq = ?", (seq,)).fetchone()
    return json.loads(text).get("occupation")
