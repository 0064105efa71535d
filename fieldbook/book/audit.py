"""Does a book hold? Every stored value is chained, compared with the schema, or left to the rebuild.

    header, schema, migrations      against this program's migrations and the entries `book` and `migrated`
    entry                           sequence, canonical text, time, hash, hash of the one before
    raw_chunk, raw_pack             every column against the `raw` entries; content against its SHA-256
    raw_tail                        as the last heartbeat sums it up; empty once its occupation has ended
    end                             number and SHA-256 of the received bytes, number of epochs
    epoch, epoch_form               complete and consistent; their values are compared with a rebuild by the caller
    epoch_pack                      the same, and its stored bytes against their SHA-256
    rescued                         the old chain, recomputed from what a rescued book carries of it
    recorder_state                  not covered: a heartbeat
    BOOK-wal                        no commits behind a damaged frame (`wal`), as long as nobody is on the book

Nothing here raises, whatever the file is: what cannot be read is a finding. All reading happens in one read
transaction, so that a running recorder cannot make a sound book look wrong. What an audit cannot see: entries cut
off at the end of the chain, and a chain forged as a whole; certificates and signatures stand against these.
"""

from __future__ import annotations

import json
import math
import sqlite3
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any, NoReturn

from fieldbook.clock import utc_ms_of, utc_text
from fieldbook.errors import FieldbookError, UsageError
from fieldbook.model.canonical import Tree, canonical_json
from fieldbook.model.entry import GENESIS, entry_hash

from . import connect, migrations, wal
from .audit_epochs import audit_epochs
from .audit_raw import audit_raw
from .audit_rescued import audit_rescued
from .kinds import KINDS, MAX_BODY_BYTES, checked_body

MAX_FINDINGS = 100
TIME_LIMIT_S = 600.0


@dataclass(frozen=True)
class AuditFinding:
    """One thing that does not hold: where, what, and since which entry if that can be said."""

    where: str
    text: str
    since_seq: int | None = None


class _TooMany(Exception):
    """Enough findings, or enough time spent: the rest would say nothing new."""


class Audit:
    """Findings so far, and the sound entries the later checks rest on."""

    def __init__(self, connection: sqlite3.Connection, deadline: float = math.inf) -> None:
        self.connection, self._deadline = connection, deadline
        self.findings: list[AuditFinding] = []
        self.bodies: dict[str, list[tuple[int, Tree]]] = {}  # kind -> (seq, body)

    def find(self, where: str, text: str, since_seq: int | None = None) -> None:
        """Note one finding."""
        self.findings.append(AuditFinding(where, text, since_seq))
        if len(self.findings) >= MAX_FINDINGS:
            raise _TooMany

    def in_time(self, where: str) -> None:
        """Between two pieces that are inflated: SQLite's own time limit does not count that."""
        if time.monotonic() > self._deadline:
            self.find(where, "it takes longer to read than any book of its size; the rest was not looked at")
            raise _TooMany

    @contextmanager
    def part(self, where: str) -> Iterator[None]:
        """One check. What SQLite cannot read, or does not fit in memory, is a finding of this part."""
        try:
            yield
        except (sqlite3.Error, UnicodeDecodeError) as error:
            self.find(where, f"cannot be read: {connect.printable(error)}")
        except (MemoryError, RecursionError, OverflowError, TypeError, ValueError) as error:
            # A damaged page can put a value of any type into any column, STRICT or not.
            self.find(where, f"holds what no book holds ({type(error).__name__})")

    def of(self, kind: str) -> list[tuple[int, Tree]]:
        """(seq, body) of the readable entries of a kind."""
        return self.bodies.get(kind, [])

    def by_occupation(self, kind: str) -> list[tuple[int, int, Tree]]:
        """(occupation, seq, body) of a kind, without those that name no occupation."""
        found = [(body.get("occupation"), seq, body) for seq, body in self.of(kind)]
        return [(number, seq, body) for number, seq, body in found if type(number) is int]


