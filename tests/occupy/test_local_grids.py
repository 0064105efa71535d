"""A local grid from fit to certificate: kept with its marks, applied to every reduction, refused outside them."""

from __future__ import annotations

import dataclasses
import json
import math
import shutil
from pathlib import Path

import pytest
from recorded_samples import SAMPLES, record_into

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.model.local_grid import LocalPosition
from fieldbook.occupy.local_positions import grid_of
from fieldbook.occupy.mark_results import mark_position
from fieldbook.reduce.frames import on_local_plane

from .shifted_log import shifted

# east minutes, north minutes, hours: a triangle, a mark inside it, one outside
MARKS = {"T1": (0.0, 0.0, 0), "T2": (0.6, 0.05, 2), "T3": (0.25, 0.5, 4), "IN": (0.28, 0.15, 6), "OUT": (1.2, 0.9, 8)}
TURN_DEG, EAST, NORTH, SHIFT = 12.0, 1000.0, 2000.0, -20.0


@pytest.fixture(scope="module")
def site(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A book with five marks."""
    folder = tmp_path_factory.mktemp("site")
    source = SAMPLES / "kestrel-ridge-1"
    text = (source / "session.toml").read_text(encoding="utf-8")
    log = b"".join((source / "receiver.nmea").read_bytes().splitlines(keepends=True)[:2000])
    for name, (east, north, hours) in MARKS.items():
        own = folder / name
        own.mkdir()
        (own / "session.toml").write_text(text.replace('name = "KR-07"', f'name = "{name}"'), encoding="utf-8")
        (own / "receiver.nmea").write_bytes(shifted(log, minutes=east, hours=hours, north_minutes=north))
        record_into(folder / "site.book", own / "session.toml")
    return folder / "site.book"


@pytest.fixture(scope="module")
def control(site: Path) -> Path:
    """The triangle's local coordinates, true to 0.01 mm: turned and shifted ones of a plane about the first mark."""
    with Book.open(site, clock=SystemClock()) as book:
        ends = {name: mark_position(book, name).client for name in ("T1", "T2", "T3")}
    first = ends["T1"]
    from fieldbook.reduce.constants import GRS80
    from fieldbook.reduce.geodesy import mean_radius_m

    height = sum(item.h_m or 0.0 for item in ends.values()) / 3
    scale0 = 1 + height / mean_radius_m(first.lat_deg)
    turn = math.radians(TURN_DEG)
    lines = ["mark,east_m,north_m,u_m,height_m,u_height_m"]
    for name, item in ends.items():
        x, y, *_ = on_local_plane(GRS80, first.lat_deg, first.lon_deg, scale0, item.lat_deg, item.lon_deg)
        east = EAST + math.cos(turn) * x - math.sin(turn) * y
        north = NORTH + math.sin(turn) * x + math.cos(turn) * y
        lines.append(f"{name},{east:.5f},{north:.5f},0.003,{(item.h_m or 0.0) + SHIFT:.5f},0.002")
    path = site.parent / "control.csv"
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


@pytest.fixture
def book(site: Path, tmp_path: Path) -> Path:
    path = tmp_path / "site.book"
    shutil.copy(site, path)
    return path


def fit(run_fieldbook, book: Path, control: Path, *more: str) -> tuple[int, str, str]:
    return run_fieldbook("marks", "localgrid", "fit", book, "quarry", control, "--source", "invented plan 7", *more)


def test_nothing_is_kept_unless_asked(book: Path, control: Path, run_fieldbook) -> None:
    code, out, err = fit(run_fieldbook, book, control)
    assert code == 0
    assert "variance factor" in out
    assert "Nothing was written" in err
    with Book.open(book, clock=SystemClock()) as opened:
        assert opened.state().local_grids == {}
    assert fit(run_fieldbook, book, control, "--keep")[0] == 2, "an entry needs a name"


def test_from_fit_to_certificate(book: Path, control: Path, run_fieldbook, tmp_path: Path) -> None:
    code, out, _ = fit(run_fieldbook, book, control, "--keep", "--by", "R. Kell", "--json")
    assert code == 0
    tree = json.loads(out)
    assert tree["schema"] == "fieldbook.localgrid/1"
    assert tree["grid"]["rotation_deg"] == pytest.approx(TURN_DEG, abs=0.01)
    assert [item["mark"] for item in tree["grid"]["marks"]] == ["T1", "T2", "T3"]
    with Book.open(book, clock=SystemClock()) as opened:
        entry = opened.state().local_grids["quarry"]
        assert entry.body["operation"] == ["EPSG:8049"]
        assert all(isinstance(item["east_m"], str) for item in entry.body["marks"]), "no floats in an entry"
        again = grid_of(entry)
        assert (again.a, again.b) == (tree["grid"]["a"], tree["grid"]["b"]), "the fit of tomorrow is that of today"

    reduced = json.loads(run_fieldbook("reduce", book, "--json")[1])
    local = {item["mark"]: item["local"] for item in reduced["reductions"]}
    assert set(local["IN"][0]) == {item.name for item in dataclasses.fields(LocalPosition)}
    assert local["IN"][0]["entry"] == entry.seq
    assert local["IN"][0]["height_m"] == pytest.approx(
        next(item["client"]["h_m"] for item in reduced["reductions"] if item["mark"] == "IN") + SHIFT, abs=0.02
    )
    assert local["T1"][0]["easting_m"] == pytest.approx(EAST, abs=0.001)
    assert local["T1"][0]["northing_m"] == pytest.approx(NORTH, abs=0.001)
    assert local["OUT"] == []
    outside = next(item for item in reduced["reductions"] if item["mark"] == "OUT")
    assert [item["code"] for item in outside["findings"]].count("outside_hull") == 1
    assert next(item for item in reduced["marks"] if item["mark"] == "IN")["local"] == local["IN"]
    assert "local grid quarry  E " in run_fieldbook("reduce", book, "--mark", "IN")[1]

    paper = tmp_path / "in.txt"
    assert run_fieldbook("certify", book, "IN", "--out", paper)[0] == 0
    text = " ".join(paper.read_text(encoding="utf-8").split())
    assert "Local grid quarry" in text
    assert "T1, T2, T3" in text
    assert "invented plan 7" in text
    assert "no national grid and no datum" in text
    for ending, start in (("html", b"<!"), ("pdf", b"%PDF")):
        other = tmp_path / f"in.{ending}"
        assert run_fieldbook("certify", book, "IN", "--out", other)[0] == 0
        data = other.read_bytes()
        assert data.lower().startswith(start.lower())
        assert ending == "pdf" or "Local grid quarry" in data.decode("utf-8")
    facts = json.loads(_json_of(run_fieldbook, book, "IN", tmp_path))
    stated = facts["position"]["local"][0]
    assert stated["printed"]["easting_m"] == f"{local['IN'][0]['easting_m']:.3f}"
    assert float(stated["horizontal95_m"]) == pytest.approx(local["IN"][0]["horizontal95_m"], abs=1e-6)
    without = json.loads(_json_of(run_fieldbook, book, "OUT", tmp_path))
    assert "local" not in without["position"]
    assert run_fieldbook("verify", book)[0] == 0


def _json_of(run_fieldbook, book: Path, mark: str, tmp_path: Path) -> str:
    path = tmp_path / f"{mark}.json"
    assert run_fieldbook("certify", book, mark, "--out", path)[0] == 0
    return path.read_text(encoding="utf-8")


def test_outside_only_by_decision(book: Path, control: Path, run_fieldbook, tmp_path: Path) -> None:
    assert fit(run_fieldbook, book, control, "--keep", "--by", "R. Kell")[0] == 0
    assert run_fieldbook(
        "entry", book, "decision", "--occupation", "5", "--set", "outside_hull=true", "--set",
        "reason=staked by the office", "--by", "R. Kell",
    )[0] == 0  # fmt: skip
    out = json.loads(run_fieldbook("reduce", book, "--mark", "OUT", "--json")[1])["reductions"][0]
    assert out["local"][0]["inside"] is False
    assert next(item for item in out["findings"] if item["code"] == "outside_hull")["severity"] == "caution"
    inside = json.loads(run_fieldbook("reduce", book, "--mark", "IN", "--json")[1])["reductions"][0]["local"][0]
    assert out["local"][0]["horizontal95_m"] > inside["horizontal95_m"]
    paper = tmp_path / "out.txt"
    assert run_fieldbook("certify", book, "OUT", "--out", paper)[0] == 0
    text = " ".join(paper.read_text(encoding="utf-8").split())
    assert "outside the marks the grid was fitted to" in text
    assert "staked by the office" in text


def test_struck_it_is_gone(book: Path, control: Path, run_fieldbook) -> None:
    assert fit(run_fieldbook, book, control, "--keep", "--by", "R. Kell")[0] == 0
    shown = json.loads(run_fieldbook("marks", "localgrid", "show", book, "--json")[1])
    assert [item["name"] for item in shown["grids"]] == ["quarry"]
    assert "local grid quarry of EPSG:7843" in run_fieldbook("marks", "localgrid", "show", book)[1]
    assert (
        run_fieldbook("strike", book, shown["grids"][0]["entry"], "--reason", "wrong plan", "--by", "R. Kell")[0] == 0
    )
    assert json.loads(run_fieldbook("marks", "localgrid", "show", book, "--json")[1])["grids"] == []


@pytest.mark.parametrize(
    ("rows", "said"),
    [
        ("mark,east_m,north_m,u_m\nT1,1,2,0.003\nT2,3,4,0.003\n", "needs 3 marks"),
        ("mark,east_m,north_m\nT1,1,2\n", "no column u_m"),
        ("mark,east_m,north_m,u_m,code\nT1,1,2,3,4\n", 'no column "code"'),
        ("mark,east_m,north_m,u_m\nT1,1,2,x\n", "line 2: u_m needs a number"),
        ("mark,east_m,north_m,u_m\nT1,1,2,\n", "line 2: u_m is missing"),
        ("mark,east_m,north_m,u_m\nNO,1,2,0.1\nT2,3,4,0.1\nT3,5,9,0.1\n", 'no occupation of a mark "NO"'),
        ("mark,east_m,north_m,u_m\nT1,1,2,0\nT2,3,4,0.1\nT3,5,9,0.1\n", "over zero"),
    ],
)
def test_slips_in_the_list(site: Path, tmp_path: Path, run_fieldbook, rows: str, said: str) -> None:
    path = tmp_path / "control.csv"
    path.write_text(rows, encoding="utf-8")
    code, _, err = fit(run_fieldbook, site, path)
    assert code == 2
    assert said in err
