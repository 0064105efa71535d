"""An operation that runs through an installed grid: chosen, marked with the grid's hash, and right.

The grid is invented: a constant shift in the NTv2 format under the file name that EPSG gives for JGD2000 to JGD2011.
It lives in a folder added to PROJ's search path in a process of its own, so that no other test sees it.
"""

from __future__ import annotations

import hashlib
import json
import struct
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
NAME = "touhokutaiheiyouoki2011.gsb"
SHIFT_LAT, SHIFT_LON_WEST = 0.02, -0.05  # arc-seconds; NTv2 counts longitude positive west

SCRIPT = """
import json, sys, pyproj
pyproj.datadir.append_data_dir(sys.argv[1])
from fieldbook.errors import FieldbookError
from fieldbook.model.session import FrameChoice
from fieldbook.reduce.frames import operation_codes, transform_to_client
client, operation = transform_to_client(FrameChoice("EPSG:4947", "EPSG:6667"), 37.95, 140.55, 60.0, 2027.2)
print(json.dumps({
    "lat": client.lat_deg, "lon": client.lon_deg, "h": client.h_m, "codes": operation_codes(operation),
    "grids": [[grid.name, grid.sha256] for grid in operation.grids], "accuracy": operation.accuracy_m,
}))
"""


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


def run(folder: Path) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-W", "error", "-c", SCRIPT, str(folder)],
        cwd=ROOT,
        capture_output=True,
        text=True,
        check=False,
    )


def test_installed_grid_is_used_and_recorded(tmp_path: Path) -> None:
    content = ntv2(37.0, 39.0, 140.0, 141.5, 0.1)
    (tmp_path / NAME).write_bytes(content)
    done = run(tmp_path)
    assert done.returncode == 0, done.stderr
    found = json.loads(done.stdout)
    assert found["grids"] == [[NAME, hashlib.sha256(content).hexdigest()]]
    assert found["lat"] == pytest.approx(37.95 + SHIFT_LAT / 3600, abs=1e-9)
    assert found["lon"] == pytest.approx(140.55 - SHIFT_LON_WEST / 3600, abs=1e-9)
    assert found["h"] == pytest.approx(60.0, abs=1e-6)
    assert 0.0 < found["accuracy"] <= 0.2
    assert len(found["codes"]) == 1


def test_mark_outside_the_installed_grid(tmp_path: Path) -> None:
    """The file is there, but does not reach the mark: an error, never the input unchanged."""
    (tmp_path / NAME).write_bytes(ntv2(35.0, 36.0, 139.0, 140.0, 0.1))
    done = run(tmp_path)
    assert done.returncode != 0
    assert "ReductionError" in done.stderr
