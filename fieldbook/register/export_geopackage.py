"""GeoPackage 1.3 (OGC 12-128r17), written with plain SQLite: marks as points, all published values, frames, and the register itself.

    marks, or marks_<code> per frame   features: point with height, in the 2-D frame of the marks' own datum (x = longitude),
                                       every column of `export_rows`, the covariance among them
    history                            attributes: every value ever published, with successor
    frames                             attributes: what the frames are; an epoch stands with each value
    register_entry, register_content   attributes: the chain and the evidence, from which an import makes the same register

Required tables, identities and the geometry blob as in clauses 1.1.1, 1.1.2, 1.1.3, 2.1.3 to 2.1.6 of the standard (from memory, high).
"""

from __future__ import annotations

import sqlite3
import struct
import uuid
from collections.abc import Iterable, Sequence
from contextlib import closing
from pathlib import Path
from typing import Any

from fieldbook.clock import Clock, utc_text
from fieldbook.errors import BookError
from fieldbook.reduce import frames
from fieldbook.reduce.frames import FlatFrame

from .export_rows import AXES, COLUMNS, NUMBERS, PLACES, ExportRow
from .history import Published, history
from .store import Register

APPLICATION_ID = 0x47504B47  # "GPKG"
VERSION = 10300
INTEGERS = frozenset({"mark", "occupations"})
WGS84_WKT = (
    'GEOGCS["WGS 84",DATUM["WGS_1984",SPHEROID["WGS 84",6378137,298.257223563,AUTHORITY["EPSG","7030"]],'
    'AUTHORITY["EPSG","6326"]],PRIMEM["Greenwich",0,AUTHORITY["EPSG","8901"]],'
    'UNIT["degree",0.0174532925199433,AUTHORITY["EPSG","9122"]],AUTHORITY["EPSG","4326"]]'
)
TABLES = (
    """CREATE TABLE gpkg_spatial_ref_sys (
  srs_name TEXT NOT NULL, srs_id INTEGER NOT NULL PRIMARY KEY, organization TEXT NOT NULL,
  organization_coordsys_id INTEGER NOT NULL, definition TEXT NOT NULL, description TEXT)""",
    """CREATE TABLE gpkg_contents (
  table_name TEXT NOT NULL PRIMARY KEY, data_type TEXT NOT NULL, identifier TEXT UNIQUE, description TEXT DEFAULT '',
  last_change DATETIME NOT NULL DEFAULT (strftime('%Y-%m-%dT%H:%M:%fZ','now')),
  min_x DOUBLE, min_y DOUBLE, max_x DOUBLE, max_y DOUBLE, srs_id INTEGER,
  CONSTRAINT fk_gc_r_srs_id FOREIGN KEY (srs_id) REFERENCES gpkg_spatial_ref_sys(srs_id))""",
    """CREATE TABLE gpkg_geometry_columns (
  table_name TEXT NOT NULL, column_name TEXT NOT NULL, geometry_type_name TEXT NOT NULL, srs_id INTEGER NOT NULL,
  z TINYINT NOT NULL, m TINYINT NOT NULL,
  CONSTRAINT pk_geom_cols PRIMARY KEY (table_name, column_name),
  CONSTRAINT uk_gc_table_name UNIQUE (table_name),
  CONSTRAINT fk_gc_tn FOREIGN KEY (table_name) REFERENCES gpkg_contents(table_name),
  CONSTRAINT fk_gc_srs FOREIGN KEY (srs_id) REFERENCES gpkg_spatial_ref_sys (srs_id))""",
)
HISTORY = (
    ("number", "TEXT"), ("mark", "INTEGER"), ("name", "TEXT"), ("published_utc", "TEXT"), ("published_by", "TEXT"),
    ("in_force", "INTEGER"), ("until_utc", "TEXT"), ("successor", "TEXT"), ("withdrawn_because", "TEXT"),
    ("supersedes", "TEXT"), ("change", "TEXT"), ("reason", "TEXT"), ("frame", "TEXT"), ("epoch", "DOUBLE"),
    ("lat_deg", "DOUBLE"), ("lon_deg", "DOUBLE"), ("h_m", "DOUBLE"), ("x_m", "DOUBLE"), ("y_m", "DOUBLE"), ("z_m", "DOUBLE"),
    ("datum_horizontal95_m", "DOUBLE"), ("datum_vertical95_m", "DOUBLE"),
    *((f"cov_{axis}_m2", "DOUBLE") for axis in AXES),
)  # fmt: skip


