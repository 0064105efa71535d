"""Height above a geoid model, H = h - N, with the frame rule and an honest uncertainty of N.

A model belongs to a frame. A national one goes only with that frame. A global one goes with ITRF and WGS 84
realisations, and with a frame whose ellipsoidal height at the mark is within 0.2 m of ITRF2020's; that difference
is a line of u_N. A model is a grid file and, beside it, its record: the same name ending in .toml. Without a
record nothing is known of its frame, so there is no height.

    name              what is printed                       kind        "global" or "national"
    frame             text (global), EPSG code (national)   frames      more EPSG codes of a national model
    vertical_datum    printed text; absent: none            u_m         one sigma of the model; absent: unknown
    interpolation_u_m one sigma; absent: estimated, unknown for bilinear GeoTIFF
    sha256  source  licence                                 u_source    where u_m is from
"""

from __future__ import annotations

import math
import tomllib
from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path
from typing import Any

from fieldbook.errors import ReductionError
from fieldbook.model.reduction import ClientPosition, Height
from fieldbook.reduce.constants import GEOID_FRAME_LIMIT_M
from fieldbook.reduce.frames import (
    ellipsoidal_height_difference_to_itrf2020,
    frame_info,
    is_global_realisation,
    same_frame,
    undulation_by_proj,
    undulations_by_proj,
)
from fieldbook.reduce.geoidgrid import Undulation, corners_finite, read_gtx, six_point
from fieldbook.reduce.geotiff import Layout, geotiff_layout
from fieldbook.reduce.gridhashes import MeantFile, other_file
from fieldbook.settings.grids import file_sha256, files_named, package_folder

LARGEST_UNDULATION_M = 200.0  # EGM96 and EGM2008 lie within -107 and +86 m
_AGREE_M = 0.001  # own reader and PROJ at a node


@dataclass(frozen=True)
class GeoidRecord:
    """What is known of a model. None = not stated."""

    name: str
    kind: str
    frame: str
    frames: tuple[str, ...]
    vertical_datum: str | None
    u_m: float | None
    u_source: str
    interpolation_u_m: float | None
    sha256: str | None
    source: str
    licence: str

    @property
    def heading(self) -> str:
        """What a height by this model may be called: 'orthometric' needs a vertical datum."""
        if self.vertical_datum:
            return f"height by geoid model {self.name}, datum {self.vertical_datum}"
        return f"height above geoid model {self.name}, no national height datum"


@dataclass(frozen=True)
class GeoidModel:
    """A grid file with its record; the hash is the file's own, taken now."""

    path: Path
    record: GeoidRecord
    sha256: str


def height_above_geoid(
    client: ClientPosition,
    geoid_name: str,
    search_dirs: Sequence[Path],
    *,
    epoch_of_observation: float,
    meant: MeantFile | None = None,
) -> Height:
    """H of a mark by a model. `vertical95_m` is left None: the caller knows the uncertainty of h and fills it.

    Args:
        client: the mark, with its ellipsoidal height.
        geoid_name: file name as in frame.geoid; looked for in `search_dirs`, then in the package's own data.
        epoch_of_observation: decimal year, for the height of a static frame against ITRF2020.
        meant: the file the book names, or others a decision takes; None: none is named yet.

    `undulation_u_m` is the root sum of squares of the model's u_m, the interpolation and the difference of frames;
    None where the record states no u_m.

    Raises:
        ReductionError: no h; file or record missing or damaged; another file than the book names; the model does not go with the client's frame; no
            value at the mark.
    """
    if client.h_m is None:
        raise ReductionError(
            "The ellipsoidal height is not known, so there is no height above the geoid.",
            "The receiver must send altitude and geoid separation in the same sentence.",
            code="no_ellipsoidal_height",
        )
    model = find_model(geoid_name, search_dirs, meant)
    difference = _frame_difference(model.record, client, epoch_of_observation)
    found = undulation_at(model, client.lat_deg, client.lon_deg)
    heading = model.record.heading
    if found.method == "bilinear":
        heading += ", interpolated bilinearly"
    return Height(
        model=model.path.name,
        model_name=model.record.name,
        model_sha256=model.sha256,
        model_frame=model.record.frame,
        datum=model.record.vertical_datum,
        undulation_m=found.value_m,
        undulation_u_m=_uncertainty(model.record, found, difference),
        orthometric_m=client.h_m - found.value_m,
        vertical95_m=None,
        heading=heading,
    )


