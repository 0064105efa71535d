"""What several parts of the tests share: the sample occupations as ended books, recorded once per run."""

from __future__ import annotations

import os
import shutil
import signal
import sys
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest
from recorded_samples import SAMPLE_NAMES, SAMPLES, record_into

if signal.getsignal(signal.SIGINT) is signal.SIG_IGN:
    # a run in the background of a shell has Ctrl+C ignored, and would hand that on to every program that a test interrupts
    signal.signal(signal.SIGINT, signal.default_int_handler)


@pytest.fixture(autouse=True)
def proj_search_path() -> Iterator[None]:
    """Grid folders of one test are not searched in the next: PROJ keeps them for the whole process.

    With two of them on its path the `+init=` of the published plate models, which only tests use, is no longer found.
    """
    yield
    module = sys.modules.get("fieldbook.reduce.frames.gridfiles")
    if module is not None and module._known:
        from pyproj import datadir

        datadir.set_data_dir(datadir.get_data_dir().partition(os.pathsep)[0])
        module._known.clear()
        module.forget_offers()


@pytest.fixture(scope="session")
def sample_books(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Path]:
    """The two sample books, two ended occupations each. Read only: copy one before changing it."""
    folder = tmp_path_factory.mktemp("sample_books")
    books = {"kestrel-ridge": folder / "kestrel-ridge.book", "saltpan": folder / "saltpan.book"}
    for name in SAMPLE_NAMES:
        record_into(books[name.rpartition("-")[0]], SAMPLES / name / "session.toml")
    return books


@pytest.fixture(scope="session")
def short_session(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A session whose file holds the first two minutes of the first sample."""
    folder = tmp_path_factory.mktemp("short_session")
    shutil.copy(SAMPLES / "kestrel-ridge-1" / "session.toml", folder)
    lines = (SAMPLES / "kestrel-ridge-1" / "receiver.nmea").read_bytes().splitlines(keepends=True)
    (folder / "receiver.nmea").write_bytes(b"".join(lines[:1000]))
    return folder / "session.toml"


@pytest.fixture
def run_fieldbook(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> Callable[..., Any]:
    """Run one command line in this process: (exit code, stdout, stderr)."""
    from fieldbook.commands import run

    def call(*arguments: object) -> tuple[int, str, str]:
        capsys.readouterr()
        code = run([str(item) for item in arguments])
        out = capsys.readouterr()
        return code, out.out, out.err

    return call


@pytest.fixture(autouse=True)
def no_settings_of_the_user(tmp_path_factory: pytest.TempPathFactory, monkeypatch: pytest.MonkeyPatch) -> None:
    """Tests must not depend on who runs them."""
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path_factory.getbasetemp() / "no-settings"))