def write_geopackage(out: Path, rows: Sequence[ExportRow], register: Register, clock: Clock) -> None:
    """Write the file; it appears under its name only when it is complete, in place of an older one.

    Raises:
        BookError: it cannot be written.
        ReductionError: a frame has no two-dimensional companion.
    """
    part = out.with_name(f".{out.name}.{uuid.uuid4().hex}.part")
    try:
        with closing(sqlite3.connect(part, isolation_level=None)) as file:
            _fill(file, rows, register, utc_text(clock.utc_ms()))
        part.replace(out)
    except (sqlite3.Error, OSError) as error:
        raise BookError(f"The GeoPackage {out} cannot be written: {error}.", "Check folder and free space.") from error
    finally:
        part.unlink(missing_ok=True)


def _fill(file: sqlite3.Connection, rows: Sequence[ExportRow], register: Register, now: str) -> None:
    file.execute(f"PRAGMA application_id = {APPLICATION_ID}")
    file.execute(f"PRAGMA user_version = {VERSION}")
    file.execute("PRAGMA foreign_keys = ON")
    file.execute("BEGIN")
    for statement in TABLES:
        file.execute(statement)
    flats = {code: frames.flat_frame(code) for code in dict.fromkeys(str(row.cells["frame"]) for row in rows)}
    _reference_systems(file, flats.values())
    for code, flat in flats.items():
        name = "marks" if len(flats) == 1 else f"marks_{code.removeprefix('EPSG:')}"
        _marks(file, name, [row for row in rows if row.cells["frame"] == code], flat, now)
    state = register.state()
    values = [item for number in state.marks() for item in history(state, number)]
    _attributes(file, "history", HISTORY, [_of_history(item) for item in values], "every value ever published", now)
    _attributes(
        file,
        "frames",
        (("frame", "TEXT"), ("name", "TEXT"), ("moves", "INTEGER"), ("drawn_in", "TEXT"), ("definition", "TEXT")),
        [(code, frames.frame_info(code).name, int(f.dynamic), f"EPSG:{f.code}", f.wkt) for code, f in flats.items()],
        "frames of the marks; points are drawn in the two-dimensional frame of the same datum",
        now,
    )
    _whole_register(file, register, now)
    file.execute("COMMIT")


def _reference_systems(file: sqlite3.Connection, flats: Iterable[FlatFrame]) -> None:
    known: list[tuple[Any, ...]] = [
        ("Undefined cartesian SRS", -1, "NONE", -1, "undefined", "undefined cartesian coordinate reference system"),
        ("Undefined geographic SRS", 0, "NONE", 0, "undefined", "undefined geographic coordinate reference system"),
        ("WGS 84 geodetic", 4326, "EPSG", 4326, WGS84_WKT, "longitude and latitude in decimal degrees on WGS 84"),
    ]
    known += [
        (flat.name, flat.code, "EPSG", flat.code, flat.wkt, "the marks' own datum, longitude and latitude")
        for flat in flats
        if flat.code != 4326
    ]
    file.executemany("INSERT INTO gpkg_spatial_ref_sys VALUES (?, ?, ?, ?, ?, ?)", known)


