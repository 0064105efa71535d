"""Calibration of the stated 95 %: simulated occupations of known truth through the product's own line.

    python tests/benchmarks/coverage.py                   short form: dozens of seeds, some minutes
    python tests/benchmarks/coverage.py --long            400 seeds
    ... --regime rtk --regime dgps --seeds 100 --jobs 2   --only coverage|bursts|wrong|time|class|floor

Strategy: `coverage_simulator` makes received epochs with errors of exactly known covariance (nothing of the
estimator's code or shape), `coverage_product` reduces them by `OccupationReducer` and reads what is stated,
`coverage_references` forms the known-covariance mean, the naive s/sqrt(n) and the usual means, `coverage_studies` does
wrong initialisations, time to go and class values wrong by 2, `coverage_bursts` long bursts and steps,
`coverage_combined` several occupations of one mark with the floor's error drawn. A goal missed is marked with '!', not hidden.

Coverage of short sessions is conditional on the class values: the simulator's sizes are those of the classes, spread
by 20 % (size) and 40 % (correlation time) between sessions.
"""

from __future__ import annotations

import argparse
import os
import sys
import time
from collections.abc import Callable, Iterator, Sequence
from functools import partial
from multiprocessing import get_context
from pathlib import Path

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")  # two workers, not two workers of two threads
if not any((Path(folder) / "fieldbook").is_dir() for folder in sys.path if folder):
    sys.path.insert(0, str(Path(__file__).parents[2]))

import coverage_bursts as bursts
import coverage_combined as combined
import coverage_studies as studies
import coverage_tables as tables
from coverage_regimes import DURATIONS_S, REGIMES
from coverage_rows import Row, row_of

SHORT_SEEDS, LONG_SEEDS = 24, 400
HEAVY_TAIL = ("rtk_outliers", 120)  # its location needs 400 seeds whatever the form
CHUNK = 20
PARTS = ("coverage", "bursts", "wrong", "time", "class", "floor")


def rows_of(task: tuple[str, int, int, int]) -> list[Row]:
    """Rows of the seeds first <= seed < last."""
    name, length_s, first, last = task
    return [row_of(REGIMES[name], length_s, seed) for seed in range(first, last)]


def all_rows(run: Callable[..., Iterator[list[Row]]], names: Sequence[str], seeds: int) -> tables.Rows:
    """Every regime and length."""
    tasks, rows = [], {}
    for name in names:
        for length_s in DURATIONS_S:
            count = max(seeds, LONG_SEEDS) if (name, length_s) == HEAVY_TAIL else seeds
            tasks += [(name, length_s, k, min(k + CHUNK, count)) for k in range(0, count, CHUNK)]
            rows[name, length_s] = []
    for task, found in zip(tasks, run(rows_of, tasks), strict=True):
        rows[task[0], task[1]] += found
    return rows


def show(title: str, lines: Iterator[str]) -> None:
    """One table with its heading."""
    print(f"\n### {title}\n")
    for line in lines:
        print(line)
    sys.stdout.flush()


def main() -> int:
    """Run and print; a goal missed is printed, not a failure."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--long", action="store_true")
    parser.add_argument("--regime", action="append", choices=sorted(REGIMES), metavar="NAME")
    parser.add_argument("--seeds", type=int)
    parser.add_argument("--jobs", type=int, default=2)
    parser.add_argument("--only", action="append", choices=PARTS)
    chosen = parser.parse_args()
    seeds = chosen.seeds or (LONG_SEEDS if chosen.long else SHORT_SEEDS)
    names = chosen.regime or list(REGIMES)
    parts = chosen.only or PARTS
    began = time.perf_counter()
    with get_context("spawn").Pool(chosen.jobs) as pool:
        run = partial(pool.imap, chunksize=1)
        if "coverage" in parts:
            rows = all_rows(run, names, seeds)
            show("Coverage and width; the simulator adds no floor error", tables.coverage(rows))
            show("Width U95 / (1.96 sqrt(known-covariance^2 + floor^2)), median, pooled", tables.pooled_width(rows))
            show("Location: RMS error, product / known covariance and / best usual mean", tables.location(rows))
            show("Summary: circle / ellipse / height coverage in percent", tables.compact(rows))
            show("Sums", tables.sums(rows))
        if "bursts" in parts:
            show("Long bursts and steps", bursts.bursts_and_steps(run, seeds))
        if "wrong" in parts:
            show("A wrong initialisation beside right ones", studies.wrong_initialisations(run, seeds))
        if "time" in parts:
            show("Time to go: sessions extended by the stated time", studies.time_to_go(run, seeds))
        if "class" in parts:
            show("Class values wrong by 2 (stated value / true value)", studies.wrong_class(run, seeds))
        if "floor" in parts:
            show("Several occupations of one mark, the floor's error drawn", combined.floor(run, seeds))
    print(f"\n{time.perf_counter() - began:.0f} s with {chosen.jobs} processes")
    return 0


if __name__ == "__main__":
    sys.exit(main())
