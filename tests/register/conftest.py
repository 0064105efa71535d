"""A small book of two short occupations, recorded once, and calls of `fieldbook`."""

from __future__ import annotations

import json
import shutil
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import pytest
from recorded_samples import record_into

from fieldbook import commands
from fieldbook.clock import SystemClock
from fieldbook.register.evidence import Evidence
from fieldbook.register.from_book import read_book
from fieldbook.register.store import Register

from .made import new_register


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
def run_fieldbook(capsys: pytest.CaptureFixture[str]) -> Call:
    """Call a command in this process."""

    def call(*arguments: object) -> Said:
        capsys.readouterr()
        code = commands.run([str(argument) for argument in arguments])
        captured = capsys.readouterr()
        return Said(code, captured.out, captured.err)

    return call


@pytest.fixture(scope="session")
def short_book(tmp_path_factory: pytest.TempPathFactory, short_session: Path) -> Path:
    """One ended occupation of two minutes on KR-07. Read only: copy it before changing it."""
    path = tmp_path_factory.mktemp("short_book") / "short.book"
    record_into(path, short_session)
    return path


@pytest.fixture
def book(short_book: Path, tmp_path: Path) -> Path:
    """A copy of the short book that may be changed."""
    return Path(shutil.copy(short_book, tmp_path / "party.book"))


@pytest.fixture(scope="session")
def base(sample_books: dict[str, Path]) -> Evidence:
    """The evidence of the first occupation of the first sample, as a register keeps it."""
    read = read_book(sample_books["kestrel-ridge"], SystemClock())
    return read.occupations[0][0]


@pytest.fixture
def register(tmp_path: Path) -> Iterator[Register]:
    """An empty register, open for writing."""
    with new_register(tmp_path / "office.register") as made:
        yield made