def audit_book(path: Path, *, time_limit_s: float = TIME_LIMIT_S) -> list[AuditFinding]:
    """Everything about a book file that does not hold; empty if all holds. Never raises.

    Epoch values are not judged here: the caller decodes what was received again and compares with `Book.epochs`.
    """
    wrong = wal.wal_problem(path, connect.connections_here(path))
    found = [AuditFinding("file", wrong)] if wrong else []
    try:
        connection = connect.open_reader(path)
    except FieldbookError as error:
        return [*found, AuditFinding("file", error.text)]
    try:
        return [*found, *_audited(connection, time_limit_s)]
    finally:
        connection.close()


def _audited(connection: connect.BookConnection, time_limit_s: float) -> list[AuditFinding]:
    deadline = time.monotonic() + time_limit_s
    connection.set_progress_handler(lambda: time.monotonic() > deadline, 100_000)
    # Damaged text must not stop the reading: it cannot match its hash any more, and is found there.
    connection.text_factory = lambda data: data.decode("utf-8", "surrogateescape")
    audit = Audit(connection, deadline)
    checks: list[tuple[str, Callable[[Audit], None]]] = [
        ("schema", _check_schema),  # first: SQLite's own check evaluates what a foreign schema tells it to
        ("file", _check_pages),
        ("entry", _check_entries),
        ("migrations", _check_migrations),
        ("raw", audit_raw),
        ("epoch", audit_epochs),
        ("rescued", audit_rescued),
        ("file", lambda found: _check_wal(found, connection)),
    ]
    try:
        with audit.part("file"):
            connection.execute("BEGIN")
        for where, check in checks:
            with audit.part(where):
                check(audit)
            if where == "schema" and any(item.where == "schema" for item in audit.findings):
                break  # with other tables, every further question could be answered by a trick
    except _TooMany:
        if len(audit.findings) >= MAX_FINDINGS:
            audit.findings.append(AuditFinding("file", f"more than {MAX_FINDINGS} findings; the rest is not listed"))
    return audit.findings


def _check_pages(audit: Audit) -> None:
    for row in audit.connection.execute("PRAGMA integrity_check(20)"):
        if row[0] != "ok":
            audit.find("file", f"SQLite: {connect.printable(row[0])}")


def _check_schema(audit: Audit) -> None:
    def pragma(name: str) -> Any:
        return audit.connection.execute(f"PRAGMA {name}").fetchone()[0]

    application, version = pragma("application_id"), pragma("user_version")
    if application != migrations.APPLICATION_ID:
        audit.find("schema", f"application_id is {application}: this is no book")
    if version > migrations.version():
        audit.find("schema", f"the book is of version {version}, newer than this program ({migrations.version()})")
        return
    if version < 1:
        audit.find("schema", f"user_version is {version}: no book has that")
        return
    if pragma("encoding") != "UTF-8":
        audit.find("schema", f"its texts are {pragma('encoding')}, not UTF-8")
    expected, actual = migrations.expected_schema(version), migrations.schema_of(audit.connection)
    for key in sorted(expected.keys() | actual.keys(), key=repr):
        if expected.get(key) != actual.get(key):
            what = "is missing" if key not in actual else "is not of a book" if key not in expected else "differs"
            audit.find("schema", f"{_shown(key[0])} {_shown(key[1])} {what}")


