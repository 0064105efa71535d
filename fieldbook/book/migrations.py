"""The tables of a book, as an append-only list of migrations.

A migration is a tuple of SQL statements, kept for ever as it was first released; a change of the tables is a new
migration at the end. `user_version` of the file is the number of migrations it has seen. sqlite-utils keeps the
record of what was applied when (`_sqlite_migrations`); that table is created here, with a text of our own, because
the text sqlite-utils would write depends on its version and `audit` compares schema texts. Its rows are repeated
in the `book` and `migrated` entries, so that the chain covers them.

Append-only is enforced three times: BEFORE UPDATE and BEFORE DELETE triggers, a guard BEFORE INSERT on existing
keys (INSERT OR REPLACE deletes without firing delete triggers unless recursive_triggers is on), and the hash chain
for whoever drops the triggers. Two rows may go: a tail row once a chunk covers it, a chunk once a pack covers it.
Decoded epochs (`epoch`, `epoch_form`, `epoch_pack`) are a cache: they may go as a whole and be made again.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Callable
from datetime import UTC, datetime
from functools import lru_cache
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from sqlite_utils.db import Database

APPLICATION_ID = 0x46424B31  # "FBK1"
MIGRATION_SET = "fieldbook"
MIGRATIONS_TABLE = "_sqlite_migrations"


def _never(table: str, *events: str) -> tuple[str, ...]:
    """Triggers that refuse the events on every row of a table."""
    return tuple(
        f"CREATE TRIGGER {table}_no_{event.lower()} BEFORE {event} ON {table} BEGIN"
        f" SELECT RAISE(ABORT, '{table}: nothing is ever changed or erased'); END"
        for event in events
    )


def _guard(table: str, name: str, event: str, refused_when: str, why: str) -> str:
    """A trigger that refuses one event where a condition on OLD or NEW holds."""
    return (
        f"CREATE TRIGGER {table}_{name} BEFORE {event} ON {table} WHEN {refused_when} BEGIN"
        f" SELECT RAISE(ABORT, '{table}: {why}'); END"
    )


BASE: tuple[str, ...] = (
    f"CREATE TABLE {MIGRATIONS_TABLE} ("
    "id INTEGER PRIMARY KEY, migration_set TEXT NOT NULL, name TEXT NOT NULL, applied_at TEXT NOT NULL) STRICT",
    f"CREATE UNIQUE INDEX idx_{MIGRATIONS_TABLE} ON {MIGRATIONS_TABLE} (migration_set, name)",
    *_never(MIGRATIONS_TABLE, "UPDATE", "DELETE"),
    _guard(
        MIGRATIONS_TABLE,
        "no_replace",
        "INSERT",
        f"EXISTS (SELECT 1 FROM {MIGRATIONS_TABLE} WHERE id = NEW.id"  # noqa: S608 - a constant
        " OR (migration_set = NEW.migration_set AND name = NEW.name))",
        "this migration is there already",
    ),
)

M001_BOOK: tuple[str, ...] = (
    """CREATE TABLE entry (
  seq INTEGER PRIMARY KEY,
  utc TEXT NOT NULL,
  kind TEXT NOT NULL,
  body TEXT NOT NULL,
  observer TEXT NOT NULL,
  previous_hash TEXT NOT NULL,
  hash TEXT NOT NULL
) STRICT""",
    *_never("entry", "UPDATE", "DELETE"),
    _guard(
        "entry",
        "in_order",
        "INSERT",
        "NEW.seq IS NOT (SELECT coalesce(max(seq), 0) + 1 FROM entry)",
        "entries follow each other without a gap",
    ),
    _guard(
        "entry",
        "chained",
        "INSERT",
        "NEW.seq > 1 AND NEW.previous_hash IS NOT (SELECT hash FROM entry WHERE seq = NEW.seq - 1)",
        "an entry carries the hash of the one before",
    ),
    """CREATE TABLE raw_tail (
  id INTEGER PRIMARY KEY,
  occupation INTEGER NOT NULL,
  kind TEXT NOT NULL,
  monotonic_ms INTEGER,
  utc_ms INTEGER,
  data BLOB NOT NULL
) STRICT""",
    *_never("raw_tail", "UPDATE"),
    _guard(
        "raw_tail",
        "in_order",
        "INSERT",
        "NEW.id <= (SELECT coalesce(max(id), 0) FROM raw_tail)",
        "received items follow each other",
    ),
    _guard(
        "raw_tail",
        "sealed_first",
        "DELETE",
        "coalesce((SELECT OLD.id BETWEEN first_id AND last_id FROM raw_chunk"
        " WHERE occupation = OLD.occupation ORDER BY chunk DESC LIMIT 1), 0) = 0",
        "only what a chunk holds may leave the tail",
    ),
    """CREATE TABLE raw_chunk (
  occupation INTEGER NOT NULL,
  chunk INTEGER NOT NULL,
  first_id INTEGER NOT NULL,
  last_id INTEGER NOT NULL,
  items INTEGER NOT NULL,
  bytes INTEGER NOT NULL,
  sha256 TEXT NOT NULL,
  data BLOB NOT NULL,
  PRIMARY KEY (occupation, chunk)
) STRICT""",
    *_never("raw_chunk", "UPDATE"),
    _guard(
        "raw_chunk",
        "no_replace",
        "INSERT",
        "EXISTS (SELECT 1 FROM raw_chunk WHERE occupation = NEW.occupation AND chunk = NEW.chunk)"
        " OR EXISTS (SELECT 1 FROM raw_pack WHERE occupation = NEW.occupation"
        " AND NEW.chunk BETWEEN first_chunk AND last_chunk)",
        "this chunk is there already",
    ),
    _guard(
        "raw_chunk",
        "packed_first",
        "DELETE",
        "NOT EXISTS (SELECT 1 FROM raw_pack WHERE occupation = OLD.occupation"
        " AND OLD.chunk BETWEEN first_chunk AND last_chunk)",
        "only what a pack holds may go",
    ),
    """CREATE TABLE raw_pack (
  occupation INTEGER NOT NULL,
  first_chunk INTEGER NOT NULL,
  last_chunk INTEGER NOT NULL,
  codec TEXT NOT NULL,
  data BLOB NOT NULL,
  PRIMARY KEY (occupation, first_chunk)
) STRICT""",
    *_never("raw_pack", "UPDATE", "DELETE"),
    _guard(
        "raw_pack",
        "no_replace",
        "INSERT",
        "NEW.last_chunk < NEW.first_chunk OR EXISTS (SELECT 1 FROM raw_pack WHERE occupation = NEW.occupation"
        " AND first_chunk <= NEW.last_chunk AND last_chunk >= NEW.first_chunk)",
        "these chunks are packed already",
    ),
    # What hardly changes from epoch to epoch, once per occupation and combination: an epoch row points here.
    """CREATE TABLE epoch_form (
  occupation INTEGER NOT NULL,
  form INTEGER NOT NULL,
  source TEXT NOT NULL,
  talker TEXT NOT NULL,
  code TEXT,
  latitude_decimals INTEGER,
  longitude_decimals INTEGER,
  altitude_decimals INTEGER,
  separation_e5m INTEGER,
  separation_decimals INTEGER,
  quality INTEGER,
  station TEXT,
  datum TEXT,
  flags INTEGER NOT NULL,
  PRIMARY KEY (occupation, form)
) STRICT, WITHOUT ROWID""",
    *_never("epoch_form", "UPDATE"),
    """CREATE TABLE epoch (
  occupation INTEGER NOT NULL,
  number INTEGER NOT NULL,
  form INTEGER NOT NULL,
  day INTEGER,
  time_ms INTEGER,
  latitude_offset_e8min INTEGER,
  longitude_offset_e8min INTEGER,
  altitude_e5m INTEGER,
  satellites INTEGER,
  hdop_milli INTEGER,
  pdop_milli INTEGER,
  vdop_milli INTEGER,
  age_ms INTEGER,
  sigma_latitude_e5m INTEGER,
  sigma_longitude_e5m INTEGER,
  sigma_altitude_e5m INTEGER,
  received_monotonic_ms INTEGER,
  received_utc_ms INTEGER,
  PRIMARY KEY (occupation, number)
) STRICT, WITHOUT ROWID""",
    *_never("epoch", "UPDATE"),
    "CREATE TABLE recorder_state (id INTEGER PRIMARY KEY CHECK (id = 1), state TEXT NOT NULL) STRICT",
)

# The epochs of an ended occupation, in pieces. Like `epoch` a cache: it may be deleted and made again, not changed.
# Without a key: few rows, read in the order they were written; an index, or a table that is one, costs a page or two
# in every book, which counts beside a short log.
M002_EPOCH_PACK: tuple[str, ...] = (
    """CREATE TABLE epoch_pack (
  occupation INTEGER NOT NULL,
  first INTEGER NOT NULL,
  last INTEGER NOT NULL,
  codec TEXT NOT NULL,
  count INTEGER NOT NULL,
  sha256 TEXT NOT NULL,
  data BLOB NOT NULL
) STRICT""",
    *_never("epoch_pack", "UPDATE"),
    _guard(
        "epoch_pack",
        "no_replace",
        "INSERT",
        "NEW.last < NEW.first OR EXISTS (SELECT 1 FROM epoch_pack WHERE occupation = NEW.occupation"
        " AND last >= NEW.first)",
        "these epochs are packed already",
    ),
)

# Append only. The name of a migration is recorded in every book.
MIGRATIONS: list[tuple[str, tuple[str, ...]]] = [("m001_book", M001_BOOK), ("m002_epoch_pack", M002_EPOCH_PACK)]


def version() -> int:
    """The number of migrations this program knows: `user_version` of an up-to-date book."""
    return len(MIGRATIONS)


def apply(connection: sqlite3.Connection) -> list[tuple[str, str, str]]:
    """Apply what is pending inside the caller's transaction; return the new rows of the migrations table.

    A new book gets its rows here, as sqlite-utils would write them (a test compares): importing that takes 0.15 s, and
    nothing can be pending in part where there is nothing yet.
    """
    before = len(applied(connection))
    if before:
        _upgrade(connection)
    else:
        _begin(connection)
    connection.execute(f"PRAGMA user_version = {version()}")
    return applied(connection)[before:]


def _begin(connection: sqlite3.Connection) -> None:
    for statement in BASE:
        connection.execute(statement)
    for name, statements in MIGRATIONS:
        for statement in statements:
            connection.execute(statement)
        connection.execute(
            f"INSERT INTO {MIGRATIONS_TABLE} (migration_set, name, applied_at) VALUES (?, ?, ?)",  # noqa: S608 - a constant
            (MIGRATION_SET, name, str(datetime.now(UTC))),
        )


def _upgrade(connection: sqlite3.Connection) -> None:
    from sqlite_utils import Database
    from sqlite_utils.migrations import Migrations

    migrations = Migrations(MIGRATION_SET)
    for name, statements in MIGRATIONS:
        migrations(name=name)(_runner(statements))
    migrations.apply(Database(connection))


def _runner(statements: tuple[str, ...]) -> Callable[[Database], None]:
    def run(db: Database, /) -> None:
        for statement in statements:
            db.execute(statement)

    return run


def applied(connection: sqlite3.Connection) -> list[tuple[str, str, str]]:
    """(set, name, applied_at) of every applied migration, in order; empty where there is no such table."""
    found = connection.execute("SELECT 1 FROM sqlite_master WHERE name = ?", (MIGRATIONS_TABLE,)).fetchone()
    if not found:
        return []
    rows = connection.execute(
        f"SELECT migration_set, name, applied_at FROM {MIGRATIONS_TABLE} ORDER BY id"  # noqa: S608 - a constant
    )
    return [(row[0], row[1], row[2]) for row in rows]


def schema_of(connection: sqlite3.Connection) -> dict[tuple[str, str], tuple[str, str | None]]:
    """{(type, name): (table, text)} of everything in sqlite_master."""
    rows: list[Any] = connection.execute("SELECT type, name, tbl_name, sql FROM sqlite_master").fetchall()
    return {(row[0], row[1]): (row[2], row[3]) for row in rows}


@lru_cache(maxsize=8)
def _expected(known: int, migrations: tuple[tuple[str, tuple[str, ...]], ...]) -> Any:
    connection = sqlite3.connect(":memory:", isolation_level=None)
    try:
        for statement in (*BASE, *(text for _, texts in migrations[:known] for text in texts)):
            connection.execute(statement)
        return schema_of(connection)
    finally:
        connection.close()


def expected_schema(user_version: int) -> dict[tuple[str, str], tuple[str, str | None]]:
    """The schema a book of this version must have, from an in-memory book built by the same statements."""
    schema: dict[tuple[str, str], tuple[str, str | None]] = _expected(user_version, tuple(MIGRATIONS))
    return schema
