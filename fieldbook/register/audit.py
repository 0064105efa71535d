"""Does a register file hold? Schema, pages, the chain of entries, and every piece of evidence against its hash.

Nothing here raises, whatever the file is. What it cannot show is said in NOT_PROVEN: the register repeats what books said when
they were added, and only the books can prove that.
"""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

from fieldbook.book.connect import printable
from fieldbook.book.migrations import schema_of
from fieldbook.errors import FieldbookError
from fieldbook.model.canonical import canonical_json
from fieldbook.model.entry import GENESIS, Entry, entry_hash
from fieldbook.occupy.verifying import Verified

from . import connect, migrations
from .fold import RegisterState
from .store import read_entries, unpacked

MOST_NAMED = 20
NOT_PROVEN = (
    "that the books said what is kept of them: verify the books, whose ids and hashes stand in the entries 'added'",
    "who decided what: the names are typed, and no entry of a register is signed",
    "that it was not made anew as a whole, or cut off at the end: compare number and hash of an entry that you noted",
)
_UNFIT = (LookupError, TypeError, ValueError, AttributeError, ArithmeticError)


def audit_register(path: Path) -> list[Verified]:
    """Everything about a register file that does not hold, and what does; each as one line."""
    found: list[Verified] = []
    try:
        connection = connect.open_reader(path)
    except FieldbookError as error:
        return [Verified(False, "file", error.text)]
    try:
        parts: tuple[tuple[str, Callable[[connect.Connection], Iterator[Verified]]], ...] = (
            ("schema", _schema),
            ("file", _pages),
            ("entries", _entries),
            ("evidence", _evidence),
        )
        for where, part in parts:
            try:
                with connect.register_errors(path):
                    lines = list(part(connection))
            except FieldbookError as error:
                lines = [Verified(False, where, error.text)]
            except _UNFIT as error:
                lines = [Verified(False, where, f"holds what no register holds ({type(error).__name__})")]
            found += lines[:MOST_NAMED]
            if len(lines) > MOST_NAMED:
                found.append(Verified(False, where, f"and {len(lines) - MOST_NAMED} more"))
            if where == "schema" and not all(item.holds for item in lines):
                break  # with other tables every further question could be answered by a trick
    finally:
        connection.close()
    return found


def _schema(connection: connect.Connection) -> Iterator[Verified]:
    version = connection.execute("PRAGMA user_version").fetchone()[0]
    if version > migrations.version():
        yield Verified(False, "schema", f"the register is of version {version}, newer than this program")
        return
    actual = schema_of(connection)
    if version < 1 or actual != connect.expected_schema(version):
        yield Verified(False, "schema", "its tables or triggers are not those of a register")
    if connection.execute("PRAGMA encoding").fetchone()[0] != "UTF-8":
        yield Verified(False, "schema", "its texts are not UTF-8")


def _pages(connection: connect.Connection) -> Iterator[Verified]:
    for row in connection.execute("PRAGMA integrity_check(20)"):
        if row[0] != "ok":
            yield Verified(False, "file", f"SQLite: {printable(row[0])}")


def _entries(connection: connect.Connection) -> Iterator[Verified]:
    previous, expected, state, sound = GENESIS, 1, RegisterState(), True
    for entry in read_entries(connection):
        for text in _wrong_with(entry, previous, expected):
            sound = False
            yield Verified(False, "entries", text, entry.seq)
        previous, expected = entry.hash, entry.seq + 1
        try:
            state.apply(entry)
        except _UNFIT:
            sound = False
            yield Verified(False, "entries", f"entry {entry.seq} is no '{printable(entry.kind)[:40]}'", entry.seq)
    if expected == 1 or not state.id:
        yield Verified(False, "entries", "there is no first entry 'register'", 1)
    elif sound:
        state.marks()
        yield Verified(True, "entries", f"the chain of {expected - 1} entries holds; the last has the hash {previous}")


def _wrong_with(entry: Entry, previous: str, expected: int) -> Iterator[str]:
    if entry.seq != expected:
        yield f"entry {expected} is missing before entry {entry.seq}"
    if entry.previous_hash != previous:
        yield f"entry {entry.seq} does not follow entry {entry.seq - 1}: previous hash differs"
    try:
        text = canonical_json(entry.body)
        fits = entry_hash(entry.seq, entry.utc, entry.kind, text, entry.observer, entry.previous_hash) == entry.hash
    except (TypeError, UnicodeEncodeError):
        fits = False
    if not fits:
        yield f"entry {entry.seq} ({printable(entry.kind)[:40]}) was changed: its hash does not fit"


def _evidence(connection: connect.Connection) -> Iterator[Verified]:
    named = {sha: seq for seq, sha in _named(connection)}
    seen: set[str] = set()
    sound = True
    for sha256, size, codec, data in connection.execute("SELECT sha256, bytes, codec, data FROM content"):
        plain = unpacked(size, codec, data)
        if plain is None or hashlib.sha256(plain).hexdigest() != sha256:
            sound = False
            yield Verified(False, "evidence", f"{printable(sha256)[:12]}… was changed", named.get(sha256))
        if sha256 not in named:
            sound = False
            yield Verified(False, "evidence", f"{printable(sha256)[:12]}… is named by no entry")
        seen.add(sha256)
    for sha256 in named.keys() - seen:
        sound = False
        yield Verified(False, "evidence", f"{printable(sha256)[:12]}… is missing", named[sha256])
    if sound:
        yield Verified(True, "evidence", f"{len(seen)} pieces, each with its hash")


def _named(connection: connect.Connection) -> Iterator[tuple[int, str]]:
    for entry in read_entries(connection):
        body: Any = entry.body
        if entry.kind in ("added", "elsewhere"):
            yield entry.seq, str(body["hashes"])
            for item in body["occupations"]:
                yield entry.seq, str(item["evidence"])
                yield entry.seq, str(item["reduction"])
