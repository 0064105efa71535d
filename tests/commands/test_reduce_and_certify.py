"""`reduce`, `certify`, `verify` and `demo` as a script sees them: keys, exit codes, refusals that write nothing."""

from __future__ import annotations

import json
import math
import shutil
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

Run = Callable[..., tuple[int, str, str]]

# contract, section 3: the keys of R and of its parts, in full
R_KEYS = {
    "mark", "occupation", "open", "ended_by", "started", "ended", "heard_from", "heard_to", "kept_s", "epochs",
    "initialisations", "receiver", "client", "grid", "height", "antenna", "uncertainty", "uncertainty_client",
    "operation", "findings", "leave",
}  # fmt: skip
PART_KEYS = {
    "epochs": {"heard", "kept", "without_height", "set_aside"},
    "receiver": {"frame", "epoch", "lat_deg", "lon_deg", "h_m"},
    "client": {"frame", "epoch", "lat_deg", "lon_deg", "h_m", "x_m", "y_m", "z_m"},
    "grid": {
        "crs", "easting_m", "northing_m", "convergence_deg", "scale_factor", "elevation_factor", "combined_factor",
    },
    "height": {
        "model", "model_sha256", "model_frame", "datum", "undulation_m", "undulation_u_m", "orthometric_m",
        "vertical95_m",
    },
    "antenna": {"height_arp_m", "height_u_m", "reported_point", "readings"},
    "uncertainty": {
        "u_enu_m", "cov_en_m2", "dof_enu", "k95_enu", "ellipse95", "horizontal95_m", "vertical95_m",
        "correlation_time_s", "governed_by", "method", "budget",
    },
    "operation": {"name", "steps", "coordinate_epoch", "area_ok", "grids"},
    "leave": {"verdict", "lines"},
}  # fmt: skip


@pytest.fixture
def book(sample_books: dict[str, Path], tmp_path: Path) -> Path:
    """A private copy of the first sample book."""
    path = tmp_path / "kestrel-ridge.book"
    shutil.copy(sample_books["kestrel-ridge"], path)
    return path


def test_reduce_json_holds_every_key_of_the_contract(book: Path, run_fieldbook: Run) -> None:
    code, out, _ = run_fieldbook("reduce", book, "--json")
    assert code == 0
    tree = json.loads(out)
    assert tree["schema"] == "fieldbook.reduce/1"
    assert set(tree) >= {"schema", "program", "book", "reductions", "failed"}
    assert set(tree["program"]) == {"version", "proj", "epsg"}
    assert set(tree["book"]) == {"id", "path", "head"}
    for reduction in tree["reductions"]:
        assert set(reduction) >= R_KEYS
        for part, keys in PART_KEYS.items():
            assert set(reduction[part]) >= keys, part
        assert "common" in reduction["uncertainty_client"]
        for line in reduction["uncertainty"]["budget"]:
            assert set(line) >= {"source", "type", "distribution", "u_enu_m", "dof", "common"}
        for step in reduction["operation"]["steps"]:
            assert set(step) >= {"authority", "code", "name", "accuracy_m"}
        for line in reduction["leave"]["lines"]:
            assert set(line) >= {"line", "scope", "wanted", "have", "unit", "met", "time_to_go_s", "text"}
        for item in reduction["initialisations"]:
            assert set(item) >= {"number", "from", "to", "kept", "used", "offset_enu_m"}
        curve = reduction["convergence"]
        assert curve["horizontal95_m"][-1] == reduction["uncertainty"]["horizontal95_m"]
        assert curve["inside_since"] is not None
        epochs = reduction["epochs"]
        assert epochs["heard"] == epochs["kept"] + sum(epochs["set_aside"].values())


def test_budget_adds_up_to_the_stated_uncertainty(book: Path, run_fieldbook: Run) -> None:
    """GUM (JCGM 100:2008) 5.1.2: u_c^2 is the sum of the squares; to 1e-12 m."""
    _, out, _ = run_fieldbook("reduce", book, "--json")
    for reduction in json.loads(out)["reductions"]:
        for name in ("uncertainty", "uncertainty_client"):
            stated = reduction[name]
            for axis in range(3):
                total = math.sqrt(sum((line["u_enu_m"][axis] or 0.0) ** 2 for line in stated["budget"]))
                assert total == pytest.approx(stated["u_enu_m"][axis], abs=1e-12)


def test_client_geocentric_and_geodetic_agree(book: Path, run_fieldbook: Run) -> None:
    """x, y, z of the mark against the closed formula written here (EPSG Guidance Note 7-2, method 9602); 0.01 mm."""
    _, out, _ = run_fieldbook("reduce", book, "--json")
    client = json.loads(out)["reductions"][0]["client"]
    a, f = 6378137.0, 1 / 298.257222101
    e2 = f * (2 - f)
    lat, lon = math.radians(client["lat_deg"]), math.radians(client["lon_deg"])
    normal = a / math.sqrt(1 - e2 * math.sin(lat) ** 2)
    x = (normal + client["h_m"]) * math.cos(lat) * math.cos(lon)
    y = (normal + client["h_m"]) * math.cos(lat) * math.sin(lon)
    z = (normal * (1 - e2) + client["h_m"]) * math.sin(lat)
    assert (client["x_m"], client["y_m"], client["z_m"]) == pytest.approx((x, y, z), abs=1e-5)


