"""How the mean comes to rest: the running mean between its 95 % band and the wanted limits, against time.

Two strips, plan and height. In plan the distance of the running mean from the latest one is drawn, with the circle of that
moment above it; in height the mean with its band on both sides. Time runs from the first epoch heard.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fieldbook.model.live import LiveView
from fieldbook.model.reduction import Convergence
from fieldbook.screens.canvas import Canvas
from fieldbook.screens.plain import fit, pad
from fieldbook.screens.rows import BLANK, Row, beside, row
from fieldbook.screens.words import length_95

Floats = NDArray[np.float64]
LABEL = 7  # cells of the figures at the left of a strip
LEAST_ROWS = 6
MOST_OF_WANTED = 3.0  # what lies further out than three times the wanted figure is drawn at the edge


@dataclass(frozen=True)
class Strip:
    """What one strip draws, in metres; high and low are the band's edges."""

    title: str
    time_s: Floats
    mean_m: Floats
    high_m: Floats
    low_m: Floats
    wanted_m: float
    both_sides: bool


def settling_rows(view: LiveView, width: int, height: int, *, ascii_only: bool = False) -> list[Row]:
    """At most `height` rows; none when there is no room for a figure."""
    if height < LEAST_ROWS or view.occupation is None:
        return []
    title = row((" RUNNING MEAN", "strong"), (fit(f"  {_since(view)}", max(0, width - 14)), "soft"))
    run = view.convergence
    if run is None or len(run.times_s) < 2:
        return [title, row((" not yet: it takes a minute of epochs", "soft"))]
    wanted = view.occupation.session.requirement
    strips = [_plan(run, wanted.horizontal_95_m), _height(run, wanted.vertical_95_m)]
    half = (width - 1) // 2
    drawn = [_strip(strip, half, height - 2, ascii_only=ascii_only) for strip in strips]
    legend = " line: mean about the latest; dots: 95 %; wide: wanted"
    return [title, *beside(drawn[0], drawn[1], half), row((fit(legend, width - 1), "soft"))]


def _since(view: LiveView) -> str:
    run = view.convergence
    if run is None:
        return ""
    if run.inside_since is None:
        return "not inside the wanted figures yet"
    return f"inside the wanted figures since {run.inside_since[11:16]} UTC"


def _plan(run: Convergence, wanted_m: float) -> Strip:
    distance = np.hypot(np.asarray(run.east_m), np.asarray(run.north_m))
    circle = np.asarray(run.horizontal95_m)
    return Strip("plan", np.asarray(run.times_s), distance, circle, circle, wanted_m, both_sides=False)


def _height(run: Convergence, wanted_m: float) -> Strip:
    known = [k for k, (up, half) in enumerate(zip(run.up_m, run.vertical95_m, strict=True)) if None not in (up, half)]
    up = np.array([run.up_m[k] for k in known], dtype=float)
    half = np.array([run.vertical95_m[k] for k in known], dtype=float)
    time_s = np.array([run.times_s[k] for k in known], dtype=float)
    return Strip("height", time_s, up, up + half, up - half, wanted_m, both_sides=True)


def _strip(strip: Strip, width: int, rows: int, *, ascii_only: bool) -> list[Row]:
    title = row(
        (" " * (LABEL + 1), "soft"),
        (fit(f"{strip.title}, wanted {length_95(strip.wanted_m)}", width - LABEL - 2), "soft"),
    )
    canvas = Canvas(max(4, width - LABEL - 2), rows - 1)
    if len(strip.time_s) < 2:
        return [title, row((" " * (LABEL + 1) + "not known", "soft")), *[BLANK] * (rows - 2)]
    reach = min(max(float(np.abs(strip.high_m).max()), 1.2 * strip.wanted_m), MOST_OF_WANTED * strip.wanted_m)
    span = max(float(strip.time_s[-1] - strip.time_s[0]), 1.0)
    across = np.linspace(0.0, span, canvas.width)
    top = (canvas.height - 1) / (2.0 if strip.both_sides else 1.0)

    def drawn(values: Floats, style: str, *, every: int = 1) -> None:
        held = np.clip(np.interp(across, strip.time_s - strip.time_s[0], values), -reach, reach)
        canvas.dots(np.arange(canvas.width, dtype=float)[::every], (top * (1.0 - held / reach))[::every], style)

    limits = (strip.wanted_m, -strip.wanted_m) if strip.both_sides else (strip.wanted_m,)
    for limit in limits:
        drawn(np.full_like(strip.mean_m, limit), "rule", every=3)
    edges = (strip.high_m, strip.low_m) if strip.both_sides else (strip.high_m,)
    for edge in edges:
        drawn(edge, "accent", every=2)
    drawn(strip.mean_m, "text")
    lines = canvas.rows_of_spans(("rule", "accent", "text"), ascii_only=ascii_only)
    labels = [""] * len(lines)
    labels[0] = _label(reach)
    labels[-1] = _label(-reach) if strip.both_sides else "0"
    if strip.both_sides and len(lines) > 2:
        labels[len(lines) // 2] = "0"
    return [
        title,
        *[row((pad(text, LABEL, right=True), "soft"), " ") + line for text, line in zip(labels, lines, strict=True)],
    ]


def _label(value_m: float) -> str:
    return f"{1000 * value_m:.0f} mm" if abs(value_m) < 0.9995 else f"{value_m:.1f} m"
