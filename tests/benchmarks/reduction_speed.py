"""Reduction: ten times the epochs against ten times the time, a live look, and folding a long book.

Goal: 10 n epochs in at most 11 x the time of n. The absolute figures are printed for orientation only. `--long` adds a day at
10 Hz against a tenth of it, the cost of one more epoch from 1,000 to 1,000,000 of them, and what 72 h at 10 Hz hold in memory.
"""

from __future__ import annotations

import random
import resource
import sys
import tempfile
import time
from collections.abc import Iterator
from pathlib import Path

from fieldbook.book.store import Book
from fieldbook.clock import FakeClock
from fieldbook.model.epoch import Epoch
from fieldbook.reduce.estimate import estimate
from fieldbook.reduce.gates import Limits
from fieldbook.reduce.initialisations import InitialisationJudge
from fieldbook.reduce.screening import Screening

N = 20_000


def epochs(count: int, *, step_ms: int = 1000) -> list[Epoch]:
    """RTK epochs with correlated errors, from a seed."""
    return list(stream(count, step_ms=step_ms))


def stream(count: int, *, step_ms: int = 1000) -> Iterator[Epoch]:
    """The same, one after the other."""
    chance = random.Random(11)
    drift = 0.0
    for number in range(1, count + 1):
        drift = 0.995 * drift + chance.gauss(0, 60)
        day, time_ms = divmod(step_ms * number, 86_400_000)
        yield (
            Epoch(
                number, "GGA", "GN", day=day, time_ms=time_ms,
                latitude_e8min=-200_000_000_000 + round(drift + chance.gauss(0, 150)),
                longitude_e8min=880_000_000_000 + round(drift + chance.gauss(0, 150)),
                latitude_decimals=8, longitude_decimals=8, altitude_e5m=23_000_000 + round(chance.gauss(0, 600)),
                altitude_decimals=4, separation_e5m=1_348_200, separation_decimals=4, quality=4, satellites=18,
                hdop_milli=700, age_ms=1000, station="0042",
            )
        )  # fmt: skip


def reduced_s(rows: list[Epoch]) -> float:
    """Seconds of processor time to push and evaluate all rows at once."""
    begun = time.process_time()
    screening = Screening(Limits((4,)))
    screening.push(rows)
    screened = screening.evaluate()
    estimate(screened, InitialisationJudge().judge(screened))
    return time.process_time() - begun


def live_ms(rows: list[Epoch]) -> float:
    """Median milliseconds of one more epoch and one evaluation, at the end of these rows."""
    screening, judge, costs = Screening(Limits((4,))), InitialisationJudge(), []
    screening.push(rows[:-30])
    for row in rows[-30:]:
        begun = time.perf_counter()
        screening.push([row])
        screened = screening.evaluate()
        estimate(screened, judge.judge(screened))
        costs.append(time.perf_counter() - begun)
    return 1000 * sorted(costs)[15]


def fold_ms(entries: int) -> float:
    """Milliseconds to fold a book of that many entries."""
    with tempfile.TemporaryDirectory() as folder:
        clock = FakeClock(0, 1_800_000_000_000)
        with Book.create(Path(folder) / "long.book", clock=clock, observer="R. Kell") as book:
            with book.transaction():
                for number in range(entries):
                    book.append("remark", {"occupation": None, "text": f"remark {number}"}, "R. Kell")
            begun = time.perf_counter()
            book.state()
            return 1000 * (time.perf_counter() - begun)


def live_ms_at(counts: tuple[int, ...]) -> dict[int, float]:
    """Median milliseconds of processor time of one more epoch and one look, at each of these numbers of epochs at 10 Hz."""
    screening, judge, found, heard = Screening(Limits((4,))), InitialisationJudge(), {}, 0
    chunk: list[Epoch] = []
    costs: list[float] = []
    for row in stream(max(counts), step_ms=100):
        chunk.append(row)
        near = next(count for count in counts if heard + len(chunk) <= count) - heard - len(chunk) < 30
        if near or len(chunk) == 10_000:
            begun = time.process_time()
            screening.push(chunk)
            heard += len(chunk)
            chunk = []
            if near:
                screened = screening.evaluate()
                estimate(screened, judge.judge(screened))
                costs.append(time.process_time() - begun)
            if heard in counts:
                found[heard], costs = 1000 * sorted(costs)[len(costs) // 2], []
    return found


def memory_mb(count: int, step_ms: int) -> tuple[float, float]:
    """Megabytes of this process before, and after so many epochs were pushed as they come; the largest it ever was."""
    before = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    screening, chunk = Screening(Limits((4,))), []
    for row in stream(count, step_ms=step_ms):
        chunk.append(row)
        if len(chunk) == 1000:
            screening.push(chunk)
            chunk = []
    screening.evaluate()
    return before, resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024


def long_form() -> None:
    """Print what takes minutes."""
    before, after = memory_mb(72 * 36_000, 100)
    print(f"memory, 72 h at 10 Hz: {after - before:.0f} MB more than the {before:.0f} MB at the beginning", flush=True)
    costs = live_ms_at((1_000, 10_000, 100_000, 1_000_000))
    print(
        "one more epoch and a look at 10 Hz, ms: "
        + ", ".join(f"{count} epochs {cost:.1f}" for count, cost in costs.items()),
        flush=True,
    )
    many = epochs(864_000, step_ms=100)
    short = min(reduced_s(many[:86_400]) for _ in range(3))
    print(f"reduction of 864000 epochs / of 86400: {min(reduced_s(many) for _ in range(2)) / short:.2f} (goal 11)")


def main() -> None:
    """Print the ratios."""
    if "--long" in sys.argv[1:]:
        long_form()
    many = epochs(10 * N)
    reduced_s(many[:N])  # warm up
    short = min(reduced_s(many[:N]) for _ in range(5))
    long = min(reduced_s(many) for _ in range(3))
    print(f"reduction of {10 * N} epochs / of {N}: {long / short:.2f} (goal 11)")
    print(
        f"one more epoch and a look, at {N} epochs: {live_ms(many[:N]):.1f} ms; at {10 * N}: {live_ms(many):.1f} ms (goal 15)"
    )
    print(f"fold of 3000 entries: {fold_ms(3000):.0f} ms")


if __name__ == "__main__":
    main()
