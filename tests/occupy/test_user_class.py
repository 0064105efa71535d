"""A field test of the user's own receiver goes into the occupation when it begins, and stays there."""

from __future__ import annotations

from pathlib import Path

import pytest
from recorded_samples import record_into

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.errors import UsageError
from fieldbook.settings import user

OWN = """
[class."DR2-0417"]
horizontal_m = 0.005
vertical_m = 0.010
correlation_s = 150
accept_quality = [4]
source = "own field test (invented)"
"""


@pytest.fixture
def settings_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """The user's settings in a folder of the test."""
    path = tmp_path / "fieldbook.toml"
    monkeypatch.setattr(user, "user_file", lambda: path)
    return path


def test_the_class_is_frozen_into_the_occupation(short_session: Path, tmp_path: Path, settings_file: Path) -> None:
    settings_file.write_text(OWN, encoding="utf-8")
    book = tmp_path / "own.book"
    record_into(book, short_session)
    settings_file.unlink()
    with Book.open(book, clock=SystemClock()) as opened:
        fix_class = opened.state().occupations[1].session.receiver.fix_class
    assert fix_class is not None
    assert fix_class.horizontal_m == 0.005
    assert "own field test" in fix_class.source
    assert "user settings" in fix_class.source


def test_without_settings_nothing_is_added(short_session: Path, tmp_path: Path, settings_file: Path) -> None:
    book = tmp_path / "none.book"
    record_into(book, short_session)
    with Book.open(book, clock=SystemClock()) as opened:
        assert opened.state().occupations[1].session.receiver.fix_class is None


def test_wrong_settings_refuse_before_anything_is_written(
    short_session: Path, tmp_path: Path, settings_file: Path
) -> None:
    settings_file.write_text(OWN.replace("vertical_m", "vertcal_m"), encoding="utf-8")
    book = tmp_path / "wrong.book"
    with pytest.raises(UsageError, match="vertcal_m"):
        record_into(book, short_session)
    assert not book.exists()
