"""Geoid files that are not what they say, regional edges, records, and which model goes with which frame."""

from __future__ import annotations

import struct
from dataclasses import replace
from importlib import resources
from pathlib import Path

import numpy as np
import pytest
from invented_geoid import bow, plane, write_geotiff, write_gtx

from fieldbook.errors import ReductionError
from fieldbook.model.reduction import ClientPosition
from fieldbook.reduce.frames import frame_info, undulation_by_proj, undulations_by_proj
from fieldbook.reduce.geodesy import geocentric
from fieldbook.reduce.geoid import check_geoid_file, find_model, height_above_geoid, read_record, undulation_at
from fieldbook.reduce.geoidgrid import read_gtx, six_point
from fieldbook.reduce.geotiff import geotiff_layout

EPOCH = 2027.2
PACKAGE = Path(str(resources.files("fieldbook") / "data"))


def client(code: str, lat: float, lon: float, h: float | None = 600.0, epoch: float | None = None) -> ClientPosition:
    info = frame_info(code)
    xyz = [None] * 3 if h is None else [float(v) for v in geocentric(lat, lon, h, info.ellipsoid)]
    return ClientPosition(info.code, info.name, epoch, lat, lon, h, *xyz)


# --- files -------------------------------------------------------------------------------------------------------


def test_regional_grid_inside_and_near_the_edge(tmp_path: Path) -> None:
    grid = read_gtx(write_gtx(tmp_path / "r.gtx", plane(), south=-38.0, west=144.0, step=0.1))
    inner = grid.undulation(-38.0 + 0.1 * 4.3, 144.0 + 0.1 * 5.4)
    assert inner.method == "six-point Lagrange"
    assert inner.value_m == pytest.approx(bow(4.3, 5.4), abs=1e-5)
    edge = grid.undulation(-38.0 + 0.1 * 4.3, 144.0 + 0.1 * 0.5)
    assert edge.method == "bilinear"
    assert edge.value_m == pytest.approx(bow(4.3, 0.5), abs=0.0030)
    assert edge.value_m != pytest.approx(bow(4.3, 0.5), abs=0.0020)
    assert edge.interpolation_u_m == pytest.approx(0.01 * 2 / 8, abs=1e-5)  # an eighth of the second difference


@pytest.mark.parametrize(("lat", "lon"), [(-38.0, 144.0), (-37.2, 145.0), (-38.0, 145.0), (-37.2, 144.0)])
def test_corners_of_a_regional_grid_are_inside(tmp_path: Path, lat: float, lon: float) -> None:
    grid = read_gtx(write_gtx(tmp_path / "r.gtx", plane(), south=-38.0, west=144.0, step=0.1))
    row, column = round((lat + 38.0) / 0.1), round((lon - 144.0) / 0.1)
    assert grid.undulation(lat, lon).value_m == pytest.approx(bow(row, column), abs=1e-5)


@pytest.mark.parametrize(
    ("lat", "lon"), [(-38.01, 144.5), (-37.19, 144.5), (-37.5, 143.99), (-37.5, 145.01), (50.0, 8.0)]
)
def test_outside_a_regional_grid(tmp_path: Path, lat: float, lon: float) -> None:
    grid = read_gtx(write_gtx(tmp_path / "r.gtx", plane(), south=-38.0, west=144.0, step=0.1))
    with pytest.raises(ReductionError) as error:
        grid.undulation(lat, lon)
    assert error.value.code == "geoid_no_value"


def test_grid_across_the_180th_meridian(tmp_path: Path) -> None:
    grid = read_gtx(write_gtx(tmp_path / "nz.gtx", plane(), south=-45.0, west=179.5, step=0.1))
    assert grid.undulation(-44.6, -179.95).value_m == pytest.approx(bow(4.0, 5.5), abs=1e-4)


def test_no_data_falls_back_and_then_refuses(tmp_path: Path) -> None:
    nodes = plane()
    nodes[1, 1] = -88.8888
    grid = read_gtx(write_gtx(tmp_path / "r.gtx", nodes, south=-38.0, west=144.0, step=0.1))
    assert grid.undulation(-38.0 + 0.35, 144.0 + 0.35).method == "bilinear"
    with pytest.raises(ReductionError):
        grid.undulation(-38.0 + 0.05, 144.0 + 0.05)


def test_first_meridian_given_twice(tmp_path: Path) -> None:
    y, x = np.mgrid[0:19, 0:37]
    nodes = 10.0 * np.cos(np.radians(x * 10.0)) * np.cos(np.radians(y * 10.0 - 90.0))
    grid = read_gtx(write_gtx(tmp_path / "g.gtx", nodes, south=-90.0, west=-180.0, step=10.0))
    assert grid.round_the_world
    near = grid.undulation(5.0, 179.0)
    assert near.method == "six-point Lagrange"
    assert near.value_m == pytest.approx(10.0 * np.cos(np.radians(359.0)) * np.cos(np.radians(5.0)), abs=1e-3)


