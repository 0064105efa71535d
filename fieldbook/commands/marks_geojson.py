"""Marks from and to GeoJSON (RFC 7946): one Point per mark, its texts as properties.

The position is the approximate one, in WGS 84 longitude and latitude as RFC 7946 section 4 has it, for finding the mark; it
is never a coordinate of the mark. A mark without a position has a null geometry (section 3.2).
"""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from decimal import Decimal
from pathlib import Path
from typing import Any, NoReturn

from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree

MOST_MARKS = 100_000


def rows_of(file: Path, text: str, columns: Sequence[str]) -> list[tuple[str, dict[str, Any]]]:
    """The marks as rows of the CSV's columns, each with the place it stands at.

    Raises:
        UsageError: no GeoJSON of points, a property that is no column, a value that is no text or number.
    """
    tree = _parsed(file, text)
    if (
        not isinstance(tree, dict)
        or tree.get("type") != "FeatureCollection"
        or not isinstance(tree.get("features"), list)
    ):
        raise UsageError(f"{file} is no GeoJSON FeatureCollection.", "Save the marks as points of one collection.")
    features = tree["features"]
    if not features or len(features) > MOST_MARKS:
        raise UsageError(f"{file} holds {len(features)} marks.", f"A list holds 1 to {MOST_MARKS} marks.")
    return [_row(f"{file}, feature {number}", item, columns) for number, item in enumerate(features, start=1)]


def text_of(marks: Mapping[str, Tree], texts: Sequence[str]) -> str:
    """The marks as a FeatureCollection; longitude and latitude with the digits they were typed with."""
    features = []
    for name, tree in sorted(marks.items()):
        place = tree.get("approximate") or {}
        geometry = None
        if "lat_deg" in place and "lon_deg" in place:
            geometry = {"type": "Point", "coordinates": [float(place["lon_deg"]), float(place["lat_deg"])]}
        properties = {key: tree[key] for key in texts if key in tree} | {"name": name}
        features.append({"type": "Feature", "geometry": geometry, "properties": properties})
    collection = {"type": "FeatureCollection", "features": features}
    return json.dumps(collection, ensure_ascii=False, indent=1, allow_nan=False) + "\n"


def _parsed(file: Path, text: str) -> Any:
    def refused(word: str) -> NoReturn:
        raise ValueError(f"{word} is no number")

    try:
        return json.loads(text, parse_float=Decimal, parse_constant=refused)
    except (ValueError, ArithmeticError) as problem:
        raise UsageError(f"{file} is no JSON: {problem}.", "Save it again as GeoJSON.") from None
    except RecursionError:
        raise UsageError(f"{file} is nested too deeply.", "A list of marks is flat; is it the right file?") from None


def _row(place: str, feature: Any, columns: Sequence[str]) -> tuple[str, dict[str, Any]]:
    if not isinstance(feature, dict) or feature.get("type") != "Feature":
        raise UsageError(f"{place} is no Feature.", "Save the marks as points.")
    properties = feature.get("properties") or {}
    if not isinstance(properties, dict):
        raise UsageError(f"{place}: its properties are no object.", "Save the marks again.")
    row: dict[str, Any] = {}
    for key, value in properties.items():
        if key not in columns:
            raise UsageError(
                f'{place}: there is no property "{key}" of a mark.', f"The properties are {', '.join(columns)}."
            )
        if value is None:
            continue
        if isinstance(value, bool) or not isinstance(value, str | int | Decimal):
            raise UsageError(f"{place}: {key} is neither text nor number.", "Correct the value.")
        row[key] = value if isinstance(value, str) else format(value, "f") if isinstance(value, Decimal) else str(value)
    geometry = feature.get("geometry")
    if geometry is not None:
        row |= _point(place, geometry)
    return place, row


def _point(place: str, geometry: Any) -> dict[str, str]:
    values = geometry.get("coordinates") if isinstance(geometry, dict) and geometry.get("type") == "Point" else None
    if not isinstance(values, list) or len(values) not in (2, 3) or not all(_is_number(value) for value in values):
        raise UsageError(f"{place}: its geometry is no Point of longitude and latitude.", "Save the marks as points.")
    return {"lon_deg": format(Decimal(values[0]), "f"), "lat_deg": format(Decimal(values[1]), "f")}


def _is_number(value: Any) -> bool:
    return isinstance(value, int | Decimal) and not isinstance(value, bool) and -1_000_000 < value < 1_000_000
