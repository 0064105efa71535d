"""`fieldbook frames add`: each in a process of its own, as a folder once added stays on PROJ's search path."""

from __future__ import annotations

import hashlib
import json
import subprocess
import sys
from pathlib import Path

import pytest
from invented_geoid import ntv2

ROOT = Path(__file__).parents[2]
NAME = "touhokutaiheiyouoki2011.gsb"  # the name that EPSG gives the grid of JGD2000 to JGD2011; this one is invented
ENDS = ("--from", "EPSG:4947", "--to", "EPSG:6667", "--source", "nobody")


@pytest.fixture
def call(tmp_path: Path, monkeypatch: pytest.MonkeyPatch):
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))

    def run(*arguments: object) -> subprocess.CompletedProcess[str]:
        return subprocess.run(
            [sys.executable, "-m", "fieldbook", *map(str, arguments)],
            cwd=ROOT,
            capture_output=True,
            text=True,
            check=False,
        )

    return run


def test_add_and_use(tmp_path: Path, call) -> None:
    path = tmp_path / NAME
    path.write_bytes(ntv2(37.0, 39.0, 140.0, 141.5, 0.1))
    before = json.loads(call("frames", "show", "EPSG:4947", "EPSG:6667", "--at", "37.95 140.55", "--json").stdout)
    assert before["pair"]["missing_grids"] == [NAME]
    said = call("frames", "add", path, *ENDS, "--json")
    assert said.returncode == 0, said.stderr
    grid = json.loads(said.stdout)["grid"]
    assert grid["format"] == "NTv2"
    assert grid["bounds_deg"] == pytest.approx([37.0, 140.0, 39.0, 141.5])
    assert grid["step_deg"] == pytest.approx([0.1, 0.1])
    assert grid["sha256"] == hashlib.sha256(path.read_bytes()).hexdigest()
    assert len(grid["used_by"]) == 1
    after = json.loads(call("frames", "show", "EPSG:4947", "EPSG:6667", "--at", "37.95 140.55", "--json").stdout)
    assert after["pair"]["missing_grids"] == []
    assert after["pair"]["operation"] is not None
    assert f"{NAME}: EPSG:4947 to EPSG:6667" in call("frames", "grids").stdout


def test_a_grid_beside_a_book_is_the_books(tmp_path: Path, call) -> None:
    """Seen with that book and not without it."""
    job, path = tmp_path / "job", tmp_path / NAME
    job.mkdir()
    path.write_bytes(ntv2(37.0, 39.0, 140.0, 141.5, 0.1))
    book = job / "any.book"
    text = (ROOT / "tests" / "settings" / "contract_sample.toml").read_text(encoding="utf-8")
    for old, new in (
        ('receiver = "EPSG:7912"', 'receiver = "EPSG:4947"'),
        ('client = "EPSG:7843"', 'client = "EPSG:6667"'),
        ('grid = "EPSG:7855"', ""),
        ('geoid = "egm96_15.gtx"', ""),
        ('name = "KR-07"', 'name = "KR-07"\napproximate = { lat_deg = 37.95, lon_deg = 140.55 }'),
    ):
        assert old in text, old
        text = text.replace(old, new, 1)
    (job / "session.toml").write_text(text, encoding="utf-8")
    made = call("new", book, "--from", job / "session.toml")
    assert made.returncode == 0, made.stderr
    assert json.loads(call("frames", "show", "--book", book, "--json").stdout)["pair"]["missing_grids"] == [NAME]
    assert call("frames", "add", path, *ENDS, "--book", book).returncode == 0
    shown = json.loads(call("frames", "show", "--book", book, "--json").stdout)["pair"]
    assert shown["missing_grids"] == []
    assert shown["operation"] is not None
    without = call("frames", "show", "EPSG:4947", "EPSG:6667", "--at", "37.95 140.55", "--json")
    assert json.loads(without.stdout)["pair"]["missing_grids"] == [NAME]


def test_a_grid_proj_does_not_look_for_says_so(tmp_path: Path, call) -> None:
    path = tmp_path / "other.gsb"
    path.write_bytes(ntv2(37.0, 39.0, 140.0, 141.5, 0.1))
    said = call("frames", "add", path, *ENDS)
    assert said.returncode == 0, said.stderr
    assert f"it looks for {NAME}" in said.stdout


@pytest.mark.parametrize(
    ("name", "cut", "arguments", "code", "words"),
    [
        (NAME, 200, ENDS, 5, "cut off"),
        (NAME, 1000, ENDS, 5, "asks for"),
        (NAME, 0, ENDS, 5, "no usable grid"),
        ("a.isg", None, ENDS, 2, "no grid this can look into"),
        ("a,b.gsb", None, ENDS, 2, "comma"),
        (NAME, None, (*ENDS[:2], "--to", "EPSG:1", "--source", "x"), 2, "EPSG:1"),
        (NAME, None, ENDS[2:], 2, "--from"),
        (NAME, None, ENDS[:4], 2, "--source"),
    ],
)
def test_what_is_refused(
    tmp_path: Path, call, name: str, cut: int | None, arguments: tuple[str, ...], code: int, words: str
) -> None:
    content = ntv2(37.0, 39.0, 140.0, 141.5, 0.1)
    (tmp_path / name).write_bytes(content if cut is None else content[:cut])
    said = call("frames", "add", tmp_path / name, *arguments)
    assert said.returncode == code, said.stderr
    assert words in said.stderr
    folder = tmp_path / "config" / "fieldbook" / "grids"
    assert not folder.exists() or list(folder.iterdir()) == []
