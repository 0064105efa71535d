"""The recorder's state: one row, overwritten at each commit, covered by no hash."""

from __future__ import annotations

import sqlite3

from fieldbook.model.recorder import RecorderState


def write(connection: sqlite3.Connection, state: RecorderState) -> None:
    """Overwrite it. The caller holds the transaction."""
    connection.execute(
        "INSERT INTO recorder_state (id, state) VALUES (1, ?) ON CONFLICT (id) DO UPDATE SET state = excluded.state",
        (state.to_json(),),
    )


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
