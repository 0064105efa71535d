"""EGM96 at the published points, our six-point Lagrange against them and against bilinear interpolation."""

from __future__ import annotations

from importlib import resources
from pathlib import Path

import numpy as np
import pytest
from invented_geoid import write_geotiff
from numpy.typing import NDArray
from published_tables import table

from fieldbook.reduce.frames import undulation_by_proj
from fieldbook.reduce.geoid import GeoidModel, find_model, undulation_at
from fieldbook.reduce.geoidgrid import GeoidGrid, read_gtx

EGM96 = Path(str(resources.files("fieldbook") / "data")) / "egm96_15.gtx"


@pytest.fixture(scope="module")
def grid() -> GeoidGrid:
    return read_gtx(EGM96)


NGA = [(float(row["lat"]), float(row["lon"]), float(row["N"])) for row in table("egm96_nga_points.csv")]


@pytest.mark.parametrize(("lat", "lon", "published"), NGA)
def test_nga_points(grid: GeoidGrid, lat: float, lon: float, published: float) -> None:
    """NGA, INPUT.DAT and output of program INTPT with the 15-minute grid WW15MGH (carrier: about ten repositories).
    Tolerance 3 mm; longitudes from 0 to 360 as published."""
    found = grid.undulation(lat, lon)
    assert found.method == "six-point Lagrange"
    assert found.value_m == pytest.approx(published, abs=0.003)


def test_bilinear_misses_the_nga_points() -> None:
    """PROJ's vgridshift is bilinear: 19.0 3.2 -41.6 55.9 -30.0 7.1 mm off (own computation): 0.06 m at best."""
    off = [1000.0 * (undulation_by_proj(EGM96, lat, lon) - published) for lat, lon, published in NGA]
    assert off == pytest.approx([19.0, 3.2, -41.6, 55.9, -30.0, 7.1], abs=0.1)


@pytest.mark.parametrize(
    ("lat", "lon", "published"),
    [
        (38.0, 270.0, -30.262),
        (-12.25, 82.75, -67.347),
        (0.0, 0.0, 17.162),
        (90.0, 0.0, 13.606),
        (90.0, 77.7, 13.606),
        (-90.0, 0.0, -29.534),
        (-90.0, -123.4, -29.534),
    ],
)
def test_nodes(grid: GeoidGrid, lat: float, lon: float, published: float) -> None:
    """Nodes of the NGA grid WW15MGH. Tolerance 0.6 mm: printed to 1 mm."""
    assert grid.undulation(lat, lon).value_m == pytest.approx(published, abs=0.0006)


def test_timbuktu(grid: GeoidGrid) -> None:
    """GeographicLib manual, GeoidEval example, 16:46:33N 3:00:34W: 28.7068 (from memory, high). Tolerance 3 mm."""
    found = grid.undulation(16 + 46 / 60 + 33 / 3600, -(3 + 34 / 3600))
    assert found.value_m == pytest.approx(28.7068, abs=0.003)


def test_proj_test_suite_value_is_of_another_grid(grid: GeoidGrid) -> None:
    """PROJ's suite expects 36.3941 m at 55.5 N 12.5 E from a downsampled grid of the same name; the real node is
    36.0213 m. Tolerance 0.1 mm."""
    assert grid.undulation(55.5, 12.5).value_m == pytest.approx(36.0213, abs=1e-4)


def test_multiplier_of_proj_is_turned() -> None:
    """N, not -N: 48.029 m at 50 N 10 E by bilinear interpolation (own computation, a node). Tolerance 1 mm."""
    assert undulation_by_proj(EGM96, 50.0, 10.0) == pytest.approx(48.029, abs=0.001)


@pytest.fixture(scope="module")
def as_geotiff(tmp_path_factory: pytest.TempPathFactory, grid: GeoidGrid) -> GeoidModel:
    """The same nodes as a GeoTIFF, read by PROJ."""
    folder = tmp_path_factory.mktemp("geotiff")
    write_geotiff(folder / "egm96.tif", grid.nodes, north=90.0, west=-180.0, step=0.25)
    (folder / "egm96.toml").write_text('name = "EGM96"\nkind = "global"\nframe = "ITRF"\n', encoding="utf-8")
    return find_model("egm96.tif", [folder])


