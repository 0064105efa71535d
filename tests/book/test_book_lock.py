"""The recorder's lock: exclusive, asked without disturbing, dropped by the system when its process dies."""

from __future__ import annotations

import subprocess
import sys
import threading
import time
from pathlib import Path

import pytest

from fieldbook.book.lock import RecorderLock, held, lock_path
from fieldbook.errors import BookError

HOLD = """
import pathlib, sys, time
from fieldbook.book.lock import RecorderLock
RecorderLock(pathlib.Path(sys.argv[1])).acquire()
print("held", flush=True)
time.sleep(60)
"""


def test_held_makes_no_file_and_tells_the_truth(tmp_path: Path) -> None:
    book = tmp_path / "a.book"
    assert not held(book)
    assert list(tmp_path.iterdir()) == []
    lock = RecorderLock(book)
    with lock:
        assert held(book)
        assert not book.exists()
        lock.acquire()  # a second time does nothing
    assert not held(book)
    assert lock_path(book).name == "a.book.lock"
    lock.release()  # a second time does nothing


def test_a_second_recorder_is_refused_with_a_remedy(tmp_path: Path) -> None:
    with RecorderLock(tmp_path / "a.book"):
        started = time.monotonic()
        with pytest.raises(BookError) as caught:
            RecorderLock(tmp_path / "a.book").acquire(wait_s=0.3)
        assert 0.3 <= time.monotonic() - started < 2
        assert (caught.value.code, caught.value.exit_code) == ("locked", 4)
        assert "fieldbook open" in caught.value.remedy


def test_a_symbolic_link_shares_the_lock(tmp_path: Path) -> None:
    (tmp_path / "a.book").touch()
    (tmp_path / "b.book").symlink_to(tmp_path / "a.book")
    with RecorderLock(tmp_path / "b.book"):
        assert held(tmp_path / "a.book")


def test_a_folder_that_cannot_be_written_is_said_so(tmp_path: Path) -> None:
    with pytest.raises(BookError, match="lock file"):
        RecorderLock(tmp_path / "missing" / "a.book").acquire()


def test_the_lock_of_a_killed_process_is_free(tmp_path: Path) -> None:
    book = tmp_path / "a.book"
    child = subprocess.Popen([sys.executable, "-c", HOLD, str(book)], stdout=subprocess.PIPE, text=True)
    try:
        assert child.stdout is not None
        assert child.stdout.readline() == "held\n"
        assert held(book)
    finally:
        child.kill()
        child.communicate()
    assert not held(book)
    with RecorderLock(book):
        assert held(book)


def test_asking_all_the_time_does_not_keep_a_recorder_from_starting(tmp_path: Path) -> None:
    book = tmp_path / "a.book"
    with RecorderLock(book):
        pass
    stop = threading.Event()

    def ask() -> None:
        while not stop.is_set():
            held(book)

    threads = [threading.Thread(target=ask) for _ in range(3)]
    for thread in threads:
        thread.start()
    try:
        for _ in range(10):
            with RecorderLock(book):
                assert held(book)
    finally:
        stop.set()
        for thread in threads:
            thread.join()
