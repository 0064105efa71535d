"""What every fault needs: a wire to pull, recorders to kill, and a witness of what the book had acknowledged.

The witness is this process: it reads the book through a connection of its own. An epoch is acknowledged when the witness
has read it, which is later than its commit; the heartbeat (`recorder_state`) may never say more than the table holds.
After the fault each acknowledged epoch must be in the book unchanged, and `verify_stored` must find nothing wrong.
"""

from __future__ import annotations

import contextlib
import os
import random
import signal
import statistics
import subprocess
import sys
import tempfile
import threading
import time
import tty
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from itertools import pairwise
from pathlib import Path
from typing import Any

from fieldbook.book.lock import held
from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.errors import BookError
from fieldbook.links.sim_scenarios import SCENARIOS
from fieldbook.links.simulate import Receiver
from fieldbook.model.epoch import DAY_MS, Epoch
from fieldbook.occupy.verifying import verify_stored

ROOT = Path(__file__).resolve().parents[2]
SAMPLE = ROOT / "tests" / "settings" / "contract_sample.toml"
ENVIRONMENT = {**os.environ, "PYTHONPATH": str(ROOT)}
RATE_HZ = 10.0


@dataclass
class Row:
    """One line of the table."""

    fault: str
    times: int = 0
    acknowledged: int = 0
    lost: int = 0
    damaged: int = 0
    recover_s: list[float] = field(default_factory=list)
    note: str = ""
    failed: list[str] = field(default_factory=list)

    def expect(self, holds: bool, what: str) -> None:
        """Something the program promises; what does not hold is printed and makes the command fail."""
        if not holds:
            self.failed.append(what)

    def cells(self) -> list[str]:
        """As they stand in the table."""
        if not self.times:
            return [self.fault, "not run", "", "", "", "", self.note]
        times = sorted(self.recover_s)
        took = f"{statistics.median(times):.1f} s, at most {times[-1]:.1f} s" if times else ""
        counts = [self.times, self.acknowledged, self.lost, self.damaged]
        return [self.fault, *(f"{count:,}" for count in counts), took, "; ".join([self.note, *self.failed]).strip("; ")]


class Wire:
    """A receiver on a pseudo-terminal behind a fixed name; `mode`: good, noise or silent. Bytes nobody reads are lost."""

    def __init__(self, name: Path, *, rate_hz: float = RATE_HZ, seed: int = 7) -> None:
        self.name, self.mode = name, "good"
        self.link = f"serial://{name}?baud=115200"
        self._rate_hz = rate_hz
        self._noise = random.Random(seed)
        self._ours = self._theirs = -1
        self._halt = threading.Event()
        self._thread: threading.Thread | None = None

    def plug_in(self, *, seed: int = 7) -> None:
        """A receiver (of this seed) behind the name."""
        self._ours, self._theirs = os.openpty()
        tty.setraw(self._theirs)
        os.set_blocking(self._ours, False)
        part = self.name.with_suffix(".part")
        part.symlink_to(os.ttyname(self._theirs))
        part.replace(self.name)
        self._halt.clear()
        now_ms = time.time_ns() // 10**9 * 1000
        receiver = Receiver(SCENARIOS["rtk"], seed=seed, first_utc_ms=now_ms, rate_hz=self._rate_hz)
        self._thread = threading.Thread(target=self._send, args=(receiver,), daemon=True)
        self._thread.start()

    def pull(self) -> None:
        """The other side is gone."""
        self._halt.set()
        if self._thread is not None:
            self._thread.join()
            self._thread = None
            os.close(self._theirs)
            os.close(self._ours)
            self.name.unlink(missing_ok=True)

    def _send(self, receiver: Receiver) -> None:
        due = time.monotonic()
        while not self._halt.is_set():
            due += 1 / self._rate_hz
            data = receiver.next_burst().data
            if self.mode == "noise":  # what a wrong speed looks like
                data = self._noise.randbytes(len(data))
            if self.mode != "silent":
                with contextlib.suppress(BlockingIOError):
                    os.write(self._ours, data)
            self._halt.wait(max(0.0, due - time.monotonic()))


