"""What the tests of the commands share: a session file, invented sentences, and a way to call `fieldbook`."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest

from fieldbook import commands

SAMPLE = Path(__file__).parents[1] / "settings" / "contract_sample.toml"


@dataclass
class Said:
    """What a command said."""

    code: int
    out: str
    err: str

    @property
    def json(self) -> Any:
        """stdout as JSON."""
        return json.loads(self.out)


Call = Callable[..., Said]


@pytest.fixture
def fieldbook(capsys: pytest.CaptureFixture[str]) -> Call:
    """Call a command in this process."""

    def call(*arguments: object) -> Said:
        capsys.readouterr()
        code = commands.run([str(argument) for argument in arguments])
        captured = capsys.readouterr()
        return Said(code, captured.out, captured.err)

    return call


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
