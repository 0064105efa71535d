"""A register again from a GeoPackage that was exported from one: the same entries, the same hashes, the same evidence.

Only the chain and its evidence are read. What somebody changed in the marks of the file is not taken over, because a coordinate
comes into the register from evidence only. A chain that does not hold, or evidence that is missing, makes no register.
"""

from __future__ import annotations

import uuid
from pathlib import Path

from fieldbook.book.begin import give_name
from fieldbook.errors import BookError, UsageError

from . import connect
from .audit import audit_register
from .export_geopackage import APPLICATION_ID
from .store import rebuilt

_ENTRIES = 'SELECT seq, utc, kind, body, "by", previous_hash, hash FROM register_entry ORDER BY seq'
_CONTENT = "SELECT sha256, bytes, codec, data FROM register_content ORDER BY id"


def import_geopackage(source: Path, out: Path) -> int:
    """Make `out` of `source`; returns the number of entries.

    Raises:
        UsageError: `out` exists, or there is no such file.
        BookError: no such GeoPackage, or what it holds is no register that holds.
    """
    if out.exists() or out.is_symlink():
        raise UsageError(f"{out} exists already.", "Choose another name; a register is never overwritten.")
    if not source.is_file():
        raise UsageError(f"There is no file {source}.", "Name a GeoPackage.", code="missing")
    connection = connect.open_reader(source)
    part = out.with_name(f".{out.name}.{uuid.uuid4().hex}.part")
    try:
        with connect.register_errors(source):
            if connection.execute("PRAGMA application_id").fetchone()[0] != APPLICATION_ID:
                raise _no_register(source, "it is no GeoPackage")
            names = {row[0] for row in connection.execute("SELECT name FROM sqlite_master WHERE type = 'table'")}
            if not {"register_entry", "register_content"} <= names:
                raise _no_register(source, "it holds no register")
            count = rebuilt(part, connection.execute(_ENTRIES), connection.execute(_CONTENT))
        wrong = [item.text for item in audit_register(part) if not item.holds]
        if wrong:
            raise _no_register(source, f"its register does not hold: {wrong[0]}")
        give_name(part, out)
    finally:
        connection.close()
        part.unlink(missing_ok=True)
    return count


def _no_register(source: Path, why: str) -> BookError:
    return BookError(
        f"No register can be made of {source}: {why}.",
        "Take a GeoPackage written by `fieldbook register export`, untouched.",
        code="no_register",
    )