class Scene:
    """A folder with a book and a wire, the processes started on them, and what the witness has seen."""

    def __init__(self, folder: Path, *, wire: bool = True) -> None:
        self.folder, self.book = folder, folder / "job.book"
        self.wire = Wire(folder / "port")
        self.seen: dict[int, list[Epoch]] = {}
        self.leads = 0  # times the heartbeat said more than the table held
        self._started: list[subprocess.Popen[Any]] = []
        if wire:
            self.wire.plug_in()

    def start(self, *command: str, environment: dict[str, str] | None = None, **how: Any) -> subprocess.Popen[Any]:
        """Our Python with these arguments, as a process of its own; nothing of it is left behind."""
        quiet = {"stdin": subprocess.DEVNULL, "stdout": subprocess.DEVNULL, "stderr": subprocess.DEVNULL, **how}
        started = subprocess.Popen(
            [sys.executable, *command], env=environment or ENVIRONMENT, start_new_session=True, **quiet
        )
        self._started.append(started)
        return started

    def observe(
        self, *more: str, link: str | None = None, environment: dict[str, str] | None = None, **how: Any
    ) -> subprocess.Popen[Any]:
        """`fieldbook observe` on this scene's book."""
        fixed = ["-m", "fieldbook", "observe", str(self.book), "--session", str(SAMPLE), "--json"]
        return self.start(*fixed, "--link", link or self.wire.link, *more, environment=environment, **how)

    def look(self) -> int:
        """Read what is new in the book; the number of epochs seen so far."""
        if not self.book.exists():
            return 0
        with contextlib.suppress(BookError):  # busy for a moment: nothing was acknowledged then
            with Book.open(self.book, clock=SystemClock()) as book:
                said = book.recorder_state()
                for number in book.state().occupations:
                    rows = self.seen.setdefault(number, [])
                    rows += book.epochs(number, after=len(rows))
                if said is not None and said.epochs > len(self.seen.get(said.occupation, [])):
                    self.leads += 1
        return self.count()

    def count(self) -> int:
        """Epochs acknowledged so far."""
        return sum(len(rows) for rows in self.seen.values())

    def more(self, epochs: int, seconds: float = 30.0) -> float:
        """Wait until so many more epochs are acknowledged; the seconds it took."""
        began, wanted = time.monotonic(), self.count() + epochs
        until(lambda: self.look() >= wanted, seconds, f"{epochs} more epochs")
        return time.monotonic() - began

    def judge(self, row: Row, *, path: Path | None = None, whole: bool = True) -> None:
        """Every acknowledged epoch unchanged in the book, and the book sound; into the row."""
        where = path or self.book
        if not where.exists():
            row.lost += self.count()
            return
        row.lost += lost(where, self.seen) + self.leads
        self.leads = 0
        if whole:
            row.damaged += damaged(where, row)

    def kill(self, process: subprocess.Popen[Any], how: signal.Signals = signal.SIGKILL) -> None:
        """Send a signal to a process of ours and wait for its end."""
        if process.poll() is None:
            process.send_signal(how)
        process.wait(30)

    def close(self) -> None:
        """End what was started here."""
        for process in self._started:
            if process.poll() is None:
                process.send_signal(signal.SIGCONT)
                process.kill()
            process.wait()
            for pipe in (process.stdout, process.stderr):
                if pipe is not None:
                    pipe.close()
        self.wire.pull()


@contextlib.contextmanager
def scene(*, wire: bool = True, folder: Path | None = None) -> Iterator[Scene]:
    """A scene in a folder that is removed at the end."""
    with contextlib.ExitStack() as stack:
        where = folder or Path(stack.enter_context(tempfile.TemporaryDirectory(prefix="faults-")))
        made = Scene(where, wire=wire)
        stack.callback(made.close)
        yield made


def until(condition: Callable[[], Any], seconds: float = 30.0, what: str = "it") -> Any:
    """The condition's value once it is true.

    Raises:
        TimeoutError: it did not become true in time.
    """
    end = time.monotonic() + seconds
    while not (value := condition()):
        if time.monotonic() > end:
            raise TimeoutError(f"waited {seconds:.0f} s in vain for {what}")
        time.sleep(0.02)
    return value


def holes(epochs: list[Epoch]) -> int:
    """How often two epochs that follow each other are not one step of the receiver apart."""
    instants = [row.time_ms for row in epochs if row.time_ms is not None]
    return sum((later - earlier) % DAY_MS != 1000 / RATE_HZ for earlier, later in pairwise(instants))


def lost(path: Path, seen: dict[int, list[Epoch]]) -> int:
    """Acknowledged epochs that are not in the book, or not as they were."""
    missing = 0
    with Book.open(path, clock=SystemClock()) as book:
        there = book.state().occupations
        for number, rows in seen.items():
            stored = book.epochs(number) if number in there else []
            missing += sum(index >= len(stored) or stored[index] != row for index, row in enumerate(rows))
    return missing


def damaged(path: Path, row: Row) -> int:
    """1 if `verify_stored` (which includes the audit) finds something that does not hold, else 0."""
    wrong = [item for item in verify_stored(path) if not item.holds]
    row.failed += [f"{item.where}: {item.text}" for item in wrong[:2]]
    return bool(wrong)


def recording(made: Scene) -> bool:
    """Whether somebody holds the recorder's lock."""
    return held(made.book)
