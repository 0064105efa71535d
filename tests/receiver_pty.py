"""A simulated receiver on a pseudo-terminal: what a serial port looks like to the program, without hardware.

The receiver runs in a process of its own, so that it can be killed as a cable is pulled: the kernel then closes the
writing side and the reader gets an input/output error. Its path is a symbolic link that stays the same when the
receiver is started again on another pseudo-terminal. Bytes that nobody reads are dropped, as a UART does.

    with PtyReceiver(tmp_path, scenario="rtk", rate_hz=10) as receiver:
        receiver.address        # serial:///.../receiver?baud=115200
        receiver.kill(); receiver.start()
        receiver.sent()         # [(fix utc ms, wall clock ns when the last byte of its burst was written), ...]
"""

from __future__ import annotations

import argparse
import os
import signal
import subprocess
import sys
import time
import tty
from pathlib import Path

REPOSITORY = Path(__file__).resolve().parents[1]


class PtyReceiver:
    """One simulated receiver behind a path.

    Args:
        folder: where the symbolic link and the log of what was sent lie.
        scenario, seed, rate_hz, speed: as in a `sim:` address.
    """

    def __init__(
        self,
        folder: Path,
        *,
        scenario: str = "rtk",
        seed: int = 7,
        rate_hz: float = 1.0,
        speed: float = 1.0,
        name: str = "receiver",
    ) -> None:
        self.path = folder / name
        self.log = folder / f"{name}.sent"
        self.address = f"serial://{self.path}?baud=115200"
        self._arguments = [str(self.path), str(self.log), scenario, str(seed), str(rate_hz), str(speed)]
        self._process: subprocess.Popen[bytes] | None = None

    def start(self) -> None:
        """Plug it in; returns when the path is there."""
        assert self._process is None, "it runs already"
        environment = {**os.environ, "PYTHONPATH": str(REPOSITORY)}
        self._process = subprocess.Popen([sys.executable, __file__, *self._arguments], env=environment)
        end = time.monotonic() + 20.0
        while not self.path.exists():  # False for a link that points to nothing, as after a kill
            if self._process.poll() is not None or time.monotonic() > end:
                self.kill()
                raise RuntimeError("the simulated receiver did not start")
            time.sleep(0.01)

    def kill(self) -> None:
        """Pull the cable: the writing side is gone at once."""
        process, self._process = self._process, None
        if process is not None:
            process.kill()
            process.wait()

    def pause(self) -> None:
        """The receiver falls silent; the port stays."""
        assert self._process is not None
        self._process.send_signal(signal.SIGSTOP)

    def go_on(self) -> None:
        """It speaks again (and sends at once what it owes)."""
        assert self._process is not None
        self._process.send_signal(signal.SIGCONT)

    def sent(self) -> list[tuple[int, int]]:
        """Fix time (UTC ms) and wall clock (ns) of every burst written in full."""
        rows = self.log.read_text().split("\n")[:-1] if self.log.exists() else []
        return [(int(fix), int(wall)) for fix, wall in (row.split() for row in rows)]

    def __enter__(self) -> PtyReceiver:
        self.start()
        return self

    def __exit__(self, *_: object) -> None:
        self.kill()
        self.path.unlink(missing_ok=True)


def serve(path: Path, log: Path, scenario: str, seed: int, rate_hz: float, speed: float) -> None:
    """Write bursts to a new pseudo-terminal until killed."""
    from fieldbook.links.sim_scenarios import SCENARIOS
    from fieldbook.links.simulate import Receiver

    writing, reading = os.openpty()
    tty.setraw(reading)  # a pseudo-terminal in its first mode echoes what it is sent
    os.set_blocking(writing, False)
    receiver = Receiver(SCENARIOS[scenario], seed=seed, first_utc_ms=time.time_ns() // 10**9 * 1000, rate_hz=rate_hz)
    started, first = time.monotonic(), receiver.next_utc_ms
    fresh = path.with_name(path.name + ".new")
    fresh.unlink(missing_ok=True)
    fresh.symlink_to(os.ttyname(reading))
    fresh.replace(path)
    with log.open("a") as sent:
        while True:
            due = started + (receiver.next_utc_ms - first) / 1000.0 / speed
            time.sleep(max(0.0, due - time.monotonic()))
            burst = receiver.next_burst()
            try:
                whole = os.write(writing, burst.data) == len(burst.data) if burst.data else False
            except BlockingIOError:  # nobody reads
                whole = False
            if whole:
                sent.write(f"{burst.utc_ms} {time.time_ns()}\n")
                sent.flush()


if __name__ == "__main__":
    parser = argparse.ArgumentParser()
    for field, kind in (
        ("path", Path),
        ("log", Path),
        ("scenario", str),
        ("seed", int),
        ("rate", float),
        ("speed", float),
    ):
        parser.add_argument(field, type=kind)
    serve(*vars(parser.parse_args()).values())
