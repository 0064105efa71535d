"""Bursts longer than the windows of screening are made for, and steps: where they lie, how long, in which axis.

Sessions of regime `rtk` with one disturbance each. Burst: 5 to 20 sigma in a random sense per axis, 30 to 60 s if not
stated. Step: 0.1 to 0.5 m in a random direction, at the beginning or the end, holding the stated share; the truth is the
other place, so beyond one half a right answer does not exist: what counts is that the step is reported.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from typing import Any

import numpy as np
from coverage_product import Line
from coverage_regimes import RTK
from coverage_rows import Row, generator, judged_row
from coverage_simulator import Made, simulate
from coverage_tables import duration, percent, table

Plant = Callable[[Made, np.random.Generator], None]


def _burst(made: Made, rng: np.random.Generator, start: int, length: int, axes: tuple[int, ...] = (0, 1, 2)) -> None:
    sigma = np.sqrt([made.covariance(axis, 1)[0] for axis in range(3)])
    offset = rng.uniform(5, 20) * sigma * rng.choice([-1, 1], size=3) * np.isin(range(3), axes)
    _moved(made, slice(start, start + length), offset)


def _moved(made: Made, rows: slice, offset: np.ndarray) -> None:
    made.errors_m[rows] += offset
    made.clean[rows] = False


def _anywhere(made: Made, rng: np.random.Generator, length: int, first: float = 0.0, last: float = 1.0) -> int:
    count = len(made.index)
    return int(rng.integers(int(first * count), int(last * count) - length))


def _drawn(rng: np.random.Generator) -> int:
    return int(rng.integers(30, 61))


def _at_start(made: Made, rng: np.random.Generator) -> None:
    _burst(made, rng, 0, _drawn(rng))


def _at_end(made: Made, rng: np.random.Generator) -> None:
    length = _drawn(rng)
    _burst(made, rng, len(made.index) - length, length)


def _long(made: Made, rng: np.random.Generator) -> None:
    _burst(made, rng, _anywhere(made, rng, 120), 120)


def _two(made: Made, rng: np.random.Generator) -> None:
    _burst(made, rng, _anywhere(made, rng, 60, 0.0, 0.5), _drawn(rng))
    _burst(made, rng, _anywhere(made, rng, 60, 0.5, 1.0), _drawn(rng))


def _one_axis(made: Made, rng: np.random.Generator) -> None:
    _burst(made, rng, _anywhere(made, rng, 60), _drawn(rng), (int(rng.integers(3)),))


def _step(share: float) -> Plant:
    def plant(made: Made, rng: np.random.Generator) -> None:
        direction = rng.normal(size=3)
        length = round(share * len(made.index))
        start = 0 if rng.random() < 0.5 else len(made.index) - length
        _moved(made, slice(start, start + length), direction / np.linalg.norm(direction) * rng.uniform(0.1, 0.5))

    return plant


CASES: dict[str, tuple[Plant, tuple[int, ...]]] = {
    "burst at the beginning": (_at_start, (120, 300, 900)),
    "burst at the end": (_at_end, (120, 300, 900)),
    "burst of 120 s": (_long, (300, 900, 3600)),
    "two bursts": (_two, (300, 900)),
    "burst in one axis": (_one_axis, (120, 300, 900)),
    "step holding 20 %": (_step(0.2), (300, 900, 3600)),
    "step holding 40 %": (_step(0.4), (300, 900, 3600)),
    "step holding 60 %": (_step(0.6), (300, 900, 3600)),
}


def _disturbed(task: tuple[str, int, int]) -> tuple[Row, bool, bool]:
    name, length_s, seed = task
    rng = generator(f"bursts {name}", length_s, seed)
    made = simulate(RTK, length_s, rng)
    CASES[name][0](made, rng)
    stated = Line(made).at()
    codes = {item.code for item in stated.findings}
    return judged_row(made, stated), "step" in codes, "bursts" in codes


def bursts_and_steps(run: Callable[..., Iterator[Any]], seeds: int) -> Iterator[str]:
    """Place against the known-covariance mean of the sound epochs and the best usual mean, coverage, findings."""
    tasks = [
        (name, length_s, seed) for name, (_, lengths) in CASES.items() for length_s in lengths for seed in range(seeds)
    ]
    found: dict[tuple[str, int], list[tuple[Row, bool, bool]]] = {}
    for task, item in zip(tasks, run(_disturbed, tasks, chunksize=10), strict=True):
        found.setdefault(task[:2], []).append(item)
    body = []
    for (name, length_s), items in found.items():
        rows = [item[0] for item in items]
        own, known = _rms([row.product for row in rows]), _rms([row.oracle for row in rows])
        best = min(_rms([row.means[k] for row in rows]) for k in range(4))
        body.append([
            name, duration(length_s), str(len(rows)), f"{own / known:.2f}", f"{best / known:.2f}",
            *(f"{percent(flags):.1f}" for flags in (
                [row.circle for row in rows], [row.inside[2] for row in rows],
                [item[1] for item in items], [item[2] for item in items],
            )),
            f"{np.median([row.width for row in rows]):.2f}",
        ])  # fmt: skip
    head = ("disturbance", "length", "n", "place / known", "best usual mean / known", "circle %", "V %")
    yield from table((*head, "`step` (stop) %", "`bursts` %", "width"), body)


def _rms(values: list[np.ndarray]) -> float:
    return float(np.sqrt(np.mean(np.square(values))))
