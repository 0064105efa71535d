"""What a frame is, read from the EPSG data set inside PROJ: only geographic 3-D codes in degrees and metres.

A code is judged by its kind before anything is computed. PROJ would accept a 2-D or an ensemble code and answer
with plausible figures that are wrong by the height or by half a metre.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from functools import lru_cache

import pyproj
from pyproj.crs import CRS
from pyproj.exceptions import CRSError

from fieldbook.errors import UsageError
from fieldbook.reduce.constants import Ellipsoid

Bounds = tuple[float, float, float, float]  # west, south, east, north; west > east across the 180th meridian

ITRF2020 = "EPSG:9989"

_CODE = re.compile(r"EPSG:(\d{1,6})")

# Families of realisations that may stand between two frames (project rule; see `candidates`).
_SCAFFOLD = re.compile(r"ITRF(\d{2}|\d{4})|I(?:GS|Gb)\d{2}|ETRF(\d{2}|\d{4})")
_ITRF_YEAR = re.compile(r"ITRF(\d{2}|\d{4})")
_GLOBAL = re.compile(r"ITRF(\d{2}|\d{4})|I(?:GS|Gb)\d{2}|WGS 84 \((Transit|G\d+)\)")


@dataclass(frozen=True)
class FrameInfo:
    """A geographic 3-D frame of the EPSG data set. `bounds`: west, south, east, north in degrees."""

    code: str
    name: str
    dynamic: bool
    ensemble: bool
    datum_code: str
    datum_name: str
    ellipsoid: Ellipsoid
    area_name: str
    bounds: Bounds | None

    @property
    def a_m(self) -> float:
        """Semi-major axis of the frame's ellipsoid, metres."""
        return self.ellipsoid.a_m

    @property
    def inverse_flattening(self) -> float:
        """1/f of the frame's ellipsoid."""
        return self.ellipsoid.inverse_flattening


@dataclass(frozen=True)
class Versions:
    """What decides which operation is chosen: recorded with every result."""

    proj: str
    epsg: str
    epsg_date: str
    pyproj: str


@lru_cache(maxsize=1)
def versions() -> Versions:
    """Versions of PROJ, of the EPSG data set inside it and of pyproj."""
    return Versions(
        proj=pyproj.proj_version_str,
        epsg=str(pyproj.database.get_database_metadata("EPSG.VERSION")),
        epsg_date=str(pyproj.database.get_database_metadata("EPSG.DATE")),
        pyproj=pyproj.__version__,
    )


def epsg_number(code: str, where: str = "frame") -> int:
    """The number of `EPSG:nnnn`.

    Raises:
        UsageError: another authority, or no code at all.
    """
    match = _CODE.fullmatch(code.strip()) if isinstance(code, str) else None
    if match is None:
        raise UsageError(
            f"{where}: {code!r} is not an EPSG code.",
            'Write it as "EPSG:7912"; names and other authorities are not accepted.',
            code="frame_not_epsg",
        )
    return int(match.group(1))


@lru_cache(maxsize=256)
def crs_of(code: str) -> CRS:
    """The CRS of an EPSG code.

    Raises:
        UsageError: not an EPSG code, or unknown to this version of the data set.
    """
    number = epsg_number(code)
    try:
        return CRS.from_epsg(number)
    except CRSError as error:
        raise UsageError(
            f"EPSG:{number} is not a coordinate reference system of the EPSG data set {versions().epsg}.",
            "Check the code; a frame published later than the data set cannot be used.",
            code="frame_unknown",
        ) from error


@lru_cache(maxsize=256)
def frame_info(code: str) -> FrameInfo:
    """A frame by its code, judged by kind.

    Raises:
        UsageError: not EPSG, unknown, or not a geographic 3-D system in degrees and metres. An ensemble is
            returned (with `ensemble`): whether it may be used depends on the choice.
    """
    crs = crs_of(code)
    if crs.type_name != "Geographic 3D CRS":
        raise UsageError(
            f"{code} ({crs.name}) is a {crs.type_name}, not a geographic 3-D frame.",
            "Give the 3-D code of the frame (latitude, longitude, ellipsoidal height), e.g. EPSG:7912 for ITRF2014.",
            code="frame_kind",
        )
    units = [axis.unit_name for axis in crs.axis_info]
    if units != ["degree", "degree", "metre"]:
        raise UsageError(
            f"{code} ({crs.name}) is in {', '.join(units)}.",
            "Give a frame in degrees and metres.",
            code="frame_kind",
        )
    tree = crs.to_json_dict()
    datum = crs.datum
    identity = datum.to_json_dict().get("id", {}) if datum is not None else {}
    ensemble = "datum_ensemble" in tree
    datum_name = str(tree["datum_ensemble" if ensemble else "datum"]["name"])
    area = crs.area_of_use
    return FrameInfo(
        code=f"EPSG:{epsg_number(code)}",
        name=crs.name,
        dynamic=not ensemble and tree["datum"]["type"] == "DynamicGeodeticReferenceFrame",
        ensemble=ensemble,
        datum_code=f"{identity['authority']}:{identity['code']}" if identity else datum_name,
        datum_name=datum_name,
        ellipsoid=ellipsoid_of(crs),
        area_name=str(area.name) if area is not None else "",
        bounds=(area.west, area.south, area.east, area.north) if area is not None else None,
    )


def ellipsoid_of(crs: CRS) -> Ellipsoid:
    """The ellipsoid of a CRS; every geographic and projected one has one."""
    found = crs.ellipsoid
    if found is None:
        raise UsageError(f"{crs.name} has no ellipsoid.", "Give another code.", code="frame_kind")
    return Ellipsoid(found.name, float(found.semi_major_metre), float(found.inverse_flattening))


def shortened(area_name: str, most: int = 120) -> str:
    """An area of use as the end of a sentence: EPSG lists whole continents."""
    name = area_name.rstrip(". ")
    return f"{name}." if len(name) <= most else name[:most].rsplit(" ", 1)[0].rstrip(",;") + " ..."


def same_frame(first: FrameInfo, second: FrameInfo) -> bool:
    """Frames are the same when their datum is the same."""
    return first.datum_code == second.datum_code


def is_scaffold(crs_name: str) -> bool:
    """An ITRF, IGS or ETRF realisation (`ETRF2000-PL` and other national ones are none)."""
    return _SCAFFOLD.fullmatch(crs_name) is not None


def is_global_realisation(info: FrameInfo) -> bool:
    """An ITRF, IGS or WGS 84 realisation, to which a global geoid model belongs."""
    return not info.ensemble and _GLOBAL.fullmatch(info.name) is not None


def itrf_year(crs_name: str) -> int:
    """2014 of `ITRF2014`, 1997 of `ITRF97`, 0 of anything else."""
    match = _ITRF_YEAR.fullmatch(crs_name)
    if match is None:
        return 0
    year = int(match.group(1))
    return year if year > 1000 else 1900 + year


def inside(bounds: Bounds | None, lat_deg: float, lon_deg: float) -> bool:
    """Is a point inside an area of use? Areas with west > east cross the 180th meridian. No area: no."""
    if bounds is None or not (math.isfinite(lat_deg) and math.isfinite(lon_deg)):
        return False
    west, south, east, north = bounds
    if not south <= lat_deg <= north:
        return False
    if abs(lat_deg) == 90.0 or (west, east) == (-180.0, 180.0):
        return True
    return west <= lon_deg <= east if west <= east else (lon_deg >= west or lon_deg <= east)
