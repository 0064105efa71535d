"""Epoch rows: a compact and exact spelling of `model.Epoch` in the book.

A row holds what changes from epoch to epoch, as integers; the position is an offset from the occupation's origin
(entry `origin`). What hardly ever changes (talker, decimals, quality, station, ...) is one row of `epoch_form`,
which the epoch row names by number. Numbers of forms are given in order of first use, so that a rebuild from the
same epochs writes the same rows. About 50 bytes per epoch, until `epoch_packs` takes the rows of an ended occupation.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Sequence
from operator import attrgetter
from typing import Any

from fieldbook.model.epoch import Epoch

FORM_FIELDS = (
    "source",
    "talker",
    "code",
    "latitude_decimals",
    "longitude_decimals",
    "altitude_decimals",
    "separation_e5m",
    "separation_decimals",
    "quality",
    "station",
    "datum",
    "flags",
)
PLAIN_FIELDS = (
    "altitude_e5m",
    "satellites",
    "hdop_milli",
    "pdop_milli",
    "vdop_milli",
    "age_ms",
    "sigma_latitude_e5m",
    "sigma_longitude_e5m",
    "sigma_altitude_e5m",
    "received_monotonic_ms",
    "received_utc_ms",
)
form_of = attrgetter(*FORM_FIELDS)
plain_of = attrgetter(*PLAIN_FIELDS)
_FORM_COLUMNS = ", ".join(FORM_FIELDS)
_COLUMNS = "number, form, day, time_ms, latitude_offset_e8min, longitude_offset_e8min, " + ", ".join(PLAIN_FIELDS)
_INSERT_FORM = f"INSERT INTO epoch_form (occupation, form, {_FORM_COLUMNS}) VALUES (?, ?{', ?' * len(FORM_FIELDS)})"  # noqa: S608
_INSERT = f"INSERT INTO epoch (occupation, {_COLUMNS}) VALUES (?, ?, ?, ?, ?, ?, ?{', ?' * len(PLAIN_FIELDS)})"  # noqa: S608
_SELECT_FORMS = f"SELECT form, {_FORM_COLUMNS} FROM epoch_form WHERE occupation = ? ORDER BY form"  # noqa: S608
_SELECT = f"SELECT {_COLUMNS} FROM epoch WHERE occupation = ? AND number > ? ORDER BY number LIMIT ?"  # noqa: S608

Form = tuple[Any, ...]
Origin = tuple[int, int]  # latitude, longitude in 1e-8 arc-minute


def load_forms(connection: sqlite3.Connection, occupation: int) -> dict[Form, int]:
    """{form: its number} of an occupation."""
    return {tuple(row[1:]): row[0] for row in connection.execute(_SELECT_FORMS, (occupation,))}


def first_position(epochs: Sequence[Epoch]) -> Origin | None:
    """The first position among epochs: the origin of an occupation that has none yet."""
    for epoch in epochs:
        if epoch.latitude_e8min is not None or epoch.longitude_e8min is not None:
            return epoch.latitude_e8min or 0, epoch.longitude_e8min or 0
    return None


def insert_epochs(
    connection: sqlite3.Connection,
    occupation: int,
    epochs: Sequence[Epoch],
    origin: Origin | None,
    forms: dict[Form, int],
) -> None:
    """Write epochs as rows and complete `forms`. The caller holds the transaction.

    `origin` may be None only if no epoch has a position.
    """
    latitude, longitude = origin or (0, 0)
    rows: list[tuple[Any, ...]] = []
    new_forms: list[tuple[Any, ...]] = []
    for epoch in epochs:
        form = form_of(epoch)
        number = forms.get(form)
        if number is None:
            number = forms[form] = len(forms) + 1
            new_forms.append((occupation, number, *form))
        north, east = epoch.latitude_e8min, epoch.longitude_e8min
        rows.append(
            (
                occupation,
                epoch.number,
                number,
                epoch.day,
                epoch.time_ms,
                None if north is None else north - latitude,
                None if east is None else east - longitude,
                *plain_of(epoch),
            )
        )
    if new_forms:
        connection.executemany(_INSERT_FORM, new_forms)
    connection.executemany(_INSERT, rows)


def delete_epochs(connection: sqlite3.Connection, occupation: int) -> None:
    """Forget the decoded epochs of an occupation: a cache, made again from what was received."""
    for table in ("epoch", "epoch_form", "epoch_pack"):
        connection.execute(f"DELETE FROM {table} WHERE occupation = ?", (occupation,))  # noqa: S608 - constants


def read_epochs(
    connection: sqlite3.Connection, occupation: int, origin: Origin | None, after: int = 0, limit: int | None = None
) -> list[Epoch]:
    """Epoch rows of an occupation with a number above `after`, in order. The caller holds a read transaction.

    Raises:
        ValueError: a row names a form that is not there, or an offset and no origin exists.
    """
    forms = {row[0]: row[1:] for row in connection.execute(_SELECT_FORMS, (occupation,))}
    epochs: list[Epoch] = []
    for row in connection.execute(_SELECT, (occupation, after, -1 if limit is None else limit)):
        number, form, day, time_ms, north, east, altitude, satellites, hdop, pdop, vdop, age, *rest = row
        if form not in forms:
            raise ValueError(f"epoch {number} of occupation {occupation} names a form that is not there")
        if north is not None or east is not None:
            if origin is None:
                raise ValueError(f"epoch {number} of occupation {occupation} has a position but no origin")
            north = None if north is None else north + origin[0]
            east = None if east is None else east + origin[1]
        source, talker, code, lat_dec, lon_dec, alt_dec, sep, sep_dec, quality, station, datum, flags = forms[form]
        epochs.append(
            Epoch(
                number, source, talker, day, time_ms, code, north, east, lat_dec, lon_dec, altitude, alt_dec,
                sep, sep_dec, quality, satellites, hdop, pdop, vdop, age, station, rest[0], rest[1], rest[2],
                datum, flags, rest[3], rest[4],
            )
        )  # fmt: skip
    return epochs
