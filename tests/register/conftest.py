"""A small book of two short occupations, recorded once, and calls of `fieldbook`."""

from __future__ import annotations

import shutil
from collections.abc import Iterator
from pathlib import Path

import pytest
from recorded_samples import record_into
from said import Call, caller

from fieldbook.clock import SystemClock
from fieldbook.register.evidence import Evidence
from fieldbook.register.from_book import read_book
from fieldbook.register.store import Register

from .made import new_register


@pytest.fixture
def run_fieldbook(capsys: pytest.CaptureFixture[str]) -> Call:
    """Call a command in this process."""
    return caller(capsys)


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
