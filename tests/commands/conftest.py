"""What the tests of the commands share: a session file, invented sentences, and a way to call `fieldbook`."""

from __future__ import annotations

from pathlib import Path

import pytest
from said import Call, caller

SAMPLE = Path(__file__).parents[1] / "settings" / "contract_sample.toml"


@pytest.fixture
def fieldbook(capsys: pytest.CaptureFixture[str]) -> Call:
    """Call a command in this process."""
    return caller(capsys)


@pytest.fixture
def session(tmp_path: Path) -> Path:
    """The contract's sample session with its link on receiver.nmea beside it."""
    path = tmp_path / "session.toml"
    path.write_text(SAMPLE.read_text(encoding="utf-8"), encoding="utf-8")
    return path


@pytest.fixture
def book(tmp_path: Path, session: Path, fieldbook: Call) -> Path:
    """A new book of that session."""
    path = tmp_path / "job.book"
    assert fieldbook("new", path, "--from", session).code == 0
    return path