@pytest.mark.parametrize(("lat", "lon", "published"), NGA)
def test_nga_points_from_a_geotiff(as_geotiff: GeoidModel, lat: float, lon: float, published: float) -> None:
    """The same points through a GeoTIFF whose nodes PROJ reads: 3 mm, where PROJ's bilinear is up to 56 mm off."""
    found = undulation_at(as_geotiff, lat, (lon + 180.0) % 360.0 - 180.0)
    assert found.method == "six-point Lagrange"
    assert found.value_m == pytest.approx(published, abs=0.003)


def test_geotiff_equals_gtx_everywhere(as_geotiff: GeoidModel, grid: GeoidGrid) -> None:
    """Our own reader of GTX as witness, 200 places over the globe, seams included. Tolerance 0.1 mm (32-bit nodes)."""
    rng = np.random.default_rng(15)
    places = [(float(rng.uniform(-89.4, 89.4)), float(rng.uniform(-180, 180))) for _ in range(200)]
    for lat, lon in [*places, (12.3, 179.99), (12.3, -179.99), (-45.6, 180.0), (0.0, 0.0)]:
        found = undulation_at(as_geotiff, lat, lon)
        assert found.method == "six-point Lagrange", (lat, lon)
        assert found.value_m == pytest.approx(grid.undulation(lat, lon).value_m, abs=1e-4), (lat, lon)


def _spline(grid: GeoidGrid, lat: float, lon: float) -> float:
    interpolate = pytest.importorskip("scipy.interpolate")
    row, column = (lat - grid.south_deg) / 0.25, ((lon - grid.west_deg) % 360.0) / 0.25
    rows = np.arange(int(row) - 8, int(row) + 9)
    columns = np.arange(int(column) - 8, int(column) + 9)
    window: NDArray[np.float64] = np.asarray(grid.nodes[np.ix_(rows, columns % 1440)], float)
    return float(interpolate.RectBivariateSpline(rows, columns, window, kx=3, ky=3)(row, column)[0, 0])


def test_lagrange_against_scipy_spline(grid: GeoidGrid) -> None:
    """scipy bicubic spline on 17 x 17 nodes, 300 random places: rms 0.8 mm, most 10.5 mm over 3000 places (own
    computation). Tolerance 1.5 mm rms and 12 mm."""
    rng = np.random.default_rng(96)
    off = []
    for _ in range(300):
        lat, lon = rng.uniform(-87, 87), rng.uniform(-180, 180)
        off.append(grid.undulation(lat, lon).value_m - _spline(grid, lat, lon))
    assert np.sqrt(np.mean(np.square(off))) < 0.0015
    assert np.max(np.abs(off)) < 0.012


def test_over_the_pole_and_round_the_world(grid: GeoidGrid) -> None:
    """No source: N is continuous over both poles and across both seams of longitude. 0.1 mm over 1e-6 degree."""
    for lat in (90.0, -90.0):
        near = [grid.undulation(lat - np.sign(lat) * 1e-7, lon).value_m for lon in (-180, -90, 0, 45.3, 179.9)]
        assert near == pytest.approx([grid.undulation(lat, 0.0).value_m] * 5, abs=1e-4)
    for lat in (-60.1, 0.1, 71.3):
        east, west = grid.undulation(lat, 180.0 - 1e-7).value_m, grid.undulation(lat, -180.0 + 1e-7).value_m
        assert east == pytest.approx(west, abs=1e-4)
        assert grid.undulation(lat, -1e-7).value_m == pytest.approx(
            grid.undulation(lat, 360.0 + 1e-7).value_m, abs=1e-4
        )
    same = [grid.undulation(10.1, lon).value_m for lon in (180.0, -180.0, 540.0)]
    assert same == [same[0]] * 3
