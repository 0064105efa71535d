"""An operation that runs through an installed grid: chosen, marked with the grid's hash, and right.

The grid is invented: a constant shift in the NTv2 format under the file name that EPSG gives for JGD2000 to JGD2011.
It lives in a folder added to PROJ's search path in a process of its own, so that no other test sees it.
"""

from __future__ import annotations

import hashlib
import json
import subprocess
import sys
from pathlib import Path

import pytest
from invented_geoid import SHIFT_LAT, SHIFT_LON_WEST, ntv2

ROOT = Path(__file__).parents[2]
NAME = "touhokutaiheiyouoki2011.gsb"

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
