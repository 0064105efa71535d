"""GeoPackage: opened by GDAL (pyogrio), held against the standard's required tables, and read back as the same register."""

from __future__ import annotations

import sqlite3
import struct
from contextlib import closing
from dataclasses import replace
from pathlib import Path

import numpy as np
import pyogrio
import pytest

from fieldbook.clock import SystemClock
from fieldbook.register import history
from fieldbook.register.evidence import Evidence
from fieldbook.register.store import Register

from .conftest import Call
from .made import OFFICE, add, occupied
from .test_combining import in_gda94


@pytest.fixture
def published(register: Register, base: Evidence) -> Register:
    """Two marks in GDA2020 with two values of the first, one in GDA94."""
    first = replace(occupied(base, 1, mark="A"), stops=())
    add(register, 0, [first])
    history.publish(register, None, by=OFFICE, reason="first list")
    again = replace(occupied(base, 4, mark="A", hours=30.0), stops=())
    east = replace(occupied(base, 2, mark="B", enu_m=(250.0, 0.0, 0.0), hours=3.0), stops=())
    old = replace(in_gda94(occupied(base, 3, mark="C", enu_m=(0.0, 250.0, 0.0), hours=6.0)), stops=())
    add(register, 0, [first, again, east, old])
    history.publish(register, None, by=OFFICE, reason="second list")
    return register


@pytest.fixture
def package(published: Register, tmp_path: Path, run_fieldbook: Call) -> Path:
    out = tmp_path / "register.gpkg"
    assert run_fieldbook("register", "export", published.path, "--out", out).code == 0
    return out


def test_gdal_opens_it_with_geometry_frame_and_attributes(published: Register, package: Path) -> None:
    layers = dict(pyogrio.list_layers(package))
    assert layers["marks_7843"] == layers["marks_4939"] == "Point Z"
    assert {"history", "frames", "register_entry", "register_content"} <= set(layers)
    info = pyogrio.read_info(package, layer="marks_7843", force_total_bounds=True)
    assert info["crs"] == "EPSG:7844"  # the 2-D frame of the same datum
    assert pyogrio.read_info(package, layer="marks_4939")["crs"] == "EPSG:4283"
    assert info["features"] == 2
    _, _, geometry, columns = pyogrio.raw.read(package, layer="marks_7843")
    fields = dict(zip(pyogrio.raw.read(package, layer="marks_7843")[0]["fields"], columns, strict=True))
    assert list(fields["name"]) == ["A", "B"]
    body = history.in_force(published.state(), 1).entry.body
    for row, wkb in enumerate(geometry):
        order, kind, x, y, z = struct.unpack("<BIddd", wkb)
        assert (order, kind) == (1, 1001 if kind == 1001 else 0x80000001)
        assert (x, y) == (fields["lon_deg"][row], fields["lat_deg"][row])
        assert z == fields["h_m"][row]
    assert fields["cov_xx_m2"][0] == pytest.approx(
        float(body["cov_own_m2"][0][0]) + float(body["cov_common_m2"][0][0]), rel=1e-12
    )
    assert info["total_bounds"] == pytest.approx(
        (min(fields["lon_deg"]), min(fields["lat_deg"]), max(fields["lon_deg"]), max(fields["lat_deg"]))
    )


def test_the_history_layer_keeps_superseded_values_apart(published: Register, package: Path) -> None:
    meta, _, geometry, columns = pyogrio.raw.read(package, layer="history")
    assert geometry is None
    rows = dict(zip(meta["fields"], columns, strict=True))
    prefix = published.state().id[:8]
    assert list(rows["number"]) == [f"{prefix}-1.1", f"{prefix}-1.2", f"{prefix}-2.1", f"{prefix}-3.1"]
    assert list(rows["in_force"]) == [0, 1, 1, 1]
    assert rows["successor"][0] == f"{prefix}-1.2"


