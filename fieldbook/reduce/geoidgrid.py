"""A geoid grid in a GTX file, read whole and interpolated by six-point Lagrange per axis.

Bilinear interpolation of a 15-minute grid is off by up to 0.5 m worldwide; six points per axis stay within
millimetres. Columns wrap where the grid goes round the world, and rows go over the pole by the opposite meridian,
so that no place of a global grid is an edge. Within two nodes of the edge of a regional grid bilinear is used, and
the result says so.

GTX: 40 bytes of header, big-endian: latitude and longitude of the south-west node, spacing in latitude and
longitude (doubles, degrees), rows, columns (32-bit integers); then 32-bit floats row by row from the south,
-88.8888 where there is no data (NOAA VDatum, description of the binary GTX format).
"""

from __future__ import annotations

import hashlib
import math
import struct
from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from fieldbook.errors import ReductionError
from fieldbook.reduce.constants import GTX_NO_DATA
from fieldbook.reduce.geotiff import Layout

_HEADER = struct.Struct(">4d2i")
_POINTS = 6
_SAME_M = 1e-4
_SNAP = 1e-9  # of a node: a position on the edge must not fall outside by rounding


@dataclass(frozen=True)
class Undulation:
    """N in metres, how it was interpolated, and an estimate of what the interpolation is off by (one sigma)."""

    value_m: float
    method: str  # "six-point Lagrange" or "bilinear"
    interpolation_u_m: float | None


@dataclass(frozen=True)
class GeoidGrid:
    """Nodes of shape (rows, columns) in metres, row 0 in the south; NaN where there is no data."""

    south_deg: float
    west_deg: float
    row_step_deg: float
    column_step_deg: float
    nodes: NDArray[np.float32]
    sha256: str
    name: str

    @property
    def round_the_world(self) -> bool:
        """Do the columns close? Then longitude has no edge."""
        return bool(abs(self.nodes.shape[1] * self.column_step_deg - 360.0) < 1e-6)

    @property
    def _poles(self) -> tuple[bool, bool]:
        """Are the south and the north pole rows of the grid (and can a row be continued beyond them)?"""
        rows, columns = self.nodes.shape
        closed = self.round_the_world and columns % 2 == 0
        north = self.south_deg + (rows - 1) * self.row_step_deg
        return closed and abs(self.south_deg + 90.0) < 1e-9, closed and abs(north - 90.0) < 1e-9

    def undulation(self, lat_deg: float, lon_deg: float) -> Undulation:
        """N at a place.

        Raises:
            ReductionError: outside the grid, or no data there.
        """
        row, column = self._place(lat_deg, lon_deg)
        first, left = self._corner(row, column)
        cell = self._window(first, left, 2)
        if cell is None or not np.isfinite(cell).all():
            raise self._nothing(lat_deg, lon_deg)
        row_at, column_at = row - first, column - left
        six = self._window(first - 2, left - 2, _POINTS)
        if six is not None and np.isfinite(six).all():
            value = _lagrange(six, row_at + 2.0, column_at + 2.0)
            # The step from four to six points bounds what is still missing.
            four = _lagrange(six[1:5, 1:5], row_at + 1.0, column_at + 1.0)
            return Undulation(value, "six-point Lagrange", abs(value - four))
        return Undulation(_lagrange(cell, row_at, column_at), "bilinear", self._bilinear_error(first, left))

    def _corner(self, row: float, column: float) -> tuple[int, int]:
        """South-west node of the cell; on the last row or column of a grid with an edge the cell before it."""
        rows, columns = self.nodes.shape
        first, left = math.floor(row), math.floor(column)
        if not self._poles[1]:
            first = min(first, rows - 2)
        return first, left if self.round_the_world else min(left, columns - 2)

    def _place(self, lat_deg: float, lon_deg: float) -> tuple[float, float]:
        """Row and column as real numbers, columns in [0, columns)."""
        rows, columns = self.nodes.shape
        row = (lat_deg - self.south_deg) / self.row_step_deg
        column = ((lon_deg - self.west_deg) % 360.0) / self.column_step_deg
        turn = 360.0 / self.column_step_deg
        if turn - column < _SNAP:
            column = 0.0
        last = columns if self.round_the_world else columns - 1
        inside = math.isfinite(row) and math.isfinite(column)
        if not inside or not -_SNAP <= row <= rows - 1 + _SNAP or column > last + _SNAP:
            raise self._nothing(lat_deg, lon_deg)
        column = column if self.round_the_world else min(column, columns - 1.0)
        return min(max(row, 0.0), rows - 1.0), column

    def _window(self, first: int, left: int, size: int) -> NDArray[np.float64] | None:
        """size x size nodes from a south-west one, or None where they are not to be had."""
        rows, columns = self.nodes.shape
        south_pole, north_pole = self._poles
        window = np.empty((size, size))
        for index in range(size):
            node = first + index
            shift = 0
            if node < 0 and south_pole:
                node, shift = -node, columns // 2
            elif node >= rows and north_pole:
                node, shift = 2 * (rows - 1) - node, columns // 2
            if not 0 <= node < rows:
                return None
            places = np.arange(left, left + size) + shift
            if self.round_the_world:
                places %= columns
            elif places[0] < 0 or places[-1] >= columns:
                return None
            window[index] = self.nodes[node, places]
        return window

    def _bilinear_error(self, first: int, left: int) -> float | None:
        """An eighth of the largest second difference near the cell, per axis, in quadrature; None if not to be had.

        h^2 f'' / 8 is the largest error of linear interpolation; taken whole, as one sigma.
        """
        rows, columns = self.nodes.shape
        low, west = max(0, min(first - 1, rows - 4)), max(0, min(left - 1, columns - 4))
        patch = np.asarray(self.nodes[low : low + 4, west : west + 4], float)
        if min(patch.shape) < 3 or not np.isfinite(patch).all():
            return None
        bends = [float(np.abs(np.diff(patch, 2, axis=axis)).max()) / 8.0 for axis in (0, 1)]
        return math.hypot(*bends)

    def _nothing(self, lat_deg: float, lon_deg: float) -> ReductionError:
        return ReductionError(
            f"The geoid file {self.name} has no value at ({lat_deg:.4f}, {lon_deg:.4f}).",
            "Give a model that covers this place, or leave frame.geoid out: then there is no height H.",
            code="geoid_no_value",
        )


