"""The shipped samples: made anew they are the same, their truth agrees with PROJ, they are as awkward as they say."""

from __future__ import annotations

import importlib.util
import math
import sys
import tomllib
from pathlib import Path
from types import ModuleType
from typing import Any

import pynmea2
import pyproj
import pytest

SAMPLES = Path(__file__).resolve().parents[2] / "sample_sessions"
NAMES = (
    "kestrel-ridge-1", "kestrel-ridge-2", "saltpan-1", "saltpan-2",
    "northgate-1", "northgate-2", "northgate-3", "northgate-4",
)  # fmt: skip


def load_maker() -> ModuleType:
    spec = importlib.util.spec_from_file_location("make_samples", SAMPLES / "make_samples.py")
    assert spec is not None
    assert spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    sys.modules["make_samples"] = module
    spec.loader.exec_module(module)
    return module


maker = load_maker()


def toml(name: str, file: str) -> dict[str, Any]:
    return tomllib.loads((SAMPLES / name / file).read_text(encoding="utf-8"))


def received(name: str) -> bytes:
    return maker.stored(SAMPLES / name / toml(name, "session.toml")["receiver"]["link"].removeprefix("file:"))


def test_all_samples_are_there_and_small() -> None:
    assert tuple(item.folder for item in maker.SAMPLES) == NAMES
    assert sum(path.stat().st_size for path in SAMPLES.rglob("*") if path.is_file()) < 4_000_000


@pytest.mark.parametrize("sample", maker.SAMPLES, ids=NAMES)
def test_made_anew_they_are_the_same_bytes(sample) -> None:
    data, truth, _ = maker.make(sample)
    assert data == received(sample.folder)
    assert truth == (SAMPLES / sample.folder / "truth.toml").read_text(encoding="utf-8")


@pytest.mark.parametrize("name", NAMES)
def test_truth_in_both_frames_agrees_with_proj(name: str) -> None:
    """PROJ 9.5 with the EPSG operations written out as a pipeline. Tolerance 0.1 mm in position and height.

    ITRF2014 to GDA2020 is EPSG 8049 (GDA2020 Technical Manual 1.3, table 3.2), ITRF2020 to ITRF2014 the inverse of
    EPSG 9991, WGS 84 (G2296) to ITRF2020 EPSG 10608 (zero).
    """
    truth = toml(name, "truth.toml")
    receiver, client = truth["receiver_frame"], truth["client_frame"]
    steps = [
        "+proj=helmert +x=0 +y=0 +z=0 +rx=0 +ry=0 +rz=0 +s=0 +dx=0 +dy=0 +dz=0 +drx=0.00150379 +dry=0.00118346 "
        "+drz=0.00120716 +ds=0 +t_epoch=2020 +convention=coordinate_frame"
    ]
    ellipsoid = "GRS80"
    if receiver["frame"] == "EPSG:10605":
        ellipsoid = "WGS84"
        steps.insert(
            0,
            "+inv +proj=helmert +x=0.0014 +y=0.0009 +z=-0.0014 +rx=0 +ry=0 +rz=0 +s=0.00042 +dx=0 +dy=0.0001 "
            "+dz=-0.0002 +drx=0 +dry=0 +drz=0 +ds=0 +t_epoch=2015 +convention=position_vector",
        )
    pipeline = (
        f"+proj=pipeline +step +proj=unitconvert +xy_in=deg +xy_out=rad +step +proj=cart +ellps={ellipsoid} "
        + " ".join(f"+step {step}" for step in steps)
        + " +step +inv +proj=cart +ellps=GRS80 +step +proj=unitconvert +xy_in=rad +xy_out=deg"
    )
    found = pyproj.Transformer.from_pipeline(pipeline).transform(
        receiver["lon_deg"], receiver["lat_deg"], receiver["h_m"], receiver["epoch"], errcheck=True
    )
    assert found[0] == pytest.approx(client["lon_deg"], abs=1e-9)
    assert found[1] == pytest.approx(client["lat_deg"], abs=1e-9)
    assert found[2] == pytest.approx(client["h_m"], abs=1e-4)


