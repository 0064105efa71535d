"""One write transaction on an SQLite connection, for books and registers alike."""

from __future__ import annotations

import sqlite3
from collections.abc import Callable, Iterator
from contextlib import contextmanager


@contextmanager
def immediate(connection: sqlite3.Connection, forget: Callable[[], None]) -> Iterator[None]:
    """All that is written inside is committed, or nothing. Inside another transaction it is part of that.

    Args:
        forget: drops what the caller remembers of the tables; called before a rollback.

    Raises:
        sqlite3.Error: busy, read-only, disk full.
    """
    if connection.in_transaction:
        yield
        return
    connection.execute("BEGIN IMMEDIATE")
    try:
        yield
        connection.execute("COMMIT")
    except BaseException:
        forget()
        if connection.in_transaction:
            connection.execute("ROLLBACK")
        raise
