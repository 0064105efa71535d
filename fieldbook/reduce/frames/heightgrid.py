"""A geoid grid read by PROJ's vgridshift: for GeoTIFF files, and to check our own reader of GTX files.

PROJ interpolates bilinearly. Its default multiplier is -1, a missing file with `@` gives N = 0, and a comma in a
name separates files: all three are closed here.
"""

from __future__ import annotations

import math
from functools import lru_cache
from pathlib import Path

import numpy as np
from numpy.typing import ArrayLike, NDArray
from pyproj import Transformer
from pyproj.exceptions import ProjError

from fieldbook.errors import ReductionError


def undulation_by_proj(path: Path, lat_deg: float, lon_deg: float) -> float:
    """N in metres at a place, bilinear, from a GTX or GeoTIFF file.

    Raises:
        ReductionError: PROJ cannot read the file, or the place is outside it or has no data.
    """
    try:
        # PROJ opens a bare relative name only in its own folder.
        whole = path.resolve()
        _, _, undulation = _reader(str(whole), whole.stat().st_mtime_ns).transform(lon_deg, lat_deg, 0.0, errcheck=True)
    except OSError as error:
        raise ReductionError(
            f"The geoid file {path} cannot be read ({error.strerror}).",
            "Put the file beside the session file or the book, or correct frame.geoid.",
            code="geoid_missing",
        ) from error
    except ProjError as error:
        raise ReductionError(
            f"The geoid file {path.name} gives no undulation at ({lat_deg:.4f}, {lon_deg:.4f}).",
            "Give a model that covers this place, or leave frame.geoid out: then there is no height H.",
            code="geoid_no_value",
        ) from error
    if not math.isfinite(undulation):
        raise ReductionError(
            f"The geoid file {path.name} has no data at ({lat_deg:.4f}, {lon_deg:.4f}).",
            "Give a model that covers this place, or leave frame.geoid out: then there is no height H.",
            code="geoid_no_value",
        )
    return float(undulation)


def undulations_by_proj(path: Path, lats_deg: ArrayLike, lons_deg: ArrayLike) -> NDArray[np.float64]:
    """N in metres at many places, bilinear; NaN where the file has no value.

    Raises:
        ReductionError: PROJ cannot read the file.
    """
    whole = path.resolve()
    lons, lats = np.asarray(lons_deg, dtype=np.float64), np.asarray(lats_deg, dtype=np.float64)
    reader = _reader(str(whole), whole.stat().st_mtime_ns)
    _, _, found = reader.transform(lons, lats, np.zeros_like(lons), errcheck=False)
    values = np.asarray(found, dtype=np.float64)
    return np.where(np.isfinite(values), values, np.nan)


@lru_cache(maxsize=8)
def _reader(path: str, changed_ns: int) -> Transformer:
    del changed_ns  # only the key of the cache
    if "," in path or '"' in path:
        raise ReductionError(
            f"The path {path} holds a comma or a quotation mark, which PROJ reads as two files.",
            "Rename the file or its folder.",
            code="geoid_file",
        )
    try:
        return Transformer.from_pipeline(
            "+proj=pipeline +step +proj=unitconvert +xy_in=deg +xy_out=rad "
            f'+step +proj=vgridshift +grids="{path}" +multiplier=1 '
            "+step +proj=unitconvert +xy_in=rad +xy_out=deg"
        )
    except ProjError as error:
        raise ReductionError(
            f"PROJ cannot read the geoid file {Path(path).name}.",
            "Give a GTX or GeoTIFF file; convert other formats first.",
            code="geoid_file",
        ) from error