def undulation_at(model: GeoidModel, lat_deg: float, lon_deg: float) -> Undulation:
    """N at a place: six-point Lagrange, bilinear near the edge of a regional grid and where the nodes are not known.

    Raises:
        ReductionError: outside the grid or no data there.
    """
    stated = model.record.interpolation_u_m
    if model.path.suffix.lower() == ".gtx":
        found = read_gtx(model.path).undulation(lat_deg, lon_deg)
        if found.method == "six-point Lagrange" and stated is not None:
            return Undulation(found.value_m, found.method, stated)
        return found
    bilinear = undulation_by_proj(model.path, lat_deg, lon_deg)
    six = _six_point(model.path, lat_deg, lon_deg, bilinear)
    if six is None:
        return Undulation(bilinear, "bilinear", stated)
    return six if stated is None else Undulation(six.value_m, six.method, stated)


def _six_point(path: Path, lat_deg: float, lon_deg: float, bilinear_m: float) -> Undulation | None:
    state = path.stat()
    layout = _layout(path, state.st_size, state.st_mtime_ns)
    if layout is None:
        return None
    return six_point(layout, lambda lats, lons: undulations_by_proj(path, lats, lons), lat_deg, lon_deg, bilinear_m)


@lru_cache(maxsize=8)
def _layout(path: Path, size: int, changed_ns: int) -> Layout | None:
    del size, changed_ns  # only the key of the cache
    return geotiff_layout(path)


def find_model(geoid_name: str, search_dirs: Sequence[Path], meant: MeantFile | None = None) -> GeoidModel:
    """The file, its record and its hash. With `meant` the first file of that name that is one of those.

    Raises:
        ReductionError: file or record missing, another file than the record's, or none of those meant.
    """
    path = _found(geoid_name, search_dirs, meant)
    record = read_record(path.with_suffix(".toml"))
    sha256 = read_gtx(path).sha256 if path.suffix.lower() == ".gtx" else file_sha256(path)
    if record.sha256 is not None and record.sha256 != sha256:
        raise ReductionError(
            f"The geoid file {path.name} is not the one its record describes (SHA-256 {sha256[:12]}...).",
            "Fetch the file again, or check it and write its new hash into the record.",
            code="geoid_changed",
        )
    return GeoidModel(path, record, sha256)


