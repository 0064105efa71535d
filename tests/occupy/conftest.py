"""A receiver on a pseudo-terminal that can be unplugged, recorders as real processes, and waiting on conditions."""

from __future__ import annotations

import contextlib
import os
import signal
import subprocess
import sys
import threading
import time
from collections.abc import Callable, Iterator
from functools import reduce
from pathlib import Path
from typing import Any

import pytest

from fieldbook.book.lock import held
from fieldbook.book.store import Book
from fieldbook.clock import SystemClock

SAMPLE = Path(__file__).parents[1] / "settings" / "contract_sample.toml"


def sentence(body: str) -> bytes:
    """With its checksum and CR LF."""
    checksum = reduce(lambda total, char: total ^ ord(char), body, 0)
    return f"${body}*{checksum:02X}\r\n".encode()


def epoch(index: int, *, start_s: float = 3600.0, step_s: float = 0.1, quality: int = 4, day: str = "040327") -> bytes:
    """GGA and RMC of one invented epoch."""
    second = start_s + index * step_s
    whole = int(second + 1e-6)
    time_text = f"{whole // 3600 % 24:02d}{whole // 60 % 60:02d}{second % 60:05.2f}"
    place = f"1234.{5678901 + index % 7:07d},S,02345.{6789012 - index % 5:07d},W"
    gga = f"GNGGA,{time_text},{place},{quality},20,0.7,{123.4 + index % 3 / 100:.3f},M,-12.345,M,1.0,0061"
    mode = {0: "N", 1: "A", 4: "R"}[quality]
    rmc = f"GNRMC,{time_text},{'A' if quality else 'V'},{place},0.004,,{day},,,{mode},V"
    return sentence(gga) + sentence(rmc)


def log(epochs: int, **how: Any) -> bytes:
    """A whole receiver log."""
    return b"".join(epoch(index, **how) for index in range(epochs))


def until(condition: Callable[[], Any], seconds: float = 15.0) -> Any:
    """The condition's value once it is true; fails after `seconds`."""
    deadline = time.monotonic() + seconds
    while True:
        value = condition()
        if value:
            return value
        assert time.monotonic() < deadline, "waited in vain"
        time.sleep(0.02)


class Port:
    """A receiver that sends one epoch every 100 ms on a pseudo-terminal behind a fixed name."""

    def __init__(self, name: Path) -> None:
        self.name = name
        self.sent = 0
        self._ours = self._theirs = -1
        self._halt = threading.Event()
        self._thread: threading.Thread | None = None

    @property
    def link(self) -> str:
        return f"serial://{self.name}?baud=115200"

    def plug_in(self) -> None:
        """A new pseudo-terminal under the same name, and a receiver sending into it."""
        import tty

        self._ours, self._theirs = os.openpty()
        tty.setraw(self._theirs)
        os.set_blocking(self._ours, False)
        part = self.name.with_suffix(".part")
        part.symlink_to(os.ttyname(self._theirs))
        part.replace(self.name)
        self._halt.clear()
        self._thread = threading.Thread(target=self._send, daemon=True)
        self._thread.start()

    def unplug(self) -> None:
        """The writing side goes away, as when a cable is pulled."""
        self._halt.set()
        if self._thread is not None:
            self._thread.join()
            self._thread = None
        for handle in (self._theirs, self._ours):
            if handle >= 0:
                os.close(handle)
        self._ours = self._theirs = -1
        self.name.unlink(missing_ok=True)

    def _send(self) -> None:
        while not self._halt.wait(0.1):
            with contextlib.suppress(BlockingIOError):  # nobody reads: a receiver does not wait either
                os.write(self._ours, epoch(self.sent))
            self.sent += 1


@pytest.fixture
def port(tmp_path: Path) -> Iterator[Port]:
    """A receiver that is sending."""
    made = Port(tmp_path / "port")
    made.plug_in()
    yield made
    made.unplug()


class Recorders:
    """Starts recorders as processes of their own, and leaves none behind."""

    def __init__(self, folder: Path, session: Path) -> None:
        self.book = folder / "job.book"
        self._session = session
        self._started: list[subprocess.Popen[str]] = []

    def observe(self, *more: str, link: str | None = None, wait: bool = True) -> subprocess.Popen[str]:
        """`fieldbook observe` as a process."""
        given = [] if link is None else ["--link", link]
        command = [sys.executable, "-m", "fieldbook", "observe", str(self.book), "--session", str(self._session)]
        started = subprocess.Popen(
            [*command, *given, "--json", *more],
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
            start_new_session=True,
        )
        self._started.append(started)
        if wait:
            until(lambda: started.poll() is not None or (held(self.book) and self.epochs() >= 0))
        return started

    def finished(self, process: subprocess.Popen[str]) -> tuple[int, str, str]:
        """Exit code, stdout, stderr of a process that ends by itself."""
        out, err = process.communicate(timeout=60)
        return process.returncode, out, err

    def opened(self) -> Book:
        """The book, for reading; close it."""
        return Book.open(self.book, clock=SystemClock())

    def epochs(self, occupation: int = 1) -> int:
        """Stored epochs; -1 while there is no occupation."""
        if not self.book.exists():
            return -1
        with self.opened() as book:
            if occupation not in book.state().occupations:
                return -1
            return len(book.epochs(occupation))

    def entries(self, kind: str) -> list[dict[str, Any]]:
        """Bodies of the entries of a kind."""
        with self.opened() as book:
            return [entry.body for entry in book.entries() if entry.kind == kind]

    def close(self) -> None:
        for process in self._started:
            if process.poll() is None:
                process.send_signal(signal.SIGKILL)
            process.communicate(timeout=60)


@pytest.fixture
def session(tmp_path: Path) -> Path:
    """The contract's sample session; its link is receiver.nmea beside it."""
    path = tmp_path / "session.toml"
    path.write_text(SAMPLE.read_text(encoding="utf-8"), encoding="utf-8")
    return path


@pytest.fixture
def recorders(tmp_path: Path, session: Path) -> Iterator[Recorders]:
    """Recorders on job.book."""
    made = Recorders(tmp_path, session)
    yield made
    made.close()
