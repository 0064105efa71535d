"""A frame as two-dimensional software knows it: the geographic 2-D code of the same datum, and its WKT of 2001.

For file formats whose points carry the height as a plain third number. Nothing is computed with it here.
"""

from __future__ import annotations

from dataclasses import dataclass

from pyproj.crs import CRS
from pyproj.enums import WktVersion

from fieldbook.errors import ReductionError
from fieldbook.reduce.frames.registry import frame_info


@dataclass(frozen=True)
class FlatFrame:
    """code: EPSG number of the geographic 2-D frame. wkt: OGC 01-009 text. dynamic: coordinates need an epoch."""

    code: int
    name: str
    wkt: str
    dynamic: bool


def flat_frame(code: str) -> FlatFrame:
    """The 2-D companion of a geographic 3-D frame.

    Raises:
        UsageError: no such frame (`frame_info`).
        ReductionError: EPSG has no 2-D frame of that datum.
    """
    info = frame_info(code)
    flat = CRS(info.code).to_2d()
    number = flat.to_epsg()
    if number is None:
        raise ReductionError(
            f"EPSG has no two-dimensional frame that goes with {info.name} ({info.code}).",
            "Export to CSV or GeoJSON.",
            code="no_flat_frame",
        )
    return FlatFrame(number, flat.name, flat.to_wkt(WktVersion.WKT1_GDAL), info.dynamic)