def six_point(
    layout: Layout,
    sample: Callable[[NDArray[np.float64], NDArray[np.float64]], NDArray[np.float64]],
    lat_deg: float,
    lon_deg: float,
    bilinear_m: float,
) -> Undulation | None:
    """The same interpolation on nodes that somebody else reads, `sample(lats, lons)`.

    None within two nodes of an edge, where nodes lack data, and where the layout is not that of the reader: the bilinear
    value of its four nodes must be `bilinear_m` to 0.1 mm (values are 32-bit: 8 micrometres at 100 m).
    """
    row = (lat_deg - layout.south_deg) / layout.row_step_deg
    column = ((lon_deg - layout.west_deg + 1e-12) % 360.0) / layout.column_step_deg
    first, left = math.floor(row), math.floor(column)
    if not (math.isfinite(row) and math.isfinite(column)) or first < 2 or first + 3 >= layout.rows:
        return None
    if not layout.round_the_world and not 2 <= left <= layout.columns - 4:
        return None
    rows, columns = np.arange(first - 2, first + 4), np.arange(left - 2, left + 4)
    if layout.round_the_world:
        columns = columns % layout.columns
    lats = np.repeat(layout.south_deg + rows * layout.row_step_deg, _POINTS)
    lons = np.tile(layout.west_deg + columns * layout.column_step_deg, _POINTS)
    nodes = sample(lats, (lons + 180.0) % 360.0 - 180.0).reshape(_POINTS, _POINTS)
    if not np.isfinite(nodes).all():
        return None
    row_at, column_at = row - first, column - left
    if abs(_lagrange(nodes[2:4, 2:4], row_at, column_at) - bilinear_m) > _SAME_M:
        return None
    value = _lagrange(nodes, row_at + 2.0, column_at + 2.0)
    four = _lagrange(nodes[1:5, 1:5], row_at + 1.0, column_at + 1.0)
    return Undulation(value, "six-point Lagrange", abs(value - four))


