"""`fieldbook geoid`, and the book that names its file: another one of the same name is refused until a decision takes it."""

from __future__ import annotations

import hashlib
import shutil
from pathlib import Path

import pytest
from invented_geoid import bow, plane, write_geotiff, write_gtx
from recorded_samples import SAMPLES

NATIONAL = (
    "--name",
    "Invented Geoid 2027",
    "--kind",
    "national",
    "--frame",
    "EPSG:7843",
    "--u-m",
    "0.03",
    "--u-source",
    "invented",
)


@pytest.fixture(autouse=True)
def own_grids(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    folder = tmp_path / "user"
    monkeypatch.setattr("fieldbook.settings.grids.user_folder", lambda: folder)
    return folder / "grids"


@pytest.fixture
def model(tmp_path: Path) -> Path:
    """Covers the samples' marks at -34.27, 146.05; 0.1 degree."""
    (tmp_path / "received").mkdir()
    return write_gtx(tmp_path / "received" / "invented.gtx", plane(), south=-34.7, west=145.5, step=0.1)


def test_add_list_show(model: Path, own_grids: Path, fieldbook) -> None:
    said = fieldbook("geoid", "add", model, *NATIONAL, "--vertical-datum", "EPSG:5711", "--source", "nobody")
    assert said.code == 0, said.err
    assert (own_grids / "invented.gtx").read_bytes() == model.read_bytes()
    assert "latitude -34.7 to -33.9, longitude 145.5 to 146.5, every 6′" in said.out
    listed = fieldbook("geoid", "list", "--json").json["models"]
    assert [item["file"] for item in listed] == ["invented.gtx", "egm96_15.gtx"]
    assert listed[0]["sha256"] == hashlib.sha256(model.read_bytes()).hexdigest()
    assert listed[0]["frame"] == "EPSG:7843"
    assert listed[1]["step_deg"] == [0.25, 0.25]
    shown = fieldbook("geoid", "show", "invented.gtx", "--at", "-34.27 145.94", "--json").json["model"]
    assert shown["at"]["undulation_m"] == pytest.approx(bow(4.3, 4.4), abs=1e-4)
    assert shown["at"]["method"] == "six-point Lagrange"
    text = fieldbook("geoid", "show", "invented.gtx").out
    assert "Invented Geoid 2027 (national)" in text
    assert "0.03 m; invented" in text
    assert "every 15′" in fieldbook("geoid", "list").out


def test_a_record_beside_the_file_is_taken(model: Path, own_grids: Path, fieldbook) -> None:
    record = 'name = "Invented"\nkind = "national"\nframe = "EPSG:7843"\n'
    model.with_suffix(".toml").write_text(record, encoding="utf-8")
    assert fieldbook("geoid", "add", model).code == 0
    assert (own_grids / "invented.toml").read_text(encoding="utf-8") == record
    again = fieldbook("geoid", "add", model)
    assert again.code == 2
    assert "--replace" in again.err
    assert fieldbook("geoid", "add", model, "--replace").code == 0


def test_beside_a_book(model: Path, own_grids: Path, tmp_path: Path, fieldbook) -> None:
    book = tmp_path / "job" / "ridge.book"
    book.parent.mkdir()
    assert fieldbook("geoid", "add", model, *NATIONAL, "--book", book).code == 0
    assert (tmp_path / "job" / "grids" / "invented.gtx").is_file()
    assert not own_grids.exists()
    assert "invented.gtx" in fieldbook("geoid", "list", "--book", book).out
    assert "invented.gtx" not in fieldbook("geoid", "list").out


def test_geotiff(tmp_path: Path, own_grids: Path, fieldbook) -> None:
    path = write_geotiff(tmp_path / "invented.tif", plane(), north=-33.9, west=145.5, step=0.1)
    assert fieldbook("geoid", "add", path, *NATIONAL).code == 0
    shown = fieldbook("geoid", "show", "invented.tif", "--at", "-34.27 145.94", "--json").json["model"]
    assert shown["at"]["method"] == "six-point Lagrange"
    assert shown["at"]["undulation_m"] == pytest.approx(bow(4.3, 4.4), abs=1e-4)


@pytest.mark.parametrize(
    ("name", "content", "arguments", "code", "words"),
    [
        ("a.gtx", b"<!DOCTYPE html>" * 9, NATIONAL, 5, "not a usable GTX"),
        ("a.tif", b"<!DOCTYPE html>" * 9, NATIONAL, 5, "no GeoTIFF grid"),
        ("a.byn", b"x", NATIONAL, 2, "neither a GTX nor a GeoTIFF"),
        ("a.gtx", None, (), 2, "Nothing is known of"),
        ("a.gtx", None, ("--name", "X", "--kind", "national"), 5, "frame is missing"),
        ("a.gtx", None, ("--name", "X", "--kind", "national", "--frame", "EPSG:1"), 2, "EPSG:1"),
        ("a.gtx", None, (*NATIONAL[:-4], "--u-m", "-1"), 5, "no uncertainty"),
    ],
)
def test_what_is_refused_leaves_nothing_behind(
    model: Path,
    own_grids: Path,
    tmp_path: Path,
    fieldbook,
    name: str,
    content: bytes | None,
    arguments: tuple[str, ...],
    code: int,
    words: str,
) -> None:
    path = tmp_path / name
    path.write_bytes(model.read_bytes() if content is None else content)
    said = fieldbook("geoid", "add", path, *arguments)
    assert said.code == code, said.err
    assert words in said.err
    assert not own_grids.exists() or list(own_grids.iterdir()) == []


# --- the book names its file --------------------------------------------------------------------------------------


@pytest.fixture
def job(tmp_path: Path, model: Path, fieldbook) -> Path:
    """The second sample with the invented national model of the client's frame, beside the session."""
    folder = tmp_path / "job"
    folder.mkdir()
    shutil.copy(SAMPLES / "kestrel-ridge-2" / "receiver.nmea.gz", folder)
    text = (SAMPLES / "kestrel-ridge-2" / "session.toml").read_text(encoding="utf-8")
    assert 'geoid = "egm96_15.gtx"' in text
    (folder / "session.toml").write_text(text.replace("egm96_15.gtx", "invented.gtx"), encoding="utf-8")
    assert fieldbook("geoid", "add", model, *NATIONAL, "--book", folder / "ridge.book").code == 0
    assert fieldbook("observe", folder / "ridge.book", "--session", folder / "session.toml").code == 0
    return folder


def other(job: Path, name: str = "invented") -> str:
    """Another edition under the same name, 50 mm higher; its hash."""
    path = write_gtx(job / "grids" / f"{name}.gtx", plane() + 0.05, south=-34.7, west=145.5, step=0.1)
    record = path.with_suffix(".toml")
    rows = [row for row in record.read_text(encoding="utf-8").splitlines() if not row.startswith("sha256")]
    record.write_text("\n".join(rows) + "\n", encoding="utf-8")
    return hashlib.sha256(path.read_bytes()).hexdigest()


def test_another_file_is_refused_until_a_decision_takes_it(job: Path, model: Path, own_grids: Path, fieldbook) -> None:
    book = job / "ridge.book"
    first = fieldbook("reduce", book, "--json").json["reductions"][0]["height"]
    assert first["model_sha256"] == hashlib.sha256(model.read_bytes()).hexdigest()
    sha256 = other(job)
    refused = fieldbook("reduce", book, "--json")
    assert refused.code == 5
    error = refused.json["failed"][0]["error"]
    assert error["code"] == "grid_other"
    assert f"grid_file={sha256}" in error["remedy"]
    decision = ("entry", book, "decision", "--by", "R. Kell", "--set", "reason=edition 2 of the model")
    assert "64 hex digits" in fieldbook(*decision, "--set", "grid_file=abc").err
    assert fieldbook(*decision, "--set", f"grid_file={sha256}").code == 0
    second = fieldbook("reduce", book, "--json").json["reductions"][0]["height"]
    assert second["model_sha256"] == sha256
    assert second["undulation_m"] == pytest.approx(first["undulation_m"] + 0.05, abs=1e-4)
    out = job / "KR-07.txt"
    assert fieldbook("certify", book, "KR-07", "--out", out, "--sign-off", "A. Surveyor; licence 1").code == 0
    assert sha256 in "".join(out.read_text(encoding="utf-8").split())


def test_the_file_meant_is_found_in_another_folder(job: Path, model: Path, own_grids: Path, fieldbook) -> None:
    """The user's own folder still holds the edition meant: it is taken, though the book's folder comes first."""
    other(job)
    assert fieldbook("geoid", "add", model, *NATIONAL).code == 0
    reduced = fieldbook("reduce", job / "ridge.book", "--json").json["reductions"][0]
    assert reduced["height"]["model_sha256"] == hashlib.sha256(model.read_bytes()).hexdigest()


def test_a_model_of_another_frame_is_refused(job: Path, model: Path, fieldbook) -> None:
    """GDA94 heights lie 9 cm above GDA2020 ones (GDA2020 technical manual, 6.3.3.1): a model belongs to one of them."""
    record = job / "grids" / "invented.toml"
    record.write_text(record.read_text(encoding="utf-8").replace("EPSG:7843", "EPSG:4939"), encoding="utf-8")
    failed = fieldbook("reduce", job / "ridge.book", "--json")
    assert failed.code == 5
    assert failed.json["failed"][0]["error"]["code"] == "geoid_frame"


def test_a_model_of_another_frame_is_refused_before_the_first_byte(job: Path, fieldbook) -> None:
    record = job / "grids" / "invented.toml"
    record.write_text(record.read_text(encoding="utf-8").replace("EPSG:7843", "EPSG:4939"), encoding="utf-8")
    for arguments in (("observe", job / "b.book", "--session"), ("new", job / "b.book", "--from")):
        said = fieldbook(*arguments, job / "session.toml")
        assert said.code == 2
        assert "belongs to EPSG:4939" in said.err
        assert not (job / "b.book").exists()


def test_a_session_that_named_no_hash_is_held_to_its_first_certificate(job: Path, fieldbook) -> None:
    """As in books of older versions: the `operation` entry of the certificate names the file."""
    book = job / "ridge.book"
    text = (job / "session.toml").read_text(encoding="utf-8").replace("invented.gtx", "late.gtx")
    (job / "session.toml").write_text(text, encoding="utf-8")
    book.unlink()
    assert fieldbook("observe", book, "--session", job / "session.toml").code == 0
    for ending in (".gtx", ".toml"):
        (job / "grids" / f"invented{ending}").rename(job / "grids" / f"late{ending}")
    assert fieldbook("reduce", book).code == 0
    assert fieldbook("certify", book, "KR-07", "--out", job / "a.txt", "--sign-off", "A. Surveyor; licence 1").code == 0
    other(job, "late")
    assert fieldbook("reduce", book, "--json").json["failed"][0]["error"]["code"] == "grid_other"