def _truncated(content: bytes) -> bytes:
    return content[:-5]


BROKEN = {
    "empty": lambda content: b"",
    "truncated": _truncated,
    "longer": lambda content: content + b"\0",
    "web page": lambda content: (
        b"<!DOCTYPE html><html><head><title>Not found</title></head><body>Sorry.</body></html>" * 50
    ),
    "little-endian": lambda content: struct.pack("<4d2i", *struct.unpack_from(">4d2i", content)) + content[40:],
    "no numbers": lambda content: content[:40] + b"\x7f\xc0\0\0" * (len(content[40:]) // 4),
    "metres by the thousand": lambda content: content[:40] + struct.pack(">f", 9e5) * (len(content[40:]) // 4),
}


@pytest.mark.parametrize("name", list(BROKEN))
def test_files_that_are_no_grid(tmp_path: Path, name: str) -> None:
    path = write_gtx(tmp_path / "x.gtx", plane(), south=-38.0, west=144.0, step=0.1)
    path.write_bytes(BROKEN[name](path.read_bytes()))
    with pytest.raises(ReductionError) as error:
        read_gtx(path)
    assert error.value.code == "geoid_file"
    assert error.value.remedy


def test_check_of_a_new_file(tmp_path: Path) -> None:
    assert check_geoid_file(PACKAGE / "egm96_15.gtx").startswith("c02a6eb7")
    torn = plane()
    torn[-1, -1] = -88.8888
    with pytest.raises(ReductionError, match="corner"):
        check_geoid_file(write_gtx(tmp_path / "torn.gtx", torn, south=-38.0, west=144.0, step=0.1))
    folder = tmp_path / "with space é"
    folder.mkdir()
    check_geoid_file(write_gtx(folder / "r.gtx", plane(), south=-38.0, west=144.0, step=0.1))
    with pytest.raises(ReductionError, match="comma"):
        check_geoid_file(write_gtx(tmp_path / "a,b.gtx", plane(), south=-38.0, west=144.0, step=0.1))
    with pytest.raises(ReductionError, match="neither"):
        check_geoid_file(tmp_path / "model.byn")


def test_a_changed_file_is_read_anew(tmp_path: Path) -> None:
    path = write_gtx(tmp_path / "r.gtx", plane(), south=-38.0, west=144.0, step=0.1)
    first = read_gtx(path)
    write_gtx(path, plane(10, 11) + 1.0, south=-38.0, west=144.0, step=0.1)
    assert read_gtx(path).sha256 != first.sha256


# --- records -----------------------------------------------------------------------------------------------------


def national(folder: Path, *, extra: str = "") -> str:
    write_gtx(folder / "nat.gtx", plane(), south=-24.0, west=133.4, step=0.1)
    (folder / "nat.toml").write_text(
        'name = "Invented 2027"\nkind = "national"\nframe = "EPSG:7843"\nvertical_datum = "Invented datum"\n' + extra,
        encoding="utf-8",
    )
    return "nat.gtx"


def test_record_of_the_package() -> None:
    record = read_record(PACKAGE / "egm96_15.toml")
    assert record.kind == "global"
    assert record.vertical_datum is None
    assert record.u_m == 0.5
    assert "from memory" in record.u_source
    assert record.licence == "public domain"


def test_missing_file_and_missing_record(tmp_path: Path) -> None:
    with pytest.raises(ReductionError, match="is not there") as error:
        find_model("none.gtx", [tmp_path])
    assert error.value.code == "geoid_missing"
    write_gtx(tmp_path / "bare.gtx", plane(), south=-24.0, west=133.4, step=0.1)
    with pytest.raises(ReductionError, match="no record") as error:
        find_model("bare.gtx", [tmp_path])
    assert error.value.code == "geoid_record"
    with pytest.raises(ReductionError, match="neither"):
        find_model("model.isg", [tmp_path])


@pytest.mark.parametrize(
    "text",
    [
        "name = 3",
        'name = "a"\nkind = "local"\nframe = "x"',
        'name = "a"\nkind = "global"\nframe = "x"\nu_m = -1.0',
        'name = "a"\nkind = "global"\nframe = "x"\nu_m = true',
        "not toml",
    ],
)
def test_bad_records(tmp_path: Path, text: str) -> None:
    path = tmp_path / "r.toml"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(ReductionError) as error:
        read_record(path)
    assert error.value.code == "geoid_record"


def test_file_of_another_hash(tmp_path: Path) -> None:
    name = national(tmp_path, extra='sha256 = "' + "0" * 64 + '"\n')
    with pytest.raises(ReductionError) as error:
        find_model(name, [tmp_path])
    assert error.value.code == "geoid_changed"


# --- frames ------------------------------------------------------------------------------------------------------


def test_global_model_with_gda2020() -> None:
    """GDA2020 is 0.48 m from ITRF2020 in plan at 2027.2, but 4 mm in height: accepted, the 4 mm in u_N."""
    place = (-23.6174460, 133.8747120)
    height = height_above_geoid(client("EPSG:7843", *place), "egm96_15.gtx", [], epoch_of_observation=EPOCH)
    assert height.undulation_m == pytest.approx(15.871, abs=0.003)
    assert height.orthometric_m == pytest.approx(600.0 - height.undulation_m, abs=1e-12)
    assert height.undulation_u_m == pytest.approx((0.5**2 + 0.002**2 + 0.0037**2) ** 0.5, abs=1e-6)
    assert height.vertical95_m is None
    assert height.datum is None
    assert height.heading == "height above geoid model EGM96 (15 minute), no national height datum"
    assert height.model == "egm96_15.gtx"
    assert height.model_sha256.startswith("c02a6eb7")


@pytest.mark.parametrize("code", ["EPSG:9989", "EPSG:7912", "EPSG:10177", "EPSG:10605", "EPSG:7665"])
def test_global_model_with_global_frames(code: str) -> None:
    height = height_above_geoid(
        client(code, -23.67, 133.885, epoch=EPOCH), "egm96_15.gtx", [], epoch_of_observation=EPOCH
    )
    assert height.undulation_u_m == pytest.approx((0.5**2 + 0.002**2) ** 0.5, abs=1e-12)


@pytest.mark.parametrize(
    ("code", "lat", "lon", "difference_m"),
    [("EPSG:4939", -23.67, 133.885, 0.094), ("EPSG:7931", 50.1, 8.7, -0.018)],
)
def test_global_model_with_near_frames(code: str, lat: float, lon: float, difference_m: float) -> None:
    height = height_above_geoid(client(code, lat, lon), "egm96_15.gtx", [], epoch_of_observation=EPOCH)
    assert height.undulation_u_m == pytest.approx((0.5**2 + 0.002**2 + difference_m**2) ** 0.5, abs=1e-4)


@pytest.mark.parametrize(
    ("code", "lat", "lon", "said"),
    [
        ("EPSG:6319", 39.22, -98.54, "0.994 m"),
        ("EPSG:10413", 49.9, -97.2, "0.710 m"),
        ("EPSG:4941", -25.7, 28.2, "not known"),  # Hartebeesthoek94: no route
        ("EPSG:4937", 50.1, 8.7, "ensemble"),
    ],
)
def test_global_model_refused(code: str, lat: float, lon: float, said: str) -> None:
    with pytest.raises(ReductionError, match=said) as error:
        height_above_geoid(client(code, lat, lon), "egm96_15.gtx", [], epoch_of_observation=EPOCH)
    assert error.value.code == "geoid_frame"
    assert error.value.remedy


def test_national_model_only_with_its_frame(tmp_path: Path) -> None:
    name = national(tmp_path, extra="u_m = 0.03\n")
    place = (-23.67, 133.885)
    height = height_above_geoid(client("EPSG:7843", *place), name, [tmp_path], epoch_of_observation=EPOCH)
    assert height.datum == "Invented datum"
    assert height.heading == "height by geoid model Invented 2027, datum Invented datum"
    assert height.undulation_m == pytest.approx(bow(3.3, 4.85), abs=1e-4)
    assert height.undulation_u_m == pytest.approx(0.03, abs=1e-3)
    for other in ("EPSG:4939", "EPSG:7912"):
        with pytest.raises(ReductionError, match="belongs to EPSG:7843") as error:
            height_above_geoid(client(other, *place, epoch=EPOCH), name, [tmp_path], epoch_of_observation=EPOCH)
        assert error.value.code == "geoid_frame"


def test_unknown_uncertainty_stays_unknown(tmp_path: Path) -> None:
    name = national(tmp_path)
    height = height_above_geoid(client("EPSG:7843", -23.67, 133.885), name, [tmp_path], epoch_of_observation=EPOCH)
    assert height.undulation_u_m is None


def test_bilinear_is_said(tmp_path: Path) -> None:
    name = national(tmp_path, extra="u_m = 0.03\n")
    height = height_above_geoid(client("EPSG:7843", -23.95, 133.45), name, [tmp_path], epoch_of_observation=EPOCH)
    assert height.heading.endswith("interpolated bilinearly")
    assert height.undulation_u_m == pytest.approx((0.03**2 + 0.0025**2) ** 0.5, abs=1e-5)


def test_no_ellipsoidal_height_no_orthometric_one() -> None:
    with pytest.raises(ReductionError) as error:
        height_above_geoid(client("EPSG:7843", -23.67, 133.885, None), "egm96_15.gtx", [], epoch_of_observation=EPOCH)
    assert error.value.code == "no_ellipsoidal_height"


def test_geotiff_by_proj(tmp_path: Path) -> None:
    """Values by PROJ; six points where the nodes are known, bilinear near the edge, there with unknown uncertainty."""
    write_geotiff(tmp_path / "nat.tif", plane(), north=-24.0 + 0.8, west=133.4, step=0.1)
    record = 'name = "Invented 2027"\nkind = "national"\nframe = "EPSG:7843"\nu_m = 0.03\n'
    (tmp_path / "nat.toml").write_text(record, encoding="utf-8")
    model = find_model("nat.tif", [tmp_path])
    node = undulation_at(model, -23.6, 133.9)
    assert node.value_m == pytest.approx(bow(4, 5), abs=1e-5)
    assert node.method == "six-point Lagrange"
    inner = undulation_at(model, -23.57, 133.94)
    assert inner.value_m == pytest.approx(bow(4.3, 5.4), abs=1e-5)
    assert inner.value_m != pytest.approx(undulation_by_proj(model.path, -23.57, 133.94), abs=0.0005)
    height = height_above_geoid(client("EPSG:7843", -23.6, 133.45), "nat.tif", [tmp_path], epoch_of_observation=EPOCH)
    assert height.undulation_m == pytest.approx((bow(4, 0) + bow(4, 1)) / 2, abs=1e-5)
    assert height.undulation_u_m is None
    assert "bilinearly" in height.heading
    (tmp_path / "nat.toml").write_text(record + "interpolation_u_m = 0.004\n", encoding="utf-8")
    height = height_above_geoid(client("EPSG:7843", -23.6, 133.45), "nat.tif", [tmp_path], epoch_of_observation=EPOCH)
    assert height.undulation_u_m == pytest.approx(0.0303, abs=1e-4)
    with pytest.raises(ReductionError) as error:
        undulation_at(model, 10.0, 10.0)
    assert error.value.code == "geoid_no_value"


@pytest.mark.parametrize("area", [False, True], ids=["point", "area"])
@pytest.mark.parametrize("order", ["<", ">"], ids=["II", "MM"])
def test_nodes_of_a_geotiff_are_where_proj_sees_them(tmp_path: Path, area: bool, order: str) -> None:
    """Read as area when it is point shifts half a cell: here 0.05 degree, 0.2 m on this plane."""
    west, north = 133.4, -23.2
    half = 0.05 if area else 0.0
    path = write_geotiff(
        tmp_path / "nat.tif", plane(), north=north + half, west=west - half, step=0.1, area=area, order=order
    )
    layout = geotiff_layout(path)
    assert layout is not None
    assert layout.bounds == pytest.approx((-24.0, 133.4, -23.2, 134.4), abs=1e-9)
    (tmp_path / "nat.toml").write_text('name = "I"\nkind = "national"\nframe = "EPSG:7843"\n', encoding="utf-8")
    found = undulation_at(find_model("nat.tif", [tmp_path]), -23.57, 133.94)
    assert (found.method, found.value_m) == ("six-point Lagrange", pytest.approx(bow(4.3, 5.4), abs=1e-5))


def test_a_layout_that_is_not_proj_s_is_not_used(tmp_path: Path) -> None:
    """Half a cell off, as if the point flag were ignored: the bilinear check notices and PROJ's own value stands."""
    path = write_geotiff(tmp_path / "nat.tif", plane(), north=-23.2, west=133.4, step=0.1)
    layout = geotiff_layout(path)
    assert layout is not None
    shifted = replace(layout, west_deg=layout.west_deg + 0.05, south_deg=layout.south_deg + 0.05)
    bilinear = undulation_by_proj(path, -23.57, 133.94)

    def sample(lats: np.ndarray, lons: np.ndarray) -> np.ndarray:
        return undulations_by_proj(path, lats, lons)

    assert six_point(layout, sample, -23.57, 133.94, bilinear) is not None
    assert six_point(shifted, sample, -23.57, 133.94, bilinear) is None


@pytest.mark.parametrize("cut", [0, 4, 9, 40, 120, 200])
def test_a_torn_geotiff_has_no_layout_and_no_crash(tmp_path: Path, cut: int) -> None:
    path = write_geotiff(tmp_path / "nat.tif", plane(), north=-23.2, west=133.4, step=0.1)
    path.write_bytes(path.read_bytes()[:cut])
    assert geotiff_layout(path) is None
