"""Studies beside the coverage table: wrong initialisations, time to go, class values wrong by 2.

Each makes tasks, lets `run(function, tasks)` do them in order, and yields the lines of its table.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from coverage_product import Line, Stated
from coverage_regimes import REGIMES, RTK, TIME_TO_GO
from coverage_rows import generator, row_of
from coverage_simulator import Made, simulate
from coverage_tables import duration, percent, table

from fieldbook.model.session import FixClass
from fieldbook.reduce.fix_classes import class_of_quality

Run = Callable[..., Iterator[Any]]

# -- wrong initialisations ---------------------------------------------------------------------------------------

DISTANCES_M = (0.0, 0.02, 0.03, 0.05, 0.07, 0.10, 0.15, 0.30, 0.60)
LEAST_EPOCHS = 5
MANY_SHARE, FEW_SHARE = (0.08, 0.38), (0.002, 0.03)


@dataclass
class Verdict:
    """What became of the wrong initialisation of one session."""

    epochs: int
    used: bool
    reported: bool
    undecided: bool  # initialisations_disagree
    right_lost: int
    circle: bool


BIAS_M = (0.005, 0.010)  # sd of each initialisation's own small bias, where the row says so
WRONG_CASES = (
    (120, MANY_SHARE, False),
    (300, MANY_SHARE, False),
    (900, MANY_SHARE, False),
    (3600, MANY_SHARE, False),
    (3600, FEW_SHARE, False),
    (900, MANY_SHARE, True),
)
WrongCase = tuple[int, tuple[float, float], bool]


def _wrong(task: tuple[float, WrongCase, int]) -> Verdict:
    distance_m, (length_s, share, biased), seed = task
    regime = replace(
        RTK, initialisations=3, wrong_m=(distance_m, distance_m), wrong_share=share,
        bias_m=BIAS_M if biased else (0.0, 0.0),
    )  # fmt: skip
    made = simulate(regime, length_s, generator(f"wrong {distance_m} {share} {biased}", length_s, seed))
    return _verdict(made, Line(made).at())


def _verdict(made: Made, stated: Stated) -> Verdict:
    present = np.unique(made.number[made.quality == made.regime.quality])
    epochs = int(((made.number == made.wrong) & (made.quality == made.regime.quality)).sum())
    wanted = int(np.searchsorted(present, made.wrong)) + 1 if epochs else 0  # numbers as the product counts them
    judged = stated.reduced.judged
    told = {item.figures["initialisation"] for item in stated.findings if item.code == "wrong_initialisation"}
    return Verdict(
        epochs,
        wanted in judged.used,
        wanted in told and wanted in {item.number for item in judged.wrong},
        any(item.code == "initialisations_disagree" for item in stated.findings),
        sum(item.number != wanted and item.code == "initialisation" and item.kept >= LEAST_EPOCHS
            for item in judged.initialisations),
        stated.circle,
    )  # fmt: skip


def wrong_initialisations(run: Run, seeds: int) -> Iterator[str]:
    """Distance in space, in a random direction; 8 to 38 % of the time, or a few seconds to a minute.

    0.00 m: none is wrong; what is reported then is a false alarm.
    """
    tasks = [(d, case, seed) for d in DISTANCES_M for case in WRONG_CASES for seed in range(seeds)]
    found: dict[tuple[float, WrongCase], list[Verdict]] = {}
    for task, verdict in zip(tasks, run(_wrong, tasks, chunksize=10), strict=True):
        if verdict.epochs >= LEAST_EPOCHS:
            found.setdefault(task[:2], []).append(verdict)
    body = []
    for (d, (t, share, biased)), items in found.items():
        used, told = sum(v.used for v in items), sum(v.reported for v in items)
        missed = " !" if d >= 0.1 and (used or told < len(items)) else ""
        body.append([
            f"{d:.2f} m", duration(t), f"{100 * share[0]:.1f} to {100 * share[1]:.0f} %", "5 / 10 mm" if biased else "0",
            str(len(items)), f"{used}{missed}", f"{told} ({100 * told / len(items):.1f} %)",
            str(sum(v.undecided for v in items)), str(sum(v.right_lost > 0 for v in items)),
            f"{percent([v.circle for v in items]):.1f}",
        ])  # fmt: skip
    head = ("off by", "length", "share of the time", "own biases", "n", "used", "reported", "undecided")
    yield from table((*head, "a right one lost", "circle %"), body)


# -- time to go --------------------------------------------------------------------------------------------------


@dataclass
class Answer:
    """One requirement line at one moment, and what came of waiting."""

    state: str
    seconds: float | None
    beyond: bool = False  # longer than what is simulated
    met: bool | None = None
    ratio: float | None = None  # printed figure after waiting / requirement


def _go(task: tuple[str, int, int]) -> list[Answer]:
    name, start_s, seed = task
    regime, _, requirements, longest_s = TIME_TO_GO[name]
    made = simulate(regime, longest_s, generator(f"go {name} {start_s}", longest_s, seed))
    line = Line(made)
    answers: list[tuple[Answer, int, float]] = []
    for wanted in requirements:
        line.require(wanted)
        reduced = line.at(start_s).reduced
        for axis, go in enumerate((reduced.horizontal, reduced.vertical)):
            answer = Answer(go.state, go.seconds)
            answer.beyond = go.seconds is not None and start_s + go.seconds > longest_s
            answers.append((answer, axis, wanted[axis]))
    waiting = [(a.seconds, k) for k, (a, _, _) in enumerate(answers) if a.state == "predicted" and not a.beyond]
    for seconds, k in sorted(waiting):  # type: ignore[type-var]
        answer, axis, wanted_m = answers[k]
        uncertainty = line.at(start_s + float(seconds or 0) + regime.step_s).reduced.reduction.uncertainty
        figure = uncertainty.vertical95_m if axis else uncertainty.horizontal95_m
        answer.met, answer.ratio = figure is not None and figure <= wanted_m, (figure or np.inf) / wanted_m
    return [answer for answer, _, _ in answers]


def time_to_go(run: Run, seeds: int) -> Iterator[str]:
    """Requirement met after the stated time, pooled per regime and class; goal 70 to 95 % per class."""
    tasks = [(name, start, seed) for name, row in TIME_TO_GO.items() for start in row[1] for seed in range(seeds)]
    pools: dict[str, list[Answer]] = {}
    for (name, start, _), answers in zip(tasks, run(_go, tasks, chunksize=4), strict=True):
        regime_class = class_of_quality(TIME_TO_GO[name][0].quality).name
        for pool in (f"{name}, asked after {duration(start)}", f"class {regime_class}"):
            pools.setdefault(pool, []).extend(answers)
    body = []
    for pool, answers in sorted(pools.items(), key=lambda item: item[0].startswith("class")):
        waited = [a for a in answers if a.met is not None]
        share = percent([a.met for a in waited]) if waited else float("nan")
        sign = " !" if pool.startswith("class") and not 70 <= share <= 95 else ""
        states = [sum(a.state == s for a in answers) for s in ("reached", "not safely reachable", "cannot reach")]
        body.append([
            pool, str(len(answers)), str(states[0]), str(len(waited)), f"{share:.1f}{sign}",
            f"{np.median([a.ratio for a in waited]):.3f}" if waited else "", str(sum(a.beyond for a in answers)),
            *map(str, states[1:]),
        ])  # fmt: skip
    head = ("pool", "asked", "already met", "waited", "then met %", "figure / requirement", "longer than simulated")
    yield from table((*head, "not safely reachable", "cannot reach"), body)


# -- class values wrong by 2 -------------------------------------------------------------------------------------

FACTORS = {
    "as they are": (1.0, 1.0),
    "sigma x 0.5": (0.5, 1.0),
    "tau x 0.5": (1.0, 0.5),
    "both x 0.5": (0.5, 0.5),
    "sigma x 2": (2.0, 1.0),
    "tau x 2": (1.0, 2.0),
    "both x 2": (2.0, 2.0),
}
CLASS_CASES = (("rtk", 120), ("rtk", 900), ("rtk", 3600), ("rtk_two", 900), ("rtk_flicker", 900), ("dgps", 120),
               ("dgps", 900), ("dgps", 3600), ("autonomous", 120), ("autonomous", 900), ("autonomous", 3600))  # fmt: skip


def _classed(task: tuple[str, int, str, int]) -> tuple[bool, float, bool, float]:
    name, length_s, factor, seed = task
    regime, (size, time) = REGIMES[name], FACTORS[factor]
    true = class_of_quality(regime.quality)
    stated = FixClass(true.horizontal_m * size, true.vertical_m * size, true.correlation_s * time, "wrong on purpose")
    row = row_of(regime, length_s, seed, stated)
    return row.circle, float(row.inside[:2].mean()), bool(row.inside[2]), float(np.median(row.width))


def wrong_class(run: Run, seeds: int) -> Iterator[str]:
    """Circle / plan components / height coverage in percent, and the median width, per stated factor."""
    tasks = [(name, t, f, seed) for name, t in CLASS_CASES for f in FACTORS for seed in range(seeds)]
    found: dict[tuple[str, int, str], list[tuple[bool, float, bool, float]]] = {}
    for task, item in zip(tasks, run(_classed, tasks, chunksize=10), strict=True):
        found.setdefault(task[:3], []).append(item)
    body = []
    for name, t in CLASS_CASES:
        cells = []
        for factor in FACTORS:
            part = np.array(found[name, t, factor], dtype=float)
            circle, plan, height = 100 * part[:, :3].mean(axis=0)
            cells.append(f"{circle:.1f} / {plan:.1f} / {height:.1f}, {np.median(part[:, 3]):.2f}")
        body.append([name, duration(t), *cells])
    yield from table(("regime", "length", *FACTORS), body)
