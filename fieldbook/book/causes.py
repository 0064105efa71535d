"""Damage or tampering? What the way in which a book fails says of the cause, in honest words.

    SQLite itself finds pages damaged               what a failing disk, a stick pulled out or a broken copy does
    one bit of an entry differs from what was hashed          the same: one flipped bit restores the hash
    an entry differs by more, its hash was left                either
    hashes that fit a changed entry, entries taken out,       a program that computes hashes or writes SQL; damage does not
    tables or triggers changed

Whoever tampers can imitate damage, so 'damage' is never more than a likeness.
"""

from __future__ import annotations

import hashlib
import sqlite3
from collections.abc import Sequence
from pathlib import Path

from fieldbook.errors import BookError

from . import connect, migrations

BITS_TRIED_BYTES = 4096  # flipping every bit of a text costs its length squared
_COLUMNS = ("utc", "kind", "body", "observer", "previous_hash")
_HAND = "that takes a program and an intention; damage does not do it"


def causes(path: Path) -> list[str]:
    """One sentence per thing that tells damage from tampering; empty where nothing does. Never raises."""
    try:
        connection = connect.open_reader(path)
    except BookError as error:
        return ["damage: SQLite cannot read the file at all"] if error.code == "damaged" else []
    try:
        connection.text_factory = lambda data: data.decode("utf-8", "replace")
        schema = _schema(connection)
        if schema:
            return schema  # SQLite's check of the pages would evaluate what a foreign schema tells it to
        connection.text_factory = bytes
        return _pages(connection) + _entries(connection)
    except (sqlite3.Error, UnicodeDecodeError, MemoryError, OverflowError):
        return [
            "damage: SQLite cannot read all of the file, as after a failing disk, a stick pulled out or a broken copy"
        ]
    finally:
        connection.close()


def _pages(connection: sqlite3.Connection) -> list[str]:
    if connection.execute("PRAGMA integrity_check(1)").fetchone()[0] == b"ok":
        return []
    return ["damage: pages of the file are broken, as after a failing disk, a stick pulled out or a broken copy"]


def _schema(connection: sqlite3.Connection) -> list[str]:
    version = connection.execute("PRAGMA user_version").fetchone()[0]
    if not 1 <= version <= migrations.version():
        return []
    expected, found = migrations.expected_schema(version), migrations.schema_of(connection)
    if found == expected:
        return []
    if (
        _differing_bits(
            *(repr(sorted(tree.items(), key=repr)).encode("utf-8", "replace") for tree in (expected, found))
        )
        == 1
    ):
        return ["damage: one flipped bit in the schema is all that differs, as by a fault of disk or memory"]
    return [f"tampering: tables or triggers are not those of a book; {_HAND}"]


def _differing_bits(one: bytes, other: bytes) -> int | None:
    """Number of bits in which two texts of the same length differ; None if their lengths do."""
    if len(one) != len(other):
        return None
    return (int.from_bytes(one, "big") ^ int.from_bytes(other, "big")).bit_count()


def _entries(connection: sqlite3.Connection) -> list[str]:
    """The first place where the chain does not hold."""
    before, expected = b"0" * 64, 1
    rows = connection.execute("SELECT seq, utc, kind, body, observer, previous_hash, hash FROM entry ORDER BY seq")
    for seq, *texts in rows:
        if seq != expected:
            return [f"tampering: entry {expected} is gone and those around it stand; {_HAND}"]
        if not all(isinstance(text, bytes) for text in texts):
            return [f"damage: entry {seq} holds values that no program could have stored there"]
        *hashed, own = texts
        if _hash(seq, hashed) != own:
            return [_changed(seq, hashed, own)]
        if hashed[-1] != before:
            return [
                f"tampering: the hash of entry {seq} fits it, but names another entry before it than entry {seq - 1}: "
                f"hashes were computed anew; {_HAND}"
            ]
        before, expected = own, seq + 1
    return []


def _changed(seq: int, hashed: Sequence[bytes], own: bytes) -> str:
    column = _flipped(seq, hashed, own)
    if column:
        return (
            f"damage: one flipped bit in '{column}' of entry {seq} is all that differs, as by a fault of disk or memory"
        )
    return f"damage or tampering: more than one bit of entry {seq} was changed and its hash was left; the two cannot be told apart"


def _flipped(seq: int, hashed: Sequence[bytes], own: bytes) -> str:
    """The column in which one flipped bit makes the entry fit its hash; empty if there is none."""
    made = _hash(seq, hashed)
    if _differing_bits(made, own) == 1:
        return "hash"
    if sum(len(text) for text in hashed) > BITS_TRIED_BYTES:
        return ""
    for index, column in enumerate(_COLUMNS):
        text = bytearray(hashed[index])
        for place in range(8 * len(text)):
            text[place // 8] ^= 1 << place % 8
            if _hash(seq, [*hashed[:index], bytes(text), *hashed[index + 1 :]]) == own:
                return column
            text[place // 8] ^= 1 << place % 8
    return ""


def _hash(seq: int, texts: Sequence[bytes]) -> bytes:
    """The entry hash (contract, section 4) over stored bytes, which need not be text any more."""
    total = hashlib.sha256()
    for data in (str(seq).encode("ascii"), *texts):
        total.update(len(data).to_bytes(8, "big"))
        total.update(data)
    return total.hexdigest().encode("ascii")
