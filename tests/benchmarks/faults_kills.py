"""kill -9 of recorders and screens at random moments, and one file recorded in many pieces.

A quarter of the recorders die while they start, a few while they end and pack an occupation, the rest while recording.
The next `observe` takes the same occupation up; the time to recover runs from its start to the next acknowledged epoch.
"""

from __future__ import annotations

import contextlib
import json
import os
import pty
import random
import subprocess
import sys
import threading
import time
from pathlib import Path
from typing import Any

from faults_rig import ENVIRONMENT, ROOT, Row, Scene, recording, scene, until

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.errors import BookError
from fieldbook.links.sim_scenarios import SCENARIOS
from fieldbook.links.simulate import Receiver

LOOKING = (
    "import sys, pathlib, time; from fieldbook.occupy.live import LiveReader;"
    "reader = LiveReader(pathlib.Path(sys.argv[1]));\nwhile True: reader.snapshot(); time.sleep(0.05)"
)
WHOLE_EVERY = 10
FIRST_MS = 1_804_122_600_000  # 2027-03-04T01:10:00Z
RESTARTS = 10


def recorder_kills(times: int) -> Row:
    """kill -9 of the recorder of a port."""
    row, luck = Row("kill -9 of the recorder (port, 10 Hz)"), random.Random(41)
    starting = ending = 0
    with scene() as made:
        while row.times < times:
            recorder = made.observe()
            kind = luck.random()
            if kind < 0.25:
                starting += 1
                time.sleep(luck.uniform(0, 0.9))
                made.look()
            else:
                row.recover_s.append(made.more(1))
                time.sleep(luck.uniform(0, 0.5))
                made.look()
            if kind > 0.9 and recording(made):
                ending += 1
                _ask_to_end(made)
                time.sleep(luck.uniform(0, 0.4))
                made.look()
            made.kill(recorder)
            row.times += 1
            if made.book.exists():
                made.judge(row, whole=row.times % WHOLE_EVERY == 0 or row.times == times)
        row.acknowledged = made.count()
        row.note = f"{starting} while it started, {ending} while it ended the occupation"
    return row


def _ask_to_end(made: Scene) -> None:
    with Book.open(made.book, clock=SystemClock(), write=True) as book:
        opened = book.state().open_occupation
        if opened is not None:
            book.append("request", {"occupation": opened.number, "action": "end"}, opened.observer)


def screen_kills(times: int) -> Row:
    """kill -9 of a process that reads live, and of the screen itself on a terminal of its own."""
    row, luck = Row("kill -9 of a live reader or the screen"), random.Random(42)
    screens = 0
    with scene() as made:
        recorder = made.observe()
        made.more(5)
        while row.times < times:
            if row.times % 2:
                screens += 1
                with _on_a_terminal(made) as screen:
                    time.sleep(luck.uniform(0.2, 3.0))
                    made.look()
                    made.kill(screen)
            else:
                reader = made.start("-c", LOOKING, str(made.book))
                time.sleep(luck.uniform(0.2, 2.0))
                made.look()
                made.kill(reader)
            row.recover_s.append(made.more(1))
            row.times += 1
            row.expect(recorder.poll() is None, "the recorder ended with the screen")
        row.acknowledged = made.count()
        made.judge(row)
        row.note = f"{screens} of them the screen; the recorder goes on"
    return row


@contextlib.contextmanager
def _on_a_terminal(made: Scene) -> Any:
    ours, theirs = pty.openpty()
    environment = {**ENVIRONMENT, "TERM": "xterm-256color", "COLUMNS": "100", "LINES": "30"}
    command = ["-m", "fieldbook", "open", str(made.book)]
    screen = made.start(*command, environment=environment, stdin=theirs, stdout=theirs, stderr=theirs)
    os.close(theirs)
    drain = threading.Thread(target=_drain, args=(ours,), daemon=True)
    drain.start()
    try:
        yield screen
    finally:
        made.kill(screen)
        drain.join(5)
        os.close(ours)


def _drain(handle: int) -> None:
    with contextlib.suppress(OSError):
        while os.read(handle, 65536):
            pass


def file_in_pieces(hours: float) -> Row:
    """One file recorded in one go, and again under 10 kill -9: the same coordinates to the last bit."""
    row, luck = Row("kill -9 while recording a file, then reduced"), random.Random(43)
    with scene(wire=False) as made:
        log = made.folder / "receiver.nmea"
        receiver = Receiver(SCENARIOS["two-inits"], seed=5, first_utc_ms=FIRST_MS, rate_hz=1.0)
        with log.open("wb") as out:
            for _ in range(int(hours * 3600)):
                out.write(receiver.next_burst().data)
        size, link = log.stat().st_size, f"file:{log}"
        made.book = made.folder / "whole.book"
        row.expect(made.observe(link=link).wait(120) == 0, "the whole file was not recorded")
        whole = _reduced(made.book)
        made.book = made.folder / "pieces.book"
        while row.times < RESTARTS:
            recorder = made.observe(link=link)
            due = 0.85 * size * (row.times + luck.random()) / RESTARTS  # the end of the file has rows of its own
            _read_up_to(made, recorder, due)
            time.sleep(luck.uniform(0, 0.05))
            made.look()
            row.expect(recorder.poll() is None, "the recorder was done before it could be killed")
            made.kill(recorder)
            row.times += 1
            made.judge(row, whole=row.times % 5 == 0)
        began = time.monotonic()
        row.expect(made.observe(link=link).wait(120) == 0, "the rest was not recorded")
        row.recover_s.append(time.monotonic() - began)
        made.look()
        row.acknowledged = made.count()
        made.judge(row)
        pieces = _reduced(made.book)
        same = pieces == whole
        row.expect(same, "the reductions differ")
        row.note = f"reductions identical to the last bit: {'yes' if same else 'NO'} ({len(whole)} characters of JSON)"
    return row


def _read_up_to(made: Scene, recorder: subprocess.Popen[Any], size: float) -> None:
    """Wait until so many bytes are in the book, or the recorder has ended."""
    until(lambda: _received(made.book) >= size or recorder.poll() is not None, 60, "the file to be read")


def _received(path: Path) -> int:
    if not path.exists():
        return 0
    with contextlib.suppress(BookError):
        with Book.open(path, clock=SystemClock()) as book:
            said = book.recorder_state()
            return 0 if said is None else said.received_bytes
    return 0


def _reduced(path: Path) -> str:
    """Every reduction of a book as JSON text; floats are written so that they read back to the same bits."""
    asked = [sys.executable, "-m", "fieldbook", "reduce", str(path), "--json"]
    done = subprocess.run(asked, check=False, capture_output=True, text=True, env=ENVIRONMENT, cwd=ROOT)
    tree = json.loads(done.stdout)
    return json.dumps([tree["reductions"], tree["marks"], tree["failed"]])