def test_required_tables_and_identities(package: Path) -> None:
    """OGC 12-128r17, requirements 2, 10, 11, 13 and 21 to 30, as far as they concern points (from memory, high)."""
    with closing(sqlite3.connect(package)) as file:
        assert file.execute("PRAGMA application_id").fetchone()[0] == 0x47504B47
        assert file.execute("PRAGMA user_version").fetchone()[0] == 10300
        assert file.execute("PRAGMA integrity_check").fetchone()[0] == "ok"
        assert file.execute("PRAGMA foreign_key_check").fetchall() == []
        ids = {row[0] for row in file.execute("SELECT srs_id FROM gpkg_spatial_ref_sys")}
        assert {-1, 0, 4326, 7844, 4283} == ids
        assert not [row for row in file.execute("SELECT definition FROM gpkg_spatial_ref_sys") if not row[0].strip()]
        for table, kind, srs in file.execute("SELECT table_name, data_type, srs_id FROM gpkg_contents"):
            assert kind in ("features", "attributes")
            assert (srs in ids) == (kind == "features")
            (key,) = [row for row in file.execute(f"PRAGMA table_info({table})") if row[5]]
            assert key[2] == "INTEGER"
        geometry = file.execute("SELECT table_name, geometry_type_name, z, m FROM gpkg_geometry_columns").fetchall()
        assert sorted(geometry) == [("marks_4939", "POINT", 1, 0), ("marks_7843", "POINT", 1, 0)]
        (blob,) = file.execute("SELECT geom FROM marks_4939").fetchone()
        assert struct.unpack_from("<2sBBi", blob) == (b"GP", 0, 1, 4283)


def test_one_frame_gives_one_layer_called_marks(
    register: Register, base: Evidence, tmp_path: Path, run_fieldbook: Call
) -> None:
    add(register, 0, [occupied(base)])
    out = tmp_path / "today.gpkg"
    assert run_fieldbook("register", "export", register.path, "--out", out, "--today").code == 0
    assert "marks" in set(np.array(pyogrio.list_layers(out))[:, 0])
    empty = tmp_path / "none.gpkg"
    assert run_fieldbook("register", "export", register.path, "--out", empty).code == 0  # nothing is published
    assert "marks" not in set(np.array(pyogrio.list_layers(empty))[:, 0])


def test_an_import_gives_the_same_register(
    published: Register, package: Path, tmp_path: Path, run_fieldbook: Call
) -> None:
    again = tmp_path / "again.register"
    assert run_fieldbook("register", "import", again, package).code == 0
    with Register.open(again, clock=SystemClock()) as other:
        assert other.raw_entries() == published.raw_entries()
        assert list(other.raw_content()) == list(published.raw_content())
    one = run_fieldbook("register", "coordinates", published.path, "--json").out
    assert run_fieldbook("register", "coordinates", again, "--json").out == one
    assert run_fieldbook("verify", again).code == 0
    assert run_fieldbook("register", "import", again, package).code == 2


@pytest.mark.parametrize(
    "statement",
    [
        "UPDATE register_entry SET body = replace(body, 'first list', 'other list')",
        "DELETE FROM register_entry WHERE seq = 3",
        "DELETE FROM register_content WHERE id = 2",
        "UPDATE register_content SET data = x'00' WHERE id = 1",
        "DROP TABLE register_content",
        "PRAGMA application_id = 1",
    ],
)
def test_a_changed_package_makes_no_register(
    package: Path, tmp_path: Path, run_fieldbook: Call, statement: str
) -> None:
    with closing(sqlite3.connect(package)) as file:
        file.execute(statement)
        file.commit()
    out = tmp_path / "again.register"
    said = run_fieldbook("register", "import", out, package)
    assert said.code == 4, said.out
    assert "No register can be made" in said.err or "register" in said.err
    assert sorted(item.name for item in tmp_path.iterdir() if "again" in item.name) == []


def test_what_was_moved_on_the_map_is_not_taken_over(package: Path, tmp_path: Path, run_fieldbook: Call) -> None:
    with closing(sqlite3.connect(package)) as file:
        file.execute("UPDATE marks_7843 SET lat_deg = 0")
        file.commit()
    out = tmp_path / "again.register"
    assert run_fieldbook("register", "import", out, package).code == 0
    assert '"lat_deg": 0' not in run_fieldbook("register", "coordinates", out, "--json").out
