"""One simulated occupation through the product: the row the coverage, width and location tables are made of."""

from __future__ import annotations

import zlib
from dataclasses import dataclass

import numpy as np
from coverage_product import Line, Stated
from coverage_references import known_covariance, naive, usual_means
from coverage_simulator import Made, Regime, simulate
from numpy.typing import NDArray

from fieldbook.model.session import FixClass
from fieldbook.reduce.fix_classes import class_of_quality

Floats = NDArray[np.float64]
CIRCLE_95 = 2.447747  # radius of the 95 % circle of a round normal distribution, in standard deviations
MEANS = ("mean", "median", "Huber", "3 MAD")


@dataclass
class Row:
    """Figures of one occupation. Arrays are per axis, east, north, up; errors in oracle standard deviations."""

    circle: bool
    ellipse: bool
    inside: NDArray[np.bool_]
    naive_inside: NDArray[np.bool_]
    naive_circle: bool
    width: Floats  # U95/(1.96 sqrt(oracle^2 + floor^2))
    ratio: float  # T/tau
    product: Floats
    oracle: Floats
    means: Floats  # shape (4, 3), in the order of MEANS
    kept: float  # share of the good epochs' number that was kept
    contradictions: int  # leave lines whose time to go is 0 although not met, or met although not 0
    stops: tuple[str, ...]


def generator(name: str, length_s: float, seed: int) -> np.random.Generator:
    """Own stream per regime, length and seed."""
    return np.random.default_rng([zlib.crc32(name.encode()), int(length_s), seed])


def row_of(regime: Regime, length_s: float, seed: int, fix_class: FixClass | None = None) -> Row:
    """Simulate, reduce, compare."""
    made = simulate(regime, length_s, generator(regime.name, length_s, seed))
    return judged_row(made, Line(made, fix_class).at())


def judged_row(made: Made, stated: Stated) -> Row:
    """Compare what is stated with the truth and with the references."""
    oracle, sd, ratio = known_covariance(made)
    plain, s_over_root_n = naive(made)
    floor = np.array(class_of_quality(made.regime.quality).floor_enu_m)
    usual = usual_means(made)
    return Row(
        circle=stated.circle,
        ellipse=stated.ellipse,
        inside=np.append(np.abs(stated.gap_m[:2]) <= stated.u95_m[:2], stated.vertical),
        naive_inside=np.abs(plain) <= 1.96 * s_over_root_n,
        naive_circle=bool(np.hypot(*plain[:2]) <= CIRCLE_95 * np.sqrt(np.mean(s_over_root_n[:2] ** 2))),
        width=stated.u95_m / (1.959964 * np.sqrt(sd**2 + floor**2)),
        ratio=ratio,
        product=stated.gap_m / sd,
        oracle=oracle / sd,
        means=np.array([usual[name] for name in MEANS]) / sd,
        kept=stated.reduced.reduction.kept / max(int(made.clean.sum()), 1),
        contradictions=_contradictions(stated),
        stops=tuple(item.code for item in stated.findings if item.severity == "stop"),
    )


def _contradictions(stated: Stated) -> int:
    """Time to go must be 0 exactly when the printed figure meets the requirement."""
    uncertainty = stated.reduced.reduction.uncertainty
    have = {"horizontal_95_m": uncertainty.horizontal95_m, "vertical_95_m": uncertainty.vertical95_m}
    wrong = 0
    for line in stated.leave.lines:
        if line.line not in have:
            continue
        meets = float(have[line.line] or np.inf) <= float(line.wanted or 0)  # type: ignore[arg-type]
        wrong += meets != (line.time_to_go_s == 0) or meets != line.met
    return wrong
