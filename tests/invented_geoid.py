"""Invented grids: a geoid that is a tilted plane with a gentle bow, as GTX and as GeoTIFF; a constant shift as NTv2."""

from __future__ import annotations

import struct
from pathlib import Path

import numpy as np
from numpy.typing import ArrayLike

SHIFT_LAT, SHIFT_LON_WEST = 0.02, -0.05  # arc-seconds; NTv2 counts longitude positive west


def write_gtx(path: Path, nodes: ArrayLike, *, south: float, west: float, step: float) -> Path:
    values = np.asarray(nodes, dtype=">f4")
    path.write_bytes(struct.pack(">4d2i", south, west, step, step, *values.shape) + values.tobytes())
    return path


def plane(rows: int = 9, columns: int = 11) -> np.ndarray:
    """A tilted plane with a gentle bow, which six-point Lagrange reproduces and bilinear does not."""
    y, x = np.mgrid[0:rows, 0:columns]
    return 20.0 + 0.3 * x - 0.2 * y + 0.01 * x * x


def bow(row: float, column: float) -> float:
    return 20.0 + 0.3 * column - 0.2 * row + 0.01 * column * column


def write_geotiff(
    path: Path, nodes: np.ndarray, *, north: float, west: float, step: float, area: bool = False, order: str = "<"
) -> Path:
    """A one-strip float32 GeoTIFF of geographic nodes, the least that PROJ reads.

    Args:
        nodes: rows from the south.
        north, west: the tie point: of the middle of the first pixel, or of its corner with `area`.
        order: "<" or ">", byte order.
    """
    values = np.ascontiguousarray(nodes[::-1], dtype=order + "f4")
    rows, columns = values.shape
    scale = struct.pack(order + "3d", step, step, 0.0)
    tie = struct.pack(order + "6d", 0, 0, 0, west, north, 0)
    kind_of_raster = 1 if area else 2
    keys = struct.pack(order + "16H", 1, 1, 0, 3, 1024, 0, 1, 2, 1025, 0, 1, kind_of_raster, 2048, 0, 1, 4326)
    tags = [(256, 4, 1, columns), (257, 4, 1, rows), (258, 3, 1, 32), (259, 3, 1, 1), (262, 3, 1, 1)]
    count = len(tags) + 8
    data_at = 8 + 2 + 12 * count + 4
    scale_at = data_at + values.nbytes
    tie_at, keys_at = scale_at + len(scale), scale_at + len(scale) + len(tie)
    tags += [(273, 4, 1, data_at), (277, 3, 1, 1), (278, 4, 1, rows), (279, 4, 1, values.nbytes), (339, 3, 1, 3)]
    tags += [(33550, 12, 3, scale_at), (33922, 12, 6, tie_at), (34735, 3, 16, keys_at)]
    directory = b"".join(
        struct.pack(order + "HHI", tag, kind, number)
        + (struct.pack(order + "HH", value, 0) if kind == 3 and number == 1 else struct.pack(order + "I", value))
        for tag, kind, number, value in tags
    )
    mark = b"II" if order == "<" else b"MM"
    head = mark + struct.pack(order + "HI", 42, 8) + struct.pack(order + "H", count)
    path.write_bytes(head + directory + struct.pack(order + "I", 0) + values.tobytes() + scale + tie + keys)
    return path


def ntv2(south: float, north: float, west: float, east: float, step: float) -> bytes:
    """A constant shift: overview header, one sub-grid, nodes from the south-east corner westwards (degrees)."""

    def record(key: str, value: bytes) -> bytes:
        return key.ljust(8).encode() + value.ljust(8, b"\0")

    def number(value: int) -> bytes:
        return struct.pack("<i", value)

    def real(value: float) -> bytes:
        return struct.pack("<d", value)

    rows, columns = round((north - south) / step) + 1, round((east - west) / step) + 1
    head = [
        record("NUM_OREC", number(11)), record("NUM_SREC", number(11)), record("NUM_FILE", number(1)),
        record("GS_TYPE", b"SECONDS "), record("VERSION", b"invented"), record("SYSTEM_F", b"JGD2000 "),
        record("SYSTEM_T", b"JGD2011 "), record("MAJOR_F", real(6378137.0)), record("MINOR_F", real(6356752.314)),
        record("MAJOR_T", real(6378137.0)), record("MINOR_T", real(6356752.314)),
        record("SUB_NAME", b"TEST    "), record("PARENT", b"NONE    "), record("CREATED", b"20270304"),
        record("UPDATED", b"20270304"), record("S_LAT", real(south * 3600)), record("N_LAT", real(north * 3600)),
        record("E_LONG", real(-east * 3600)), record("W_LONG", real(-west * 3600)),
        record("LAT_INC", real(step * 3600)),
        record("LONG_INC", real(step * 3600)), record("GS_COUNT", number(rows * columns)),
    ]  # fmt: skip
    node = struct.pack("<4f", SHIFT_LAT, SHIFT_LON_WEST, 0.01, 0.01)
    return b"".join(head) + node * (rows * columns) + record("END", real(0.0))