def check_geoid_file(path: Path) -> str:
    """All checks of a new model file; its SHA-256.

    A GTX file must have finite corner nodes, and one node read by PROJ must agree with our own reader to 1 mm. Of a GeoTIFF
    the nodes must be where its tags say: PROJ's value in the middle of a cell is that of its four nodes.

    Raises:
        ReductionError: the file cannot be used, and why.
    """
    if path.suffix.lower() not in (".gtx", ".tif", ".tiff"):
        raise ReductionError(
            f"{path.name} is neither a GTX nor a GeoTIFF file.", "Convert it first.", code="geoid_file"
        )
    if path.suffix.lower() != ".gtx":
        _check_geotiff(path)
        return file_sha256(path)
    grid = read_gtx(path)
    if not corners_finite(grid):
        raise ReductionError(
            f"{path.name} has corner nodes without data.", "Fetch the file again, or cut it.", code="geoid_file"
        )
    rows, columns = (size // 2 for size in grid.nodes.shape)
    lat = grid.south_deg + rows * grid.row_step_deg
    lon = grid.west_deg + columns * grid.column_step_deg
    own, other = grid.undulation(lat, lon).value_m, undulation_by_proj(path, lat, lon)
    if abs(own - other) > _AGREE_M:
        raise ReductionError(
            f"{path.name} reads {own:.3f} m here and {other:.3f} m by PROJ at one node.",
            "Do not use the file.",
            code="geoid_file",
        )
    return grid.sha256


def _check_geotiff(path: Path) -> None:
    layout = geotiff_layout(path)
    if layout is None:
        raise ReductionError(
            f"{path.name} is no GeoTIFF grid of degrees: its tags do not say where its nodes are.",
            "Fetch the file again (a saved web page is not a grid), or convert it to GTX.",
            code="geoid_file",
        )
    south, west, north, east = layout.bounds
    rows, columns = layout.rows // 2, layout.columns // 2
    lat = layout.south_deg + (rows + 0.4) * layout.row_step_deg
    lon = (layout.west_deg + (columns + 0.3) * layout.column_step_deg + 180.0) % 360.0 - 180.0
    value = undulation_by_proj(path, lat, lon)
    if abs(value) > LARGEST_UNDULATION_M or (six_point(
        layout, lambda lats, lons: undulations_by_proj(path, lats, lons), lat, lon, value
    ) is None and min(layout.rows, layout.columns) >= 8):  # fmt: skip
        raise ReductionError(
            f"{path.name} reads {value:.3f} m in its middle ({south:g} to {north:g}, {west:g} to {east:g}), which is not "
            "what its nodes give there, or no undulation.",
            "It is no geoid grid, or has no data in the middle: cut it to where it has.",
            code="geoid_file",
        )


def grid_area(path: Path) -> tuple[tuple[float, float, float, float], tuple[float, float]] | None:
    """Area (south, west, north, east) and spacing (latitude, longitude) in degrees; None where the file does not tell.

    Raises:
        ReductionError: a GTX file that is none.
    """
    if path.suffix.lower() == ".gtx":
        grid = read_gtx(path)
        rows, columns = grid.nodes.shape
        layout = Layout(grid.south_deg, grid.west_deg, grid.row_step_deg, grid.column_step_deg, rows, columns)
    else:
        state = path.stat()
        found = _layout(path, state.st_size, state.st_mtime_ns)
        if found is None:
            return None
        layout = found
    return layout.bounds, (layout.row_step_deg, layout.column_step_deg)


def read_record(path: Path) -> GeoidRecord:
    """The record beside a grid file.

    Raises:
        ReductionError: absent, not TOML, or without name, kind and frame.
    """
    try:
        tree = tomllib.loads(path.read_text(encoding="utf-8"))
    except OSError as error:
        raise ReductionError(
            f"The geoid model has no record {path.name}: its frame is not known.",
            f"Write {path.name} beside it, with name, kind, frame, u_m and source.",
            code="geoid_record",
        ) from error
    except (ValueError, RecursionError) as error:  # not text, no TOML, nested too deeply, an endless number
        raise _bad_record(path, str(error)) from error
    return _record(path, tree)


def _record(path: Path, tree: dict[str, Any]) -> GeoidRecord:
    for key in ("name", "kind", "frame"):
        if not isinstance(tree.get(key), str) or not tree[key].strip():
            raise _bad_record(path, f"{key} is missing")
    if tree["kind"] not in ("global", "national"):
        raise _bad_record(path, 'kind is neither "global" nor "national"')
    sigmas = []
    for key in ("u_m", "interpolation_u_m"):
        value = tree.get(key)
        if value is not None and (isinstance(value, bool) or not isinstance(value, int | float) or not 0 < value < 100):
            raise _bad_record(path, f"{key} is no uncertainty in metres")
        sigmas.append(None if value is None else float(value))
    if tree["kind"] == "national":
        for code in (tree["frame"], *tree.get("frames", [])):
            frame_info(code)
    return GeoidRecord(
        name=tree["name"],
        kind=tree["kind"],
        frame=tree["frame"],
        frames=tuple(tree.get("frames", [])),
        vertical_datum=tree.get("vertical_datum"),
        u_m=sigmas[0],
        u_source=str(tree.get("u_source", "")),
        interpolation_u_m=sigmas[1],
        sha256=tree.get("sha256"),
        source=str(tree.get("source", "")),
        licence=str(tree.get("licence", "")),
    )


def _bad_record(path: Path, why: str) -> ReductionError:
    return ReductionError(
        f"The geoid record {path.name} cannot be used: {why}.",
        "It needs name, kind, frame; u_m where a 95 % shall be stated.",
        code="geoid_record",
    )


def _found(geoid_name: str, search_dirs: Sequence[Path], meant: MeantFile | None) -> Path:
    if Path(geoid_name).suffix.lower() not in (".gtx", ".tif", ".tiff"):
        raise ReductionError(
            f"frame.geoid: {geoid_name!r} is neither a GTX nor a GeoTIFF file.",
            'Give a file name such as "egm96_15.gtx"; convert other formats first.',
            code="geoid_file",
        )
    found = files_named(geoid_name, search_dirs)
    for path in found:
        if meant is None or file_sha256(path) in meant.accepted:
            return path
    if found and meant is not None:
        raise other_file(geoid_name, meant, file_sha256(found[0]))
    places = [*search_dirs, package_folder()]
    raise ReductionError(
        f"The geoid file {geoid_name} is not there; looked in {', '.join(str(place) for place in places)}.",
        "Put the file and its record beside the session file or the book, or leave frame.geoid out.",
        code="geoid_missing",
    )


def require_frame(record: GeoidRecord, client: str) -> None:
    """Refuse a national model with a frame that is not its own.

    Raises:
        ReductionError: it belongs to other frames.
    """
    codes, info = (record.frame, *record.frames), frame_info(client)
    if record.kind == "national" and not any(same_frame(frame_info(code), info) for code in codes):
        raise ReductionError(
            f"The geoid model {record.name} belongs to {', '.join(codes)}, the client's frame is {client} ({info.name}).",
            "Give the model of the client's frame, or leave frame.geoid out: then there is no height H.",
            code="geoid_frame",
        )


def _frame_difference(record: GeoidRecord, client: ClientPosition, epoch: float) -> float:
    """Ellipsoidal height in the client's frame minus in the model's, metres; 0 where they are the same."""
    info = frame_info(client.frame)
    if record.kind == "national":
        require_frame(record, client.frame)
        return 0.0
    if is_global_realisation(info):
        return 0.0
    try:
        difference = ellipsoidal_height_difference_to_itrf2020(
            client.frame,
            client.lat_deg,
            client.lon_deg,
            float(client.h_m or 0.0),
            epoch if client.epoch is None else client.epoch,
        )
    except ReductionError as error:
        raise ReductionError(
            f"The height of {info.name} against ITRF2020 is not known here, so the global geoid model {record.name} "
            f"cannot be used with it. {error.text}",
            "Give the national model of the client's frame, or leave frame.geoid out: then there is no height H.",
            code="geoid_frame",
        ) from error
    if abs(difference) > GEOID_FRAME_LIMIT_M:
        raise ReductionError(
            f"Ellipsoidal heights of {info.name} differ by {difference:+.3f} m from ITRF2020's at this mark, over "
            f"{GEOID_FRAME_LIMIT_M} m: the global geoid model {record.name} does not go with it.",
            "Give the national model of the client's frame, or leave frame.geoid out: then there is no height H.",
            code="geoid_frame",
        )
    return difference


def _uncertainty(record: GeoidRecord, found: Undulation, difference_m: float) -> float | None:
    """Root sum of squares, the frame difference taken whole as one sigma; None where a part is unknown."""
    if record.u_m is None or found.interpolation_u_m is None:
        return None
    return math.sqrt(record.u_m**2 + found.interpolation_u_m**2 + difference_m**2)
