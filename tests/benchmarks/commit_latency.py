"""Last byte of a burst on the port to its raw row committed, at 10 Hz on a pseudo-terminal. Goal: p95 at most 50 ms.

The recorder is a process of its own; this process writes the bursts and watches the book through a second, reading
connection, so that what is measured is when the commit can be seen by somebody else. A second run makes copies of the book
all the time on a medium of 500 kB/s (`slow_medium.c`, a C compiler needed). POSIX only.
"""

from __future__ import annotations

import os
import random
import statistics
import subprocess
import sys
import tempfile
import time
import tty
from pathlib import Path

from receiver_log import burst

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock

SAMPLE = Path(__file__).parents[1] / "settings" / "contract_sample.toml"
START = """\
import os, sys
from fieldbook.occupy import backup_thread
every_s = os.environ.get("FIELDBOOK_BENCHMARK_EVERY_S")
if every_s:  # here copies begin at once and never pause
    backup_thread.FIRST_S, backup_thread.BUSY_SHARE = 0.1, 0
    backup_thread.BackupThread.__init__.__kwdefaults__.update(first_s=0.1, every_s=float(every_s))
from fieldbook.commands import run
sys.exit(run(sys.argv[1:]))
"""
BURSTS, STEP_S = 200, 0.1
GOAL_MS = 50.0


def main() -> None:
    """Print p50, p95 and the worst beside the goal; without copies, and with a copy always being made."""
    _print("last byte to commit at 10 Hz", _waits([], {}))
    with tempfile.TemporaryDirectory() as stick:
        shim = _shim(Path(stick))
        if shim is None:
            print("with copies to a slow medium: not run: C compiler missing")
            return
        medium = Path(stick) / "stick"
        medium.mkdir()
        environment = {"LD_PRELOAD": str(shim), "SLOW_MEDIUM": str(medium), "FIELDBOOK_BENCHMARK_EVERY_S": "0.1"}
        waits = _waits(["--backup", str(medium)], environment)
        _print("the same, copies to a medium of 500 kB/s without a pause", waits)
        print(f"  {sum(1 for _ in medium.glob('*.book'))} copy stands there")


def _shim(folder: Path) -> Path | None:
    source, made = Path(__file__).with_name("slow_medium.c"), folder / "slow_medium.so"
    command = ["cc", "-shared", "-fPIC", "-O2", "-o", str(made), str(source), "-ldl"]
    try:
        subprocess.run(command, check=True, capture_output=True)
    except (OSError, subprocess.CalledProcessError):
        return None
    return made


def _print(what: str, waits: list[float]) -> None:
    waits.sort()
    p95 = waits[int(0.95 * len(waits))]
    print(
        f"{what}: median {statistics.median(waits):.1f} ms, p95 {p95:.1f} ms,"
        f" worst {waits[-1]:.1f} ms (goal p95 {GOAL_MS:.0f} ms; 20 ms of it is the silence that ends a burst)"
    )


def _waits(more: list[str], environment: dict[str, str]) -> list[float]:
    """Waiting times of one recording."""
    ours, theirs = os.openpty()
    tty.setraw(theirs)
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "job.book"
        link = f"serial://{os.ttyname(theirs)}?baud=115200"
        arguments = ["observe", str(path), "--session", str(SAMPLE), "--link", link, *more]
        command = [sys.executable, "-c", START, *arguments]
        quiet = subprocess.DEVNULL
        recorder = subprocess.Popen(command, stdout=quiet, stderr=quiet, env={**os.environ, **environment})
        try:
            return _measure(path, ours)
        finally:
            recorder.terminate()
            recorder.wait()
            os.close(ours)
            os.close(theirs)


def _measure(path: Path, ours: int) -> list[float]:
    while not path.exists():
        time.sleep(0.05)
    rng = random.Random(7)
    waits: list[float] = []
    seen = 0
    with Book.open(path, clock=SystemClock()) as book:
        time.sleep(1.0)
        for index in range(BURSTS):
            due = time.perf_counter() + STEP_S
            data = burst(3600 + index * STEP_S, rng, sky=index % 10 == 0)
            seen += len(list(book.items(1, seen)))
            os.write(ours, data)
            written = time.perf_counter()
            arrived = 0
            while not arrived and time.perf_counter() < due + 1:
                version = book.data_version()
                while book.data_version() == version and time.perf_counter() < due + 1:
                    time.sleep(0.0005)
                arrived = len(list(book.items(1, seen)))  # a heartbeat alone is no news
            seen += arrived
            waits.append(1000 * (time.perf_counter() - written))
            time.sleep(max(0.0, due - time.perf_counter()))
    return waits[5:]


if __name__ == "__main__":
    main()
