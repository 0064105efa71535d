"""Ten megabytes of noise around one sound sentence, recorded as a book: all of it kept, nothing made of it."""

from __future__ import annotations

import hashlib
import random
import tracemalloc
from pathlib import Path

import pytest

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.commands import run

from .victims import holds, record_into, sample

SIZE = 10 * 1024 * 1024


@pytest.mark.slow
def test_ten_megabytes_of_noise_are_kept_to_the_byte(tmp_path: Path) -> None:
    session = sample("kestrel-ridge-1", tmp_path, 8)
    log = tmp_path / "receiver.nmea"
    sound = log.read_bytes()
    data = sound + random.Random(9).randbytes(SIZE) + sound
    log.write_bytes(data)
    book = tmp_path / "noise.book"
    tracemalloc.start()
    try:
        record_into(book, session)
        peak = tracemalloc.get_traced_memory()[1]
    finally:
        tracemalloc.stop()
    assert peak < 100 * 1024 * 1024
    with Book.open(book, clock=SystemClock()) as opened:
        assert opened.received_digest(1) == (len(data), hashlib.sha256(data).hexdigest())
        epochs = len(opened.epochs(1))
    assert 1 <= epochs < 10
    assert holds(book) == (True, [])


def test_noise_alone_is_no_log(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    session = sample("kestrel-ridge-1", tmp_path, 8)
    (tmp_path / "receiver.nmea").write_bytes(random.Random(10).randbytes(300_000))
    assert run(["observe", str(tmp_path / "noise.book"), "--session", str(session)]) == 3
    assert "receiver.nmea" in capsys.readouterr().err
    assert not (tmp_path / "noise.book").exists()