def _lagrange(window: NDArray[np.float64], row_at: float, column_at: float) -> float:
    """Value of the interpolating polynomial of a square window at places counted in its own nodes."""
    size = len(window)
    return float(_weights(size, row_at) @ window @ _weights(size, column_at))


def _weights(size: int, at: float) -> NDArray[np.float64]:
    """Lagrange weights of nodes 0 .. size-1 at a place between them."""
    weights = np.ones(size)
    for node in range(size):
        for other in range(size):
            if other != node:
                weights[node] *= (at - other) / (node - other)
    return weights


def read_gtx(path: Path) -> GeoidGrid:
    """A GTX file, validated; read once per state of the file.

    Raises:
        ReductionError: absent, not a GTX file (a saved web page is not), truncated, or without finite corners.
    """
    try:
        state = path.stat()
    except OSError as error:
        raise ReductionError(
            f"The geoid file {path} cannot be read ({error.strerror}).",
            "Put the file beside the session file or the book, or correct frame.geoid.",
            code="geoid_missing",
        ) from error
    return _read_gtx(path, state.st_size, state.st_mtime_ns)


@lru_cache(maxsize=4)
def _read_gtx(path: Path, size: int, changed_ns: int) -> GeoidGrid:
    del size, changed_ns  # only the key of the cache: a changed file is read and hashed anew
    content = path.read_bytes()
    if len(content) < _HEADER.size:
        raise _not_gtx(path, "it is shorter than the header")
    south, west, row_step, column_step, rows, columns = _HEADER.unpack_from(content)
    numbers = all(math.isfinite(value) for value in (south, west, row_step, column_step))
    steps = numbers and 1e-4 <= row_step <= 10.0 and 1e-4 <= column_step <= 10.0
    if not steps or not 2 <= rows <= 100_000 or not 2 <= columns <= 400_000:
        raise _not_gtx(path, "its header holds no grid")
    north, width = south + (rows - 1) * row_step, columns * column_step
    if south < -90.0 - 1e-6 or north > 90.0 + 1e-6 or abs(west) > 360.0 or width > 360.0 + column_step + 1e-6:
        raise _not_gtx(path, "its header holds no place on the earth")
    wanted = _HEADER.size + 4 * rows * columns
    if len(content) != wanted:
        raise _not_gtx(path, f"it has {len(content)} bytes, its header asks for {wanted}")
    nodes = np.frombuffer(content, dtype=">f4", offset=_HEADER.size).reshape(rows, columns).astype(np.float32)
    nodes[np.abs(nodes - np.float32(GTX_NO_DATA)) < 1e-3] = np.nan
    values = nodes[np.isfinite(nodes)]
    if values.size == 0 or float(np.abs(values).max()) > 1000.0:
        raise _not_gtx(path, "its values are no undulations")
    if abs((columns - 1) * column_step - 360.0) < 1e-6:
        nodes = nodes[:, :-1]  # the first meridian given twice: without its double the columns close
    nodes.setflags(write=False)
    return GeoidGrid(south, west, row_step, column_step, nodes, hashlib.sha256(content).hexdigest(), path.name)


def corners_finite(grid: GeoidGrid) -> bool:
    """Do all four corner nodes hold data? Asked when a model is added: a torn file often fails here."""
    return bool(np.isfinite(grid.nodes[[0, 0, -1, -1], [0, -1, 0, -1]]).all())


def _not_gtx(path: Path, why: str) -> ReductionError:
    return ReductionError(
        f"{path.name} is not a usable GTX file: {why}.",
        "Fetch the file again (a saved web page is not a grid), or convert it to GTX.",
        code="geoid_file",
    )
