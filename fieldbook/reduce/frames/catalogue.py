"""Frames and grids a party can choose from, found by word, by code and by place, out of the EPSG data set inside PROJ.

Only frames this program can use are listed (geographic 3-D, degrees and metres); ensembles among them are marked, because
they serve only as receiver = client with their realisation stated.
"""

from __future__ import annotations

import re
from collections.abc import Iterable
from dataclasses import dataclass
from functools import lru_cache

from pyproj.database import query_crs_info
from pyproj.enums import PJType

from fieldbook.errors import FieldbookError
from fieldbook.reduce.frames.projection import project
from fieldbook.reduce.frames.registry import Bounds, FrameInfo, frame_info, inside
from fieldbook.reduce.geodesy import wrapped_longitude

_WORLD_DEG = 350.0  # an area as wide as this is nobody's in particular


@dataclass(frozen=True)
class ListedGrid:
    """A grid that can be had on a frame at a place."""

    code: str
    name: str
    area_name: str


def frames_by(words: Iterable[str] = (), place: tuple[float, float] | None = None) -> list[FrameInfo]:
    """Frames that hold every word in code, name or area of use, and whose area holds the place; smallest area first.

    Args:
        words: parts of words, case does not matter; a number is a code. Empty: all.
        place: latitude, longitude in degrees. None: anywhere.
    """
    wanted = [word.casefold() for word in words if word.strip()]
    found = [info for info in _all() if all(_holds(info, word) for word in wanted)]
    if place is not None:
        lat, lon = place[0], wrapped_longitude(place[1])
        found = [info for info in found if inside(info.bounds, lat, lon)]
    return sorted(found, key=lambda info: (_width_deg(info.bounds), info.ensemble, info.name))


def national_frames(lat_deg: float, lon_deg: float) -> list[FrameInfo]:
    """Frames of this place that do not span the world, smallest area first."""
    return [info for info in frames_by(place=(lat_deg, lon_deg)) if _width_deg(info.bounds) < _WORLD_DEG]


def grids_of(frame: str, lat_deg: float, lon_deg: float) -> list[ListedGrid]:
    """Conformal grids of a frame that hold a place, those of the frame first, then the UTM zone as a bare conversion.

    Raises:
        UsageError: the frame is refused by kind.
    """
    client = frame_info(frame)
    lon = wrapped_longitude(lon_deg)
    found = []
    for code, name, area_name, bounds in _projected():
        if inside(bounds, lat_deg, lon) and _works(client.code, code, lat_deg, lon):
            found.append((_width_deg(bounds), ListedGrid(code, name, area_name)))
    grids = list(dict.fromkeys(grid for _, grid in sorted(found, key=lambda item: (item[0], item[1].code))))
    zone = int((lon + 180.0) // 6.0) + 1
    code = f"EPSG:{(16000 if lat_deg >= 0 else 16100) + zone}"
    if _works(client.code, code, lat_deg, lon):
        half = "north" if lat_deg >= 0 else "south"
        grids.append(ListedGrid(code, f"UTM zone {zone} {half}, put on {client.name}", "a bare conversion, any frame"))
    return grids


def _works(client: str, code: str, lat_deg: float, lon_deg: float) -> bool:
    try:
        project(client, code, lat_deg, lon_deg, None, outside_area_accepted=False)
    except FieldbookError:
        return False
    return True


def _holds(info: FrameInfo, word: str) -> bool:
    number = re.fullmatch(r"(?:epsg:)?(\d+)", word)
    if number and info.code == f"EPSG:{number.group(1)}":
        return True
    return any(word in text.casefold() for text in (info.name, info.area_name, info.datum_name))


def _width_deg(bounds: Bounds | None) -> float:
    """Width of an area in degrees of longitude, times its height over the world's: a size to sort by."""
    if bounds is None:
        return 360.0
    west, south, east, north = bounds
    wide = east - west if east >= west else east - west + 360.0
    return wide if wide >= _WORLD_DEG else wide * (north - south) / 180.0


@lru_cache(maxsize=1)
def _all() -> tuple[FrameInfo, ...]:
    found = []
    for item in query_crs_info(auth_name="EPSG", pj_types=[PJType.GEOGRAPHIC_3D_CRS]):
        try:
            info = frame_info(f"EPSG:{item.code}")
        except FieldbookError:
            continue  # degrees with another axis order or another unit
        if " (lon-lat)" not in info.name and "lon-lat" not in item.name:
            found.append(info)
    return tuple(found)


@lru_cache(maxsize=1)
def _projected() -> tuple[tuple[str, str, str, Bounds], ...]:
    """Code, name, area; a system with several areas of use stands once, with the first."""
    found: dict[str, tuple[str, str, str, Bounds]] = {}
    for item in query_crs_info(auth_name="EPSG", pj_types=[PJType.PROJECTED_CRS]):
        area = item.area_of_use
        if area is not None:
            code = f"EPSG:{item.code}"
            found.setdefault(code, (code, item.name, str(area.name), (area.west, area.south, area.east, area.north)))
    return tuple(found.values())