def _check_migrations(audit: Audit) -> None:
    stated: list[Any] = []
    for kind in ("book", "migrated"):
        for _, body in audit.of(kind):
            rows = body.get("migrations")
            stated.extend(rows if isinstance(rows, list) else [])
    columns = f"id, migration_set, name, applied_at FROM {migrations.MIGRATIONS_TABLE}"
    rows = audit.connection.execute(f"SELECT {columns} ORDER BY id").fetchall()
    version = audit.connection.execute("PRAGMA user_version").fetchone()[0]
    if [row[0] for row in rows] != list(range(1, version + 1)):
        audit.find("migrations", "the rows of the migrations table are not numbered 1, 2, ... up to the version")
    known = [(migrations.MIGRATION_SET, name) for name, _ in migrations.MIGRATIONS[:version]]
    if [(row[1], row[2]) for row in rows] != known:
        audit.find("migrations", "the migrations table does not name the migrations of this version")
    if [list(row[1:]) for row in rows] != stated:
        audit.find("migrations", "the migrations table is not what the entries 'book' and 'migrated' state", 1)


def _check_entries(audit: Audit) -> None:
    previous, expected_seq = GENESIS, 1
    rows = audit.connection.execute(
        "SELECT seq, utc, kind, body, observer, previous_hash, hash FROM entry ORDER BY seq"
    )
    for seq, utc, kind, text, observer, stated_previous, stated_hash in rows:
        if seq != expected_seq:
            audit.find("entry", f"entry {expected_seq} is missing before entry {seq}", expected_seq)
        expected_seq = seq + 1
        values = (utc, kind, text, observer, stated_previous, stated_hash)
        if not all(isinstance(value, str) for value in values):
            audit.find("entry", f"entry {seq} holds a value that is no text", seq)
            continue
        if stated_previous != previous:
            audit.find("entry", f"entry {seq} does not follow entry {seq - 1}: previous hash differs", seq)
        if _hash(seq, utc, kind, text, observer, stated_previous) != stated_hash:
            audit.find("entry", f"entry {seq} ({_shown(kind)}) was changed: its hash does not fit", seq)
        previous = stated_hash
        wrong = _time_problem(utc) or _body_problem(text)
        if wrong:
            audit.find("entry", f"entry {seq} ({_shown(kind)}): {wrong}", seq)
            continue
        body = json.loads(text)
        if kind in KINDS:  # a later version may know more kinds
            try:
                checked_body(kind, body)
            except UsageError as error:
                audit.find("entry", f"entry {seq}: {connect.printable(error.text)}", seq)
        if kind == "book" and seq != 1:
            audit.find("entry", f"entry {seq} begins the book a second time", seq)
        audit.bodies.setdefault(kind, []).append((seq, body))
    if not audit.of("book"):
        audit.find("entry", "there is no first entry 'book'", 1)


def _shown(text: object) -> str:
    return connect.printable(text)[:40]


def _hash(seq: int, utc: str, kind: str, text: str, observer: str, previous: str) -> str:
    try:
        return entry_hash(seq, utc, kind, text, observer, previous)
    except UnicodeEncodeError:
        return ""  # a byte that is no UTF-8


def _time_problem(utc: str) -> str:
    try:
        good = utc_text(utc_ms_of(utc)) == utc
    except (ValueError, OverflowError, OSError):
        good = False
    return "" if good else "its time is not of the form 2027-03-04T01:10:00.000Z"


def _no_float(text: str) -> NoReturn:
    raise ValueError(f"a number with a fraction: {text[:20]}")


def _body_problem(text: str) -> str:
    if len(text) > 2 * MAX_BODY_BYTES:
        return f"its body is {len(text)} characters long"
    try:
        tree = json.loads(text, parse_float=_no_float, parse_constant=_no_float)
        canonical = isinstance(tree, dict) and canonical_json(tree) == text
    except (ValueError, RecursionError) as error:
        return f"its body cannot be read ({connect.printable(error)})"
    return "" if canonical else "its body is not in canonical form"


def _check_wal(audit: Audit, connection: connect.BookConnection) -> None:
    states = [body.get("state") for _, body in audit.of("recorder")]
    if connection.without_wal and states and states[-1] == "running":
        audit.find(
            "file",
            "the book was copied while it was recorded, without its -wal: what came last is missing "
            "(copy the file with its -wal, or after the recorder has closed)",
            audit.of("recorder")[-1][0],
        )
