"""The host's clock wrong by years or jumping, half an hour of silence on a fast clock, and two recorders on one book.

Run as a program this file is a recorder with a bent clock: `faults_clock.py BOOK LINK YEARS JUMP_YEARS JUMP_AFTER_S RATE
[SLEPT_S]`. A computer that slept finds its wall clock later, and its monotonic one later too or not, by the system.
It differs from `fieldbook observe` in its clock alone.
"""

from __future__ import annotations

import json
import random
import signal
import subprocess
import sys
import threading
import time
from datetime import UTC, datetime
from pathlib import Path

from faults_links import link_state
from faults_rig import SAMPLE, Row, Scene, recording, scene, until

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock

YEAR_MS = 365 * 86_400_000
FAST = 600.0  # half an hour in three seconds
SIMULATED = "sim:rtk?seed=7&rate=10"


class BentClock:
    """The host's clock, shifted by years, again after a while, and a monotonic one that may run fast."""

    def __init__(self, years: float, jump_years: float, jump_after_s: float, rate: float, slept_s: float = 0.0) -> None:
        self._years, self._jump_years, self._rate, self._slept_s = years, jump_years, rate, slept_s
        self._began = time.monotonic()
        self._jump_after_s = jump_after_s

    def monotonic_ms(self) -> int:
        """Never goes back."""
        passed = time.monotonic() - self._began
        return round((passed * self._rate + (self._slept_s if passed > self._jump_after_s else 0.0)) * 1000)

    def utc_ms(self) -> int:
        """Wrong."""
        years = self._years
        if time.monotonic() - self._began > self._jump_after_s:
            years += self._jump_years
        return time.time_ns() // 1_000_000 + round(years * YEAR_MS)


def main() -> None:
    """Record with a bent clock until told to stop."""
    from fieldbook.links.address import parse_link
    from fieldbook.occupy.foreground import Wish, observe
    from fieldbook.occupy.recorder import StopSignals
    from fieldbook.settings.session import load_session

    book, link, *bends = sys.argv[1:]
    stop = threading.Event()
    with StopSignals(stop):
        wish = Wish(load_session(SAMPLE), parse_link(link))
        observe(Path(book), wish, BentClock(*(float(bend) for bend in bends)), stop)


def _bent(made: Scene, *bends: float) -> subprocess.Popen[bytes]:
    return made.start(__file__, str(made.book), made.wire.link, *(str(bend) for bend in bends))


def clock_wrong() -> Row:
    """17 years behind, 12 ahead, and jumping either way while recording; killed, then taken up with the right clock."""
    row = Row("host clock wrong by years, and jumping by years")
    for years, jump in ((-17.0, 0.0), (12.0, 0.0), (0.0, -17.0), (-17.0, 17.0)):
        with scene() as made:
            recorder = _bent(made, years, jump, 1.5, 1.0)
            made.more(30)
            made.look()
            made.kill(recorder)
            made.judge(row)
            made.observe()
            row.recover_s.append(made.more(1))
            made.judge(row)
            row.acknowledged += made.count()
            with Book.open(made.book, clock=SystemClock()) as book:
                day = book.state().occupations[1].day0
            today = datetime.now(UTC).date()
            row.expect(day is not None and abs((day - today).days) <= 1, f"the date of the occupation is {day}")
        row.times += 1
    row.note = "dates are the receiver's; the right clock goes on with the same occupation"
    return row


