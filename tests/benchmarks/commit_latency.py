"""Last byte of a burst on the port to its raw row committed, at 10 Hz on a pseudo-terminal. Goal: p95 at most 50 ms.

The recorder is a process of its own; this process writes the bursts and watches the book through a second, reading
connection, so that what is measured is when the commit can be seen by somebody else. POSIX only.
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
BURSTS, STEP_S = 200, 0.1
GOAL_MS = 50.0


def main() -> None:
    """Print p50, p95 and the worst beside the goal."""
    ours, theirs = os.openpty()
    tty.setraw(theirs)
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "job.book"
        link = f"serial://{os.ttyname(theirs)}?baud=115200"
        command = [sys.executable, "-m", "fieldbook", "observe", str(path), "--session", str(SAMPLE), "--link", link]
        recorder = subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL)
        try:
            waits = _measure(path, ours)
        finally:
            recorder.terminate()
            recorder.wait()
            os.close(ours)
            os.close(theirs)
    waits.sort()
    p95 = waits[int(0.95 * len(waits))]
    print(
        f"last byte to commit at 10 Hz: median {statistics.median(waits):.1f} ms, p95 {p95:.1f} ms,"
        f" worst {waits[-1]:.1f} ms (goal p95 {GOAL_MS:.0f} ms; 20 ms of it is the silence that ends a burst)"
    )


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
