"""Transformation grids of the operator's own: folders PROJ searches, what a file holds, and whether PROJ can read it.

PROJ finds a grid by its name only, in the folders of its search path; the folders added here come after its own. A file is
looked at before it is taken: its area and spacing from its own header, one value in the middle from PROJ.

NTv2: overview header of 11 records of 16 bytes, then sub-grids, each with a header of 11 (S_LAT, N_LAT, E_LONG, W_LONG,
LAT_INC, LONG_INC in seconds of arc, longitudes positive west): Geodetic Survey of Canada, NTv2 Developer's Guide, from
memory, high.
"""

from __future__ import annotations

import math
import struct
from collections.abc import Iterable
from dataclasses import dataclass
from pathlib import Path

from pyproj import Transformer, datadir
from pyproj.exceptions import ProjError

from fieldbook.errors import ReductionError, UsageError
from fieldbook.reduce.frames.candidates import offer
from fieldbook.reduce.geotiff import geotiff_layout
from fieldbook.settings.grids import FOLDER_NAME

_METHODS = {
    ".gsb": ("hgridshift",),
    ".gtx": ("vgridshift",),
    ".tif": ("gridshift", "hgridshift", "vgridshift", "xyzgridshift"),
    ".tiff": ("gridshift", "hgridshift", "vgridshift", "xyzgridshift"),
}
_known: list[str] = []


@dataclass(frozen=True)
class GridFacts:
    """Area in degrees (south, west, north, east) and spacing of the first grid; None where the header does not tell.

    shift_en_arcsec, shift_up_m: what PROJ does in the middle, None of a part it leaves alone.
    """

    kind: str  # "NTv2", "GeoTIFF", "GTX"
    bounds_deg: tuple[float, float, float, float]
    step_deg: tuple[float, float]
    subgrids: int
    method: str  # PROJ's method that read it
    shift_en_arcsec: tuple[float, float]
    shift_up_m: float


def use_grid_folders(folders: Iterable[Path]) -> None:
    """Add folders to PROJ's search path for this process: `grids/` folders that exist, once each.

    A book's own folder is not among them: what lies beside a book is not meant for PROJ unless it was put into `grids/`.
    """
    added = False
    for folder in folders:
        text = str(folder)
        if folder.name == FOLDER_NAME and text not in _known and folder.is_dir():
            _known.append(text)
            datadir.append_data_dir(text)
            added = True
    if added:
        offer.cache_clear()


def forget_offers() -> None:
    """After a grid was put into a folder that is searched already."""
    offer.cache_clear()


def grid_facts(path: Path) -> GridFacts:
    """What a transformation grid is.

    Raises:
        ReductionError: PROJ cannot read it, or its header makes no sense.
        UsageError: a file of another kind.
    """
    ending = path.suffix.lower()
    if ending not in _METHODS:
        raise UsageError(
            f"{path.name} is no grid this can look into.",
            f"It takes {', '.join(_METHODS)}; convert other formats first.",
        )
    if "," in str(path) or '"' in str(path):
        raise UsageError(f"The path {path} holds a comma or a quotation mark.", "Rename the file or its folder.")
    kind, bounds, step, subgrids = ntv2_head(path) if ending == ".gsb" else _raster(path)
    south, west, north, east = bounds
    # the middle of a cell near the middle of the area: a node may be one of the few without data
    lat = south + (math.floor((north - south) / step[0] / 2) + 0.5) * step[0]
    lon = west + (math.floor((east - west) / step[1] / 2) + 0.5) * step[1]
    method, moved = _tried(path, _METHODS[ending], lat, lon)
    en = (moved[0] - lon) * 3600 * math.cos(math.radians(lat)), (moved[1] - lat) * 3600
    return GridFacts(kind, bounds, step, subgrids, method, en, moved[2])


def _tried(path: Path, methods: tuple[str, ...], lat: float, lon: float) -> tuple[str, tuple[float, float, float]]:
    for method in methods:
        try:
            reader = Transformer.from_pipeline(
                "+proj=pipeline +step +proj=unitconvert +xy_in=deg +xy_out=rad "
                f'+step +proj={method} +grids="{path.resolve()}" '
                "+step +proj=unitconvert +xy_in=rad +xy_out=deg"
            )
            x, y, z = reader.transform((lon + 180) % 360 - 180, lat, 0.0, errcheck=True)
        except ProjError:
            continue
        if all(math.isfinite(value) for value in (x, y, z)):
            return method, (float(x) + (lon - ((lon + 180) % 360 - 180)), float(y), float(z))
    raise ReductionError(
        f"PROJ finds no value of {path.name} at ({lat:.4f}, {lon:.4f}), the middle of its area.",
        "Fetch the file again: it is cut off, or no transformation grid.",
        code="grid_file",
    )


def _raster(path: Path) -> tuple[str, tuple[float, float, float, float], tuple[float, float], int]:
    if path.suffix.lower() == ".gtx":
        from fieldbook.reduce.geoidgrid import read_gtx

        grid = read_gtx(path)
        rows, columns = grid.nodes.shape
        north = grid.south_deg + (rows - 1) * grid.row_step_deg
        east = grid.west_deg + (columns - 1) * grid.column_step_deg
        return "GTX", (grid.south_deg, grid.west_deg, north, east), (grid.row_step_deg, grid.column_step_deg), 1
    layout = geotiff_layout(path)
    if layout is None:
        raise _unreadable(path, "its tags name no grid of degrees")
    return "GeoTIFF", layout.bounds, (layout.row_step_deg, layout.column_step_deg), 1


def ntv2_head(path: Path) -> tuple[str, tuple[float, float, float, float], tuple[float, float], int]:
    """("NTv2", area, spacing, number of sub-grids) from the first sub-grid's header.

    Raises:
        ReductionError: it is none, or is cut off.
    """
    try:
        size = path.stat().st_size
        with path.open("rb") as file:
            head = file.read(16 * 11)
            order = "<" if head[8:12] == b"\x0b\0\0\0" else ">"
            if head[:8] != b"NUM_OREC" or struct.unpack(order + "i", head[8:12])[0] != 11:
                raise ValueError("it does not begin with NUM_OREC = 11")
            (subgrids,) = struct.unpack(order + "i", head[40:44])
            records = file.read(16 * 11)
    except (OSError, struct.error, ValueError) as problem:
        raise _unreadable(path, str(problem)) from None
    if len(records) < 16 * 11 or not 1 <= subgrids <= 10_000:
        raise _unreadable(path, "its sub-grid header is cut off")
    values = [struct.unpack(order + "d", records[16 * row + 8 : 16 * row + 16])[0] for row in range(4, 10)]
    south, north, east, west, lat_step, lon_step = (value / 3600 for value in values)
    (count,) = struct.unpack(order + "i", records[16 * 10 + 8 : 16 * 10 + 12])
    good = all(math.isfinite(value) for value in values) and lat_step > 0 and lon_step > 0
    if not good or not -90.01 <= south < north <= 90.01 or not -360 <= east < west <= 360:
        raise _unreadable(path, "its first sub-grid has no place on the earth")
    if count < 1 or size < 16 * 22 + 16 * count:
        raise _unreadable(path, f"it has {size} bytes, its first sub-grid alone asks for {16 * 22 + 16 * count}")
    return "NTv2", (south, -west, north, -east), (lat_step, lon_step), subgrids


def _unreadable(path: Path, why: str) -> ReductionError:
    return ReductionError(f"{path.name} is no usable grid: {why}.", "Fetch the file again.", code="grid_file")