def woken_up(times: int) -> Row:
    """The computer sleeps: the recorder stands still for some seconds, and wakes with the wall clock hours or days later
    (or set back), and the monotonic one likewise or as it was."""
    row, luck = Row("computer asleep: SIGSTOP, clocks jump, SIGCONT"), random.Random(51)
    day_s = 86_400.0
    kinds = [(3 * 3600.0, 0.0), (3 * 3600.0, 3 * 3600.0), (5 * day_s, 5 * day_s), (-3600.0, 0.0)]
    while row.times < times:
        wall_s, monotonic_s = kinds[row.times % len(kinds)]
        with scene() as made:
            recorder = _bent(made, 0.0, wall_s / (YEAR_MS / 1000), 3.0, 1.0, monotonic_s)
            made.more(5)
            recorder.send_signal(signal.SIGSTOP)
            made.look()
            time.sleep(3.0 + luck.uniform(0, 1.0))
            recorder.send_signal(signal.SIGCONT)
            row.recover_s.append(made.more(1))
            made.more(10)
            row.expect(recorder.poll() is None, "the recorder ended")
            made.kill(recorder, signal.SIGTERM)
            made.look()
            made.judge(row)
            row.acknowledged += made.count()
            row.expect(list(made.seen) == [1], "more than one occupation")
        row.times += 1
    row.note = "3 h and 5 days later, 1 h back; monotonic clock standing still or running on"
    return row


def long_silence(times: int) -> Row:
    """30 minutes of silence by the recorder's clocks, which run 600 times as fast."""
    row = Row("silence of 30 min (recorder's monotonic clock 600 times as fast)")
    while row.times < times:
        with scene() as made:
            recorder = _bent(made, 0.0, 0.0, 0.0, FAST)
            made.more(5)
            made.wire.mode = "silent"
            time.sleep(1800 / FAST)
            made.look()
            row.expect(link_state(made) == "stale", f"the link is said to be {link_state(made)}")
            made.wire.mode = "good"
            row.recover_s.append(made.more(1))
            row.expect(recorder.poll() is None, "the recorder ended")
            made.judge(row)
            row.acknowledged += made.count()
        row.times += 1
    row.note = "link state stale"
    return row


def second_recorder(times: int) -> Row:
    """A second recorder on a book that is recorded: refused, and the first one goes on."""
    row = Row("second recorder on a book that is recorded")
    with scene() as made:
        first = made.observe()
        made.more(5)
        while row.times < times:
            how = {"stdout": subprocess.PIPE, "text": True}
            if row.times % 2:
                other = made.start("-m", "fieldbook.occupy", str(made.book), "1", "--link", SIMULATED, **how)
            else:
                other = made.observe(link=SIMULATED, **how)
            out, _ = other.communicate(timeout=30)
            told = json.loads(out)
            code = told.get("error", told).get("code")
            row.expect(other.returncode == 4 and code == "locked", f"exit {other.returncode}, {code}")
            made.look()
            row.recover_s.append(made.more(1))
            row.times += 1
        row.expect(first.poll() is None, "the first recorder ended")
        made.judge(row)
        row.acknowledged = made.count()
        row.note = "refused (locked); the first one goes on"
    return row


def race(times: int) -> Row:
    """Two recorders start at one moment where no book is yet; then the one that won is killed while the other waits."""
    row, luck = Row("two recorders begin one book at the same moment"), random.Random(50)
    survived = 0
    while row.times < times:
        with scene(wire=False) as made:
            pair = [made.observe(link=SIMULATED), made.observe(link=SIMULATED)]
            made.more(1)
            if row.times % 2:
                time.sleep(luck.uniform(0, 1.0))
                made.look()
                made.kill(pair[0])
            else:
                until(lambda: any(one.poll() is not None for one in pair), 30, "one to give up")  # noqa: B023
            time.sleep(4.0)
            if not recording(made):
                made.observe(link=SIMULATED)
            made.more(3)
            survived += sum(one.poll() is None for one in pair)
            with Book.open(made.book, clock=SystemClock()) as book:
                state = book.state().occupations
                begun = [entry for entry in book.entries() if entry.kind == "occupation"]
            row.expect(len(state) == 1 and len(begun) == 1, f"{len(begun)} occupations were begun")
            made.judge(row)
            row.acknowledged += made.count()
        row.times += 1
    row.note = "one occupation, one recorder; by turns the first of the two is killed while the other waits"
    return row


if __name__ == "__main__":
    signal.signal(signal.SIGPIPE, signal.SIG_DFL)
    main()