def test_the_contract_sample_of_a_slant_height() -> None:
    """sqrt(1.5320^2 - 0.1500^2) - 0.0300 = 1.49464 m (contract, section 2)."""
    assert maker.read_height_m(toml("kestrel-ridge-1", "session.toml")) == pytest.approx(1.49464, abs=5e-6)


@pytest.mark.parametrize("name", NAMES)
def test_session_files_are_complete(name: str) -> None:
    from fieldbook.settings.session import load_session

    session = load_session(SAMPLES / name / "session.toml")
    truth = toml(name, "truth.toml")
    assert session.mark.name == truth["mark"]
    assert session.frame.receiver == truth["receiver_frame"]["frame"]
    assert session.setup.reported_point == truth["setup"]["reported_point"]
    assert {item.when for item in session.setup.heights} == {"before", "after"}
    assert "invented" in (session.job.remarks or "")
    assert session.corrections.station == (None if name == "saltpan-2" else maker_of(name).scenario.station)
    lat_deg = session.mark.approximate_lat_deg
    assert lat_deg == pytest.approx(truth["client_frame"]["lat_deg"], abs=1e-4)


def maker_of(name: str) -> Any:
    return next(item for item in maker.SAMPLES if item.folder == name)


def fixes(name: str) -> list[pynmea2.GGA]:
    lines = received(name).decode("ascii").split("\r\n")
    return [pynmea2.parse(line, check=True) for line in lines if line.startswith("$GNGGA")]


def test_first_sample_has_two_initialisations_that_agree() -> None:
    truth = toml("kestrel-ridge-1", "truth.toml")
    assert [item["wrong"] for item in truth["initialisation"]] == [False, False]
    rows = fixes("kestrel-ridge-1")
    assert len(rows) == 1200
    assert {len(row.data[1].partition(".")[2]) for row in rows} == {8}
    assert {len(row.data[10].partition(".")[2]) for row in rows} == {3}


def test_second_sample_is_four_hours_away_in_sidereal_time() -> None:
    """A sidereal day is 86 164.1 s; occupations at the same sidereal hour see the same sky."""
    first, second = (toml(name, "truth.toml")["epochs"] for name in NAMES[:2])
    apart_s = (second["first"] - first["last"]).total_seconds() % 86_164.1
    assert min(apart_s, 86_164.1 - apart_s) > 4 * 3600


def test_awkward_sample_is_awkward() -> None:
    truth = toml("saltpan-1", "truth.toml")
    assert [item["wrong"] for item in truth["initialisation"]] == [False, True, False]
    assert truth["initialisation"][1]["wrong_by_m"] == pytest.approx(0.35, abs=0.005)
    assert truth["epochs"]["first"].date() < truth["epochs"]["last"].date()
    assert (truth["gap"][0]["to"] - truth["gap"][0]["from"]).total_seconds() == 40
    assert len(truth["epochs"]["strays"]) > 5
    rows = fixes("saltpan-1")
    assert {len(row.data[10].partition(".")[2]) for row in rows} == {1}
    assert {len(row.data[1].partition(".")[2]) for row in rows} == {7}
    wrong = [item for item in truth["initialisation"] if item["wrong"]]
    share = sum((item["to"] - item["from"]).total_seconds() for item in wrong) / sum(
        (item["to"] - item["from"]).total_seconds() for item in truth["initialisation"]
    )
    assert share < 0.4  # the majority is right: nothing could tell otherwise


def test_autonomous_sample_is_metres_from_the_truth_or_less_and_says_quality_1() -> None:
    truth = toml("saltpan-2", "truth.toml")
    rows = fixes("saltpan-2")
    assert {row.gps_qual for row in rows} == {1}
    north_m = [math.radians(row.latitude - truth["receiver_frame"]["lat_deg"]) * 6_357_500.0 for row in rows]
    assert 0.1 < max(north_m) - min(north_m) < 15.0
    assert all(row.data[12] == row.data[13] == "" for row in rows)
