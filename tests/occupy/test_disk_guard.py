"""Room on the disk: warned of in time, and a recorder that stops while everything can still be committed."""

from __future__ import annotations

import json
import shutil
from collections import namedtuple
from collections.abc import Callable
from pathlib import Path

import pytest

from fieldbook.book.store import Book
from fieldbook.clock import FakeClock, SystemClock
from fieldbook.occupy import disk_guard
from fieldbook.occupy.disk_guard import LOW_BYTES, RESERVE_BYTES, DiskGuard, room_of

SAMPLE = Path(__file__).parents[1] / "settings" / "contract_sample.toml"
GIGA = 10**9
Usage = namedtuple("Usage", "total used free")


def test_thresholds() -> None:
    assert not room_of(500 * GIGA, 10 * GIGA, 1000.0).low
    two_hours = RESERVE_BYTES + 7200 * 100_000
    assert not room_of(500 * GIGA, two_hours, 100_000.0).low
    assert room_of(500 * GIGA, two_hours - 200_000, 100_000.0).low
    assert room_of(500 * GIGA, LOW_BYTES - 1, 200.0).low
    assert not room_of(500 * GIGA, RESERVE_BYTES + 1, 200.0).spent
    assert room_of(500 * GIGA, RESERVE_BYTES, 200.0).spent
    assert not room_of(3_000_000, 100_000, 200.0).spent  # a small disk has a small reserve
    assert room_of(3_000_000, 60_000, 200.0).spent
    assert not room_of(3_000_000, 7_000, 200.0).spent  # too late to close: wait


def test_the_rate_is_measured(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    clock = FakeClock()
    monkeypatch.setattr(disk_guard.shutil, "disk_usage", lambda _path: Usage(500 * GIGA, 0, RESERVE_BYTES + 36_000_000))
    guard = DiskGuard(tmp_path / "a.book", clock)
    first = guard.look(0)
    clock.advance(100_000)
    later = guard.look(1_000_000)  # 10 kB a second
    assert first is not None
    assert later is not None
    assert later.seconds == pytest.approx(3600)
    assert later.low
    assert "1.0 h" in later.text


@pytest.mark.slow
def test_a_recorder_stops_cleanly_and_goes_on_later(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, run_fieldbook: Callable[..., tuple[int, str, str]]
) -> None:
    book, live = tmp_path / "a.book", ("--session", SAMPLE, "--link", "sim:rtk?seed=7", "--json")
    monkeypatch.setattr(shutil, "disk_usage", lambda _path: Usage(500 * GIGA, 0, RESERVE_BYTES - 1))
    code, out, _ = run_fieldbook("observe", book, *live)
    assert code == 4
    assert json.loads(out)["error"]["code"] == "disk_low"
    with Book.open(book, clock=SystemClock()) as opened:
        state, heard = opened.state(), opened.recorder_state()
        assert state.open_occupation is not None
        assert [entry.body["state"] for entry in opened.entries() if entry.kind == "recorder"] == ["running", "closed"]
        assert any(entry.kind == "alarm" and entry.body["code"] == "disk_low" for entry in opened.entries())
    assert heard is not None
    assert "recording stopped, everything is committed" in heard.stopped
    code, out, _ = run_fieldbook("watch", book, "--count", 1)
    assert "recorder stopped" in out
    monkeypatch.undo()
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "none"))
    code, out, _ = run_fieldbook("observe", book, *live, "--for", "1s")
    assert code == 0
    assert json.loads(out)["resumed"]