def _marks(file: sqlite3.Connection, name: str, rows: Sequence[ExportRow], flat: FlatFrame, now: str) -> None:
    typed = ", ".join(f"{column} {_type(column)}" for column in COLUMNS)
    file.execute(f"CREATE TABLE {name} (fid INTEGER PRIMARY KEY AUTOINCREMENT NOT NULL, geom POINT, {typed})")
    places = [(float(row.cells["lon_deg"] or 0), float(row.cells["lat_deg"] or 0)) for row in rows]
    box = (min(x for x, _ in places), min(y for _, y in places), max(x for x, _ in places), max(y for _, y in places))
    file.execute(
        "INSERT INTO gpkg_contents VALUES (?, 'features', ?, ?, ?, ?, ?, ?, ?, ?)",
        (name, name, "control marks; the point's height is ellipsoidal", now, *box, flat.code),
    )
    mixed = any(row.cells["h_m"] is None for row in rows)
    file.execute(
        "INSERT INTO gpkg_geometry_columns VALUES (?, 'geom', 'POINT', ?, ?, 0)", (name, flat.code, 2 if mixed else 1)
    )
    marks = ", ".join("?" * (len(COLUMNS) + 1))
    file.executemany(
        f"INSERT INTO {name} (geom, {', '.join(COLUMNS)}) VALUES ({marks})",  # noqa: S608 - our own names
        [(_point(row, flat.code), *(_value(column, row.cells[column]) for column in COLUMNS)) for row in rows],
    )


def _point(row: ExportRow, srs: int) -> bytes:
    """GeoPackage binary: 'GP', version 0, little-endian, no envelope, then WKB of a point, ISO type 1001 with height."""
    lon, lat, h = (row.cells[key] for key in ("lon_deg", "lat_deg", "h_m"))
    head = struct.pack("<2sBBi", b"GP", 0, 1, srs)
    if h is None:
        return head + struct.pack("<BIdd", 1, 1, float(lon or 0), float(lat or 0))
    return head + struct.pack("<BIddd", 1, 1001, float(lon or 0), float(lat or 0), float(h))


def _type(column: str) -> str:
    if column in INTEGERS:
        return "INTEGER"
    return "DOUBLE" if column in NUMBERS else "TEXT"


def _value(column: str, text: str | None) -> str | int | float | None:
    if text is None or column not in NUMBERS:
        return text
    return int(text) if column in INTEGERS else float(text)


def _attributes(
    file: sqlite3.Connection,
    name: str,
    columns: Sequence[tuple[str, str]],
    rows: Iterable[Sequence[Any]],
    what: str,
    now: str,
) -> None:
    typed = ", ".join(f'"{column}" {kind}' for column, kind in columns)
    file.execute(f"CREATE TABLE {name} (id INTEGER PRIMARY KEY AUTOINCREMENT NOT NULL, {typed})")
    file.execute(
        "INSERT INTO gpkg_contents VALUES (?, 'attributes', ?, ?, ?, NULL, NULL, NULL, NULL, NULL)",
        (name, name, what, now),
    )
    listed, marks = ", ".join(f'"{column}"' for column, _ in columns), ", ".join("?" * len(columns))
    file.executemany(f"INSERT INTO {name} ({listed}) VALUES ({marks})", rows)  # noqa: S608 - our own names


def _of_history(item: Published) -> list[Any]:
    body = item.entry.body
    place, accuracy, own, common = body["place"], body["datum_accuracy"], body["cov_own_m2"], body["cov_common_m2"]
    covariance = [None if own is None or common is None else float(own[i][j]) + float(common[i][j]) for i, j in PLACES]
    numbers = [
        place["epoch"],
        place["lat_deg"],
        place["lon_deg"],
        place["h_m"],
        *(place["xyz_m"] or (None, None, None)),
    ]
    numbers += [accuracy["horizontal95_m"], accuracy["vertical95_m"]]
    return [
        item.number, item.mark, body["name"], item.entry.utc, item.entry.observer, int(item.in_force), item.until_utc,
        item.successor, None if item.withdrawn is None else item.withdrawn.body["reason"], body["supersedes"],
        body["change"]["verdict"], body["reason"], place["frame"],
        *(None if value is None else float(value) for value in numbers), *covariance,
    ]  # fmt: skip


def _whole_register(file: sqlite3.Connection, register: Register, now: str) -> None:
    entry = [("seq", "INTEGER"), *((name, "TEXT") for name in ("utc", "kind", "body", "by", "previous_hash", "hash"))]
    what = "the chain of the register; `fieldbook register import` makes the same register of it"
    _attributes(file, "register_entry", entry, register.raw_entries(), what, now)
    content = (("sha256", "TEXT"), ("bytes", "INTEGER"), ("codec", "TEXT"), ("data", "BLOB"))
    _attributes(file, "register_content", content, register.raw_content(), "evidence named by the chain", now)
