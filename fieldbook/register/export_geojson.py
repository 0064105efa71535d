"""GeoJSON after RFC 7946, for maps: points in WGS 84 longitude and latitude, which no mark of a register really has.

RFC 7946 (section 4) knows one reference system, WGS 84, and that is an ensemble good to about 2 m (EPSG:4326, ensemble accuracy). So the
geometry is the mark's longitude and latitude as they stand in its own frame, with 9 decimals, for finding it on a map; the true
coordinates with frame and epoch are properties, and every feature says so. Height: ellipsoidal, as the RFC has it.
"""

from __future__ import annotations

import json
from collections.abc import Sequence
from typing import Any

from .export_rows import NUMBERS, ExportRow

NOTE = (
    "The geometry is for maps only: longitude and latitude of the mark's own frame, taken as WGS 84, which differs from it by up "
    "to about 2 m. The coordinates of the mark are in the properties, with their frame and epoch."
)


def as_geojson(rows: Sequence[ExportRow]) -> bytes:
    """A FeatureCollection: UTF-8, one feature per mark, numbers as JSON numbers."""
    tree = {"type": "FeatureCollection", "note": NOTE, "features": [_feature(row) for row in rows]}
    return (json.dumps(tree, ensure_ascii=False, indent=1, allow_nan=False) + "\n").encode("utf-8")


def _feature(row: ExportRow) -> dict[str, Any]:
    cells = row.cells
    position = [round(_wrapped(float(cells["lon_deg"] or 0)), 9), round(float(cells["lat_deg"] or 0), 9)]
    if cells["h_m"] is not None:
        position.append(round(float(cells["h_m"]), 4))
    return {
        "type": "Feature",
        "id": cells["number"] or f"mark {cells['mark']}",
        "geometry": {"type": "Point", "coordinates": position},
        "properties": {
            **{name: _value(name, value) for name, value in cells.items()},
            "geometry_is": "for maps only: the mark's own longitude and latitude taken as WGS 84, to about 2 m",
        },
    }


def _wrapped(lon_deg: float) -> float:
    return (lon_deg + 180.0) % 360.0 - 180.0


def _value(name: str, value: str | None) -> str | float | int | None:
    if value is None or name not in NUMBERS:
        return value
    return int(value) if name in ("mark", "occupations") else float(value)
