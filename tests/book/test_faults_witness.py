"""The benchmark of faults can see a loss: its witness counts what is missing or changed, its power cut spares what was synced."""

from __future__ import annotations

import importlib
import random
import sys
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
import small_books as small

pytestmark = pytest.mark.skipif(sys.platform == "win32", reason="not run: pseudo-terminals missing")


@pytest.fixture
def part(monkeypatch: pytest.MonkeyPatch) -> Any:
    """A part of the benchmark, by its name."""
    monkeypatch.syspath_prepend(str(Path(__file__).parents[1] / "benchmarks"))
    return importlib.import_module


def test_an_epoch_that_is_missing_or_changed_is_lost(tmp_path: Path, part: Any) -> None:
    rig = part("faults_rig")
    path = tmp_path / "a.book"
    with small.begun(path) as book:
        small.record(book, 1, 1, 20)
    seen = [small.epoch(number) for number in range(1, 21)]
    assert rig.lost(path, {1: seen}) == 0
    assert rig.lost(path, {1: [*seen, small.epoch(21)]}) == 1
    assert rig.lost(path, {1: [*seen[:4], replace(seen[4], satellites=3), *seen[5:]]}) == 1
    assert rig.lost(path, {2: seen}) == 20


def test_a_power_cut_keeps_what_was_synced_and_no_more_for_sure(tmp_path: Path, part: Any) -> None:
    power = part("faults_power")
    pieces = [bytes([number]) * 1000 for number in range(1, 7)]
    writes = [power.Write("W", number, 1000 * number, "x", piece) for number, piece in enumerate(pieces)]
    writes.insert(3, power.Write("S", 3, 0, "x", b""))
    left = set()
    for seed in range(40):
        folder = tmp_path / str(seed)
        folder.mkdir()
        power._replay(writes, folder, random.Random(seed))
        data = (folder / "x").read_bytes()
        assert data.startswith(b"".join(pieces[:3]))
        left.add(data)
    assert len(left) > 8, "what was not synced is cut in many ways"
