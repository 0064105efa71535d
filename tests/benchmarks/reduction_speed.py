"""Reduction: ten times the epochs against ten times the time, a live look, and folding a long book.

Goal: 10 n epochs in at most 11 x the time of n. The absolute figures are printed for orientation only.
"""

from __future__ import annotations

import random
import tempfile
import time
from pathlib import Path

from fieldbook.book.store import Book
from fieldbook.clock import FakeClock
from fieldbook.model.epoch import Epoch
from fieldbook.reduce.estimate import estimate
from fieldbook.reduce.gates import Limits
from fieldbook.reduce.initialisations import InitialisationJudge
from fieldbook.reduce.screening import Screening

N = 20_000


def epochs(count: int) -> list[Epoch]:
    """RTK epochs at 1 Hz with correlated errors, from a seed."""
    chance = random.Random(11)
    drift, rows = 0.0, []
    for number in range(1, count + 1):
        drift = 0.995 * drift + chance.gauss(0, 60)
        rows.append(
            Epoch(
                number, "GGA", "GN", day=number // 86_400, time_ms=1000 * (number % 86_400),
                latitude_e8min=-200_000_000_000 + round(drift + chance.gauss(0, 150)),
                longitude_e8min=880_000_000_000 + round(drift + chance.gauss(0, 150)),
                latitude_decimals=8, longitude_decimals=8, altitude_e5m=23_000_000 + round(chance.gauss(0, 600)),
                altitude_decimals=4, separation_e5m=1_348_200, separation_decimals=4, quality=4, satellites=18,
                hdop_milli=700, age_ms=1000, station="0042",
            )
        )  # fmt: skip
    return rows


def reduced_s(rows: list[Epoch]) -> float:
    """Seconds to push and evaluate all rows at once."""
    begun = time.perf_counter()
    screening = Screening(Limits((4,)))
    screening.push(rows)
    screened = screening.evaluate()
    estimate(screened, InitialisationJudge().judge(screened))
    return time.perf_counter() - begun


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


def main() -> None:
    """Print the ratios."""
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