def test_reduce_twice_is_the_same(book: Path, run_fieldbook: Run) -> None:
    first, second = run_fieldbook("reduce", book, "--json")[1], run_fieldbook("reduce", book, "--json")[1]
    assert first == second


def test_reduce_check_says_by_exit_code(book: Path, run_fieldbook: Run) -> None:
    assert run_fieldbook("reduce", book, "--check")[0] == 0
    code, out, err = run_fieldbook(
        "entry", book, "height", "--occupation", 1, "--set", "method=vertical", "--set", "value=1.3000",
        "--set", "unit=m", "--set", "when=after", "--by", "R. Kell",
    )  # fmt: skip
    assert code == 0, err
    code, out, _ = run_fieldbook("reduce", book, "--check")
    assert code == 1
    assert "heights_differ" in out


def test_certificate_life(book: Path, tmp_path: Path, run_fieldbook: Run) -> None:
    """Draft, certificate, the same in another format, refusal without a reason, the next number."""
    draft = tmp_path / "draft.html"
    code, out, err = run_fieldbook("certify", book, "KR-07", "--occupation", 1, "--out", draft)
    assert code == 0
    assert "draft" in out
    assert "sign-off" in err
    sign = ("--sign-off", "A. Marlow; licence 4411")
    code, out, _ = run_fieldbook(
        "certify", book, "KR-07", "--occupation", 1, "--out", tmp_path / "a.json", *sign, "--json"
    )
    assert code == 0
    first = json.loads(out)
    assert first["number"].endswith("-1")
    code, out, _ = run_fieldbook(
        "certify", book, "KR-07", "--occupation", 1, "--out", tmp_path / "a.pdf", *sign, "--json"
    )
    assert code == 0
    assert json.loads(out)["digest"] == first["digest"], "another format of the standing certificate"
    code, _, _ = run_fieldbook(
        "entry", book, "remark", "--occupation", 1, "--set", "text=plate re-checked", "--by", "R. Kell"
    )
    assert code == 0
    entries = len(json.loads(run_fieldbook("reduce", book, "--json")[1])["reductions"])
    assert entries == 2
    code, _, err = run_fieldbook("certify", book, "KR-07", "--occupation", 1, "--out", tmp_path / "b.pdf", *sign)
    assert code == 2
    assert "--supersede" in err
    assert not (tmp_path / "b.pdf").exists(), "a refusal writes nothing"
    code, out, _ = run_fieldbook(
        "certify",
        book,
        "KR-07",
        "--occupation",
        1,
        "--out",
        tmp_path / "b.pdf",
        *sign,
        "--supersede",
        "remark added",
        "--json",
    )
    assert code == 0
    second = json.loads(out)
    assert second["number"].endswith("-2")
    assert second["supersedes"] == first["number"]
    code, out, _ = run_fieldbook("verify", book, tmp_path / "a.pdf", tmp_path / "b.pdf")
    assert code == 0, out
    assert f"superseded by {second['number']}" in out.lower() or second["number"] in out


def test_occupations_that_cannot_be_combined_need_a_choice(
    sample_books: dict[str, Path], tmp_path: Path, run_fieldbook: Run
) -> None:
    path = tmp_path / "saltpan.book"
    shutil.copy(sample_books["saltpan"], path)
    code, _, err = run_fieldbook("certify", path, "SP-12", "--out", tmp_path / "x.pdf")
    assert code == 2
    assert "--occupation" in err


def test_verify_exit_codes(book: Path, tmp_path: Path, run_fieldbook: Run) -> None:
    assert run_fieldbook("verify", tmp_path / "none.book")[0] == 2
    wreck = tmp_path / "wreck.book"
    wreck.write_bytes(b"SQLite format 3\x00" + b"\x00" * 4000)
    code, out, _ = run_fieldbook("verify", wreck)
    assert code == 1
    assert "NOT" in out
    code, out, _ = run_fieldbook("verify", book, "--json")
    assert code == 0
    assert json.loads(out)["holds"] is True


@pytest.mark.slow
def test_demo_ends_with_a_certificate_for_each_mark(tmp_path: Path, run_fieldbook: Run) -> None:
    folder = tmp_path / "demo"
    code, out, err = run_fieldbook("demo", "--out", folder)
    assert code == 0, err
    for mark in ("KR-07", "SP-12"):
        for ending in ("pdf", "html", "json"):
            assert (folder / f"{mark}.{ending}").is_file()
            assert f"{mark}.{ending}" in out
    for asked in ("same name, near", "other name, near", "same name, apart", "Occupations disagree"):
        assert asked in out.partition("The office's register of both parties")[2]
    assert run_fieldbook("verify", folder / "office.register", folder / "northgate.book")[0] == 0
    code, _, err = run_fieldbook("demo", "--out", folder)
    assert code == 2
    assert "not empty" in err


def finite(tree: Any) -> bool:
    """No NaN, no infinity anywhere."""
    if isinstance(tree, dict):
        return all(finite(value) for value in tree.values())
    if isinstance(tree, list):
        return all(finite(value) for value in tree)
    return not isinstance(tree, float) or math.isfinite(tree)


def test_numbers_are_finite_or_null(sample_books: dict[str, Path], run_fieldbook: Run) -> None:
    for path in sample_books.values():
        assert finite(json.loads(run_fieldbook("reduce", path, "--json")[1]))
