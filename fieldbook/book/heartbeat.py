"""The recorder's state: one row, overwritten at each commit, covered by no hash. It carries the sum of the tail."""

from __future__ import annotations

import json
import sqlite3
from typing import Any

from fieldbook.model.canonical import Tree
from fieldbook.model.recorder import RecorderState


def write(connection: sqlite3.Connection, state: RecorderState, tail: Tree | None = None) -> None:
    """Overwrite it, with what `tail.TailSum` states. The caller holds the transaction."""
    connection.execute(
        "INSERT INTO recorder_state (id, state) VALUES (1, ?) ON CONFLICT (id) DO UPDATE SET state = excluded.state",
        (state.to_json() if tail is None else state.to_json(tail=tail),),
    )


def tree(connection: sqlite3.Connection) -> dict[str, Any]:
    """The row as it stands; empty if there is none.

    Raises:
        ValueError: it is no JSON object.
    """
    row = connection.execute("SELECT state FROM recorder_state WHERE id = 1").fetchone()
    if row is None:
        return {}
    try:
        found = json.loads(row[0])
    except (TypeError, RecursionError) as error:
        raise ValueError(str(error)) from error
    if not isinstance(found, dict):
        raise ValueError("it is no JSON object")
    return found


def read(connection: sqlite3.Connection) -> RecorderState | None:
    """What the recorder last said of itself; None if there never was one, or it cannot be read."""
    try:
        row = connection.execute("SELECT state FROM recorder_state WHERE id = 1").fetchone()
    except sqlite3.OperationalError as error:
        if "decode" in str(error):  # bytes that are no UTF-8
            return None
        raise
    if row is None:
        return None
    try:
        return RecorderState.from_json(row[0])
    except (ValueError, TypeError, AttributeError, RecursionError):
        return None  # a heartbeat that makes no sense is none


def forget_sky(connection: sqlite3.Connection, occupation: int) -> None:
    """Leave the satellites of an ended occupation out: 3 kB that nobody looks at. The caller holds the transaction."""
    state = read(connection)
    if state is not None and state.occupation == occupation and state.sky:
        state.sky = []
        write(connection, state)
