"""Where the nodes of a GeoTIFF grid lie: its tags, nothing of its pixels.

PROJ reads the values, whatever their compression and tiling; its interpolation is bilinear. Six points per axis need only
know where the nodes are, which three tags say, and then ask PROJ for the value at each: at a node bilinear is exact. That the
tags were understood is checked at every place: the bilinear value of our own four nodes must be PROJ's.

Source: TIFF 6.0 (Adobe, 1992), OGC GeoTIFF 1.1 (19-008r4): ModelPixelScale 33550, ModelTiepoint 33922, GeoKeyDirectory
34735, GTRasterType 1025 (1 area: the tie point is a corner of a pixel; 2 point: its middle); BigTIFF; from memory, high.
"""

from __future__ import annotations

import math
import struct
from dataclasses import dataclass
from pathlib import Path
from typing import BinaryIO

_WIDTH, _LENGTH, _SCALE, _TIE, _KEYS = 256, 257, 33550, 33922, 34735
_RASTER_TYPE, _IS_POINT = 1025, 2
_SIZES = {1: 1, 2: 1, 3: 2, 4: 4, 12: 8, 16: 8}
_CODES = {1: "B", 3: "H", 4: "I", 12: "d", 16: "Q"}
_MOST_TAGS = 512
_MOST_BYTES = 1 << 16  # of one tag that is read


@dataclass(frozen=True)
class Layout:
    """Nodes by rows from the south and columns from the west, degrees."""

    south_deg: float
    west_deg: float
    row_step_deg: float
    column_step_deg: float
    rows: int
    columns: int

    @property
    def round_the_world(self) -> bool:
        """Do the columns close?"""
        return abs(self.columns * self.column_step_deg - 360.0) < 1e-6

    @property
    def bounds(self) -> tuple[float, float, float, float]:
        """South, west, north, east of the nodes."""
        return (
            self.south_deg,
            self.west_deg,
            self.south_deg + (self.rows - 1) * self.row_step_deg,
            self.west_deg + (self.columns - 1) * self.column_step_deg,
        )


def geotiff_layout(path: Path) -> Layout | None:
    """The layout of the first image of a file, or None where it is not a plain north-up grid of degrees.

    Never raises for what a file holds: a grid that is not understood is interpolated by PROJ alone.
    """
    try:
        with path.open("rb") as file:
            return _layout(_tags(file, path.stat().st_size))
    except (OSError, struct.error, ValueError, LookupError, OverflowError):
        return None


def _tags(file: BinaryIO, size: int) -> dict[int, tuple[float, ...]]:
    """Values of the wanted tags."""

    def at(offset: int, count: int) -> bytes:
        if not 0 <= offset <= size - count:
            raise ValueError("outside the file")
        file.seek(offset)
        return file.read(count)

    head = at(0, 16)
    order = {b"II": "<", b"MM": ">"}[head[:2]]
    (magic,) = struct.unpack_from(order + "H", head, 2)
    big = magic == 43
    if magic not in (42, 43):
        raise ValueError("no TIFF")
    (first,) = struct.unpack_from(order + ("Q" if big else "I"), head, 8 if big else 4)
    width, entry = (8, 20) if big else (2, 12)
    (count,) = struct.unpack(order + ("Q" if big else "H"), at(first, width))
    if count > _MOST_TAGS:
        raise ValueError("too many tags")
    table = at(first + width, entry * count)
    found: dict[int, tuple[float, ...]] = {}
    for index in range(count):
        tag, kind = struct.unpack_from(order + "HH", table, entry * index)
        if tag not in (_WIDTH, _LENGTH, _SCALE, _TIE, _KEYS):
            continue
        (number,) = struct.unpack_from(order + ("Q" if big else "I"), table, entry * index + 4)
        length = number * _SIZES[kind]
        if length > _MOST_BYTES:
            raise ValueError("a tag of that size")
        value_at = entry * index + (12 if big else 8)
        if length <= (8 if big else 4):
            data = table[value_at : value_at + length]
        else:
            (offset,) = struct.unpack_from(order + ("Q" if big else "I"), table, value_at)
            data = at(offset, length)
        found[tag] = struct.unpack(f"{order}{number}{_CODES[kind]}", data)
    return found


def _layout(tags: dict[int, tuple[float, ...]]) -> Layout | None:
    scale, tie, keys = tags[_SCALE], tags[_TIE], tags[_KEYS]
    rows, columns = int(tags[_LENGTH][0]), int(tags[_WIDTH][0])
    if len(tie) != 6 or not all(math.isfinite(value) for value in (*scale, *tie)):
        return None
    step_x, step_y = scale[0], scale[1]
    kinds = [keys[at + 3] for at in range(4, len(keys) - 3, 4) if keys[at] == _RASTER_TYPE and keys[at + 1] == 0]
    middle = 0.0 if kinds and kinds[0] == _IS_POINT else 0.5
    west = tie[3] + (middle - tie[0]) * step_x
    north = tie[4] - (middle - tie[1]) * step_y
    layout = Layout(north - (rows - 1) * step_y, west, step_y, step_x, rows, columns)
    south, _, north, _ = layout.bounds
    good = 1e-4 <= step_x <= 10 and 1e-4 <= step_y <= 10 and 6 <= rows <= 200_000 and 6 <= columns <= 400_000
    return layout if good and south >= -90 - 1e-6 and north <= 90 + 1e-6 and abs(west) <= 540 else None
