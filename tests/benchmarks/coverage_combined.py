"""Several occupations of one mark, the floor's error drawn too: coverage of each and of what the product combines.

The simulator draws the error that the least uncertainty claimed for a class stands for: normal, of the class's own
size, half of its variance once per mark (station and antenna are the same), half for each occupation. The floor stands for
what one session cannot see of itself; where the errors themselves have parts slower than the session, that is in the
simulation twice. So each case is made three ways: 'on top' (both), 'together' (an occupation's own half is drawn only
as far as the errors slower than the occupation do not fill it; the common half in full), 'none' (no floor). The separation
the receiver prints is one number for the mark, so its rounding error is common too. The naive combination is the mean
of all epochs of all occupations with 1.96 s/sqrt(n).
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator
from dataclasses import replace
from typing import Any

import numpy as np
from coverage_product import Line, mark_of
from coverage_references import naive
from coverage_regimes import REGIMES
from coverage_rows import CIRCLE_95, generator
from coverage_simulator import Made, Place, simulate
from coverage_tables import duration, least, percent, table

from fieldbook.reduce.fix_classes import class_of_quality

CASES: tuple[tuple[str, tuple[int, ...]], ...] = (
    ("rtk", (300, 300)),
    ("rtk", (900, 3600)),
    ("rtk", (3600, 3600, 3600)),
    ("rtk", (120, 14400)),
    ("rtk_two", (900, 900)),
    ("rtk_flicker", (900, 900)),
    ("rtk_flicker", (3600, 3600)),
    ("rtk_flicker", (14400, 14400)),
    ("rtk_init", (3600, 3600)),
    ("rtk_sep1", (900, 900)),
    ("dgps", (300, 900)),
    ("dgps", (3600, 3600)),
    ("autonomous", (900, 900)),
    ("autonomous", (3600, 14400)),
)


FLOORS = ("on top", "together", "none")
LONG_RANGE = ("rtk_two", "rtk_flicker")  # elsewhere nothing is slower than what the class provides for: one way


def occupations_of_one_mark(name: str, lengths_s: tuple[int, ...], seed: int, way: str = "on top") -> list[Made]:
    """Occupations of one place at independent times of day, with the floor's error drawn in one of three ways."""
    regime, rng = REGIMES[name], generator(f"mark {name} {lengths_s}", sum(lengths_s), seed)
    half = np.array(class_of_quality(regime.quality).floor_enu_m) / math.sqrt(2)
    place, common = Place.drawn(rng), half * rng.normal(size=3)
    found = []
    for length_s in lengths_s:
        made = simulate(regime, length_s, rng, replace(place, start_s=int(rng.integers(0, 86_400))))
        own = np.sqrt(np.maximum(half**2 - (_slower_m2(made, length_s) if way == "together" else 0.0), 0.0))
        made.floor_m = common + own * rng.normal(size=3)
        if way == "none":
            made.floor_m = np.zeros(3)
        found.append(made)
    return found


def _slower_m2(made: Made, length_s: int) -> np.ndarray:
    horizontal, vertical = (
        sum(part.slower_m2(length_s) for part in parts) for parts in (made.horizontal, made.vertical)
    )
    return np.array([horizontal, horizontal, vertical])


def _combined(task: tuple[str, tuple[int, ...], int, str]) -> list[float]:
    """Share of occupations whose circle and height hold the truth; then circle, ellipse, V, E/N of the combination."""
    made = occupations_of_one_mark(*task)
    lines = [Line(item) for item in made]
    stated = [line.at() for line in lines]
    mark = mark_of(lines)
    plain = np.mean([naive(item)[0] for item in made], axis=0)
    u = np.sqrt(np.sum([naive(item)[1] ** 2 for item in made], axis=0)) / len(made)
    return [
        float(np.mean([item.circle for item in stated])), float(np.mean([item.vertical for item in stated])),
        float(mark.circle), float(mark.ellipse), float(mark.vertical),
        float(np.mean(np.abs(mark.gap_m[:2]) <= mark.u95_m[:2])),
        float(np.hypot(*plain[:2]) <= CIRCLE_95 * np.sqrt(np.mean(u[:2] ** 2))),
        mark.uncertainty.horizontal95_m / min(item.uncertainty.horizontal95_m for item in stated),
    ]  # fmt: skip


def floor(run: Callable[..., Iterator[Any]], seeds: int) -> Iterator[str]:
    """Coverage of each occupation alone and of the mark, percent, and the mark's circle against its best occupation's."""
    tasks = [
        (name, lengths, seed, way)
        for name, lengths in CASES
        for way in (FLOORS if name in LONG_RANGE else FLOORS[:1])
        for seed in range(seeds)
    ]
    found: dict[tuple[str, tuple[int, ...], str], list[list[float]]] = {}
    for task, item in zip(tasks, run(_combined, tasks, chunksize=5), strict=True):
        found.setdefault((task[0], task[1], task[3]), []).append(item)
    body = []
    for (name, lengths, way), rows in found.items():
        values = np.array(rows)
        cells = [f"{percent(values[:, k]):.1f}" for k in range(7)]
        for k in (2, 3, 4):
            cells[k] += " !" if percent(values[:, k]) < least(len(rows)) else ""
        body.append(
            [name, " + ".join(map(duration, lengths)), way, str(len(rows)), *cells, f"{np.median(values[:, 7]):.2f}"]
        )
    head = (
        "regime",
        "lengths",
        "floor drawn",
        "n",
        "each circle %",
        "each V %",
        "mark circle %",
        "mark ellipse %",
        "mark V %",
    )
    yield from table((*head, "mark E, N %", "naive circle %", "mark circle / best one"), body)
