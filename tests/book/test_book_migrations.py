"""A new book's tables and record of migrations are those that sqlite-utils makes of the same list."""

from __future__ import annotations

import re
import sqlite3
from contextlib import closing

from fieldbook.book import migrations


def _made_by(begin: object) -> tuple[object, list[tuple[object, ...]], int]:
    with closing(sqlite3.connect(":memory:", isolation_level=None)) as connection:
        connection.execute("BEGIN")
        assert callable(begin)
        begin(connection)
        connection.execute("COMMIT")
        rows = connection.execute(
            "SELECT id, migration_set, name, applied_at, typeof(applied_at) FROM _sqlite_migrations"
        )
        found = [(*row[:3], re.sub("[0-9]", "0", row[3]), row[4]) for row in rows]
        return migrations.schema_of(connection), found, connection.total_changes


def _by_sqlite_utils(connection: sqlite3.Connection) -> None:
    for statement in migrations.BASE:
        connection.execute(statement)
    migrations._upgrade(connection)


def test_a_new_book_is_what_sqlite_utils_makes() -> None:
    ours, theirs = _made_by(migrations.apply), _made_by(_by_sqlite_utils)
    assert ours == theirs
    assert [row[2] for row in ours[1]] == [name for name, _ in migrations.MIGRATIONS]
    assert ours[1][0][3] == "0000-00-00 00:00:00.000000+00:00"


def test_what_is_pending_in_an_older_book_is_applied_by_sqlite_utils() -> None:
    with closing(sqlite3.connect(":memory:", isolation_level=None)) as connection:
        for statement in (*migrations.BASE, *migrations.MIGRATIONS[0][1]):
            connection.execute(statement)
        name = migrations.MIGRATIONS[0][0]
        connection.execute("INSERT INTO _sqlite_migrations VALUES (1, 'fieldbook', ?, 'before')", (name,))
        new = migrations.apply(connection)
        assert [row[1] for row in new] == [name for name, _ in migrations.MIGRATIONS[1:]]
        assert migrations.schema_of(connection) == migrations.expected_schema(migrations.version())
        assert migrations.apply(connection) == []
