"""The right page of the occupation: plan of fixes at 1:1 with the 95 % ellipse of their mean, sky, height trace.

Two things must not be confused: the cloud of fixes, and the region of their mean; they have different strokes and
the legend names both. Initialisations are told apart by shape: dots for the first, then rings, crosses and so on.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fieldbook.model.epoch import Satellite
from fieldbook.model.live import LiveView
from fieldbook.model.reduction import Ellipse95, Trace
from fieldbook.screens.canvas import Canvas, ellipse_points, nice_length
from fieldbook.screens.plain import fit, pad
from fieldbook.screens.rows import BLANK, Row, beside, cropped, heading, paragraph, row
from fieldbook.screens.settling import settling_rows

SHAPES = ("○", "+", "△", "◆")  # second and later initialisations; the first is drawn in dots
ASIDE = "×"
SYSTEM_LETTERS = {"GPS": "G", "GLONASS": "R", "Galileo": "E", "BeiDou": "C", "QZSS": "J", "NavIC": "I", "SBAS": "S"}
Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Look:
    """How to draw: ASCII shades for terminals without braille."""

    ascii_only: bool = False
    running: bool = False  # below the plan stands the running mean, not the heights of the epochs


def sketch_rows(view: LiveView | None, width: int, height: int, look: Look = Look()) -> list[Row]:
    """The whole right page: plan and sky side by side, height trace below, signal strengths last."""
    wide = width >= 76
    rows = [heading("SKETCH", width, "plan 1:1, north up" if wide else "ellipse: 95 % of the mean; plan 1:1")]
    if view is None or view.occupation is None:
        return rows
    square = max(4, min((width - 3) // 4, height - 9))
    plan = plan_rows(view, 2 * square, square, look)
    sky = view.recorder.sky if view.recorder else []
    drawn = beside(plan, sky_rows(sky, 2 * square, square, look), 2 * square + 2)
    if wide:
        drawn = beside(drawn, legend_rows(view, width - 4 * square - 5), 4 * square + 4)
    rows += drawn
    left = height - len(rows) - 2
    if look.running:
        rows += settling_rows(view, width, left, ascii_only=look.ascii_only)
    else:
        rows += trace_rows(view.trace, width, left, look)
    rows += signal_rows(sky, width, height - len(rows))
    return rows[:height]


def legend_rows(view: LiveView, width: int) -> list[Row]:
    """What the strokes mean, where there is room beside the sketch."""
    rows: list[Row] = []
    for index, number in enumerate(runs_of(view.trace) if view.trace else []):
        shape = "dots" if index == 0 else SHAPES[(index - 1) % len(SHAPES)].ljust(4)
        rows.append(row((shape, "strong"), (f"  fixes kept, initialisation {number}", "soft")))
    rows += [row((f"{ASIDE}   ", "warn"), ("  set aside", "soft")), BLANK]
    rows += paragraph("The ellipse is the 95 % region of the mean, not of the fixes.", width, style="accent", indent=0)
    rows += [BLANK, *paragraph("Sky: capitals are used, small letters are not.", width, style="soft", indent=0)]
    return [cropped(line, width) for line in rows]


def runs_of(trace: Trace) -> list[int]:
    """Numbers of the initialisations that have kept fixes, in order; the first is drawn in dots."""
    return sorted({number for number, kept in zip(trace.initialisation, trace.kept, strict=True) if kept})


def _arrays(trace: Trace) -> tuple[Floats, Floats, NDArray[np.bool_], NDArray[np.int64]]:
    return (
        np.asarray(trace.east_m, dtype=float),
        np.asarray(trace.north_m, dtype=float),
        np.asarray(trace.kept, dtype=bool),
        np.asarray(trace.initialisation, dtype=np.int64),
    )


def plan_half_width_m(trace: Trace, ellipse: Ellipse95 | None) -> float:
    """Half the side of the plan: holds 99 % of the kept fixes and the whole ellipse; at least a millimetre."""
    east, north, kept, _ = _arrays(trace)
    reach = np.maximum(np.abs(east[kept]), np.abs(north[kept])) if kept.any() else np.zeros(1)
    need = float(np.quantile(reach, 0.99)) * 1.1
    return max(0.001, need, 1.25 * ellipse.major_m if ellipse else 0.0)


def plan_rows(view: LiveView, columns: int, rows: int, look: Look = Look()) -> list[Row]:
    """Plan of `rows` rows (two for the bar and the legend); dots are square, so the plan is 1:1."""
    drawing_rows = max(2, rows - 2)
    canvas = Canvas(columns, drawing_rows)
    trace = view.trace
    if trace is None or not trace.east_m:
        return [BLANK] * (rows // 2) + [row(("  no fixes yet", "soft"))]
    ellipse = view.reduction.uncertainty.ellipse95 if view.reduction else None  # of what was measured
    half = plan_half_width_m(trace, ellipse)
    scale = (min(canvas.width, canvas.height) - 2) / (2.0 * half)  # dots per metre
    middle_x, middle_y = (canvas.width - 1) / 2.0, (canvas.height - 1) / 2.0
    east, north, kept, run = _arrays(trace)
    x, y = middle_x + scale * east, middle_y - scale * north
    runs = runs_of(trace)
    canvas.dots(x[kept], y[kept], "text")
    for line, column, index in _majority(x[kept], y[kept], run[kept], runs):
        if index > 0:
            canvas.text(column, line, SHAPES[(index - 1) % len(SHAPES)], "text")
    kept_outside = canvas.outside
    canvas.outside = 0
    canvas.glyphs(x[~kept], y[~kept], ASIDE, "warn")
    aside_outside = canvas.outside
    if ellipse is not None:
        _ellipse(canvas, ellipse, scale, middle_x, middle_y)
    bar_m = nice_length(0.45 * canvas.width / scale)
    return [
        *canvas.rows_of_spans(("text", "accent"), ascii_only=look.ascii_only),
        _bar(bar_m, scale, columns),
        _legend(runs, int((~kept).sum()), aside_outside + kept_outside, columns),
    ]


def _majority(x: Floats, y: Floats, run: NDArray[np.int64], runs: list[int]) -> list[tuple[int, int, int]]:
    """(line, column, index of the initialisation) of each cell with fixes: the one with most fixes gives the shape."""
    counts: dict[tuple[int, int], list[int]] = {}
    index_of = {number: index for index, number in enumerate(runs)}
    lines = np.floor((y + 0.5) / 4).astype(int).tolist()
    columns = np.floor((x + 0.5) / 2).astype(int).tolist()
    for line, column, number in zip(lines, columns, run.tolist(), strict=True):
        counts.setdefault((line, column), [0] * len(runs))[index_of[number]] += 1
    return [(line, column, tally.index(max(tally))) for (line, column), tally in counts.items()]


def _ellipse(canvas: Canvas, ellipse: Ellipse95, scale: float, middle_x: float, middle_y: float) -> None:
    east, north = ellipse_points(ellipse.major_m, ellipse.minor_m, ellipse.azimuth_deg)
    x, y = middle_x + scale * east, middle_y - scale * north
    for column, line in set(zip((x // 2).astype(int).tolist(), (y // 4).astype(int).tolist(), strict=True)):
        canvas.uncover(column, line)  # the ellipse is never hidden by the fixes
    before = canvas.outside
    canvas.dots(x, y, "accent")
    canvas.outside = before


def _bar(bar_m: float, scale: float, columns: int) -> Row:
    cells = max(1, round(bar_m * scale / 2.0))
    text = f"{bar_m * 1000:.0f} mm" if bar_m < 1 else f"{bar_m:.0f} m"
    if bar_m < 0.001:
        text = f"{bar_m * 1000:g} mm"
    bar = "├" + "─" * max(0, cells - 2) + "┤"
    return row(bar, " ", (fit(text, columns - len(bar) - 1), "soft"))


def _legend(runs: list[int], aside: int, outside: int, columns: int) -> Row:
    parts = [f"{SHAPES[(index - 1) % len(SHAPES)]} init. {number}" for index, number in enumerate(runs) if index]
    if aside:
        parts.append(f"{ASIDE} aside {aside}")
    if outside:
        parts.append(f"({outside} outside)")
    text = " ".join(parts)
    if len(text) > columns:
        text = text.replace("init. ", "").replace(" aside", "").replace(" outside", " out")
    return row((fit(text, columns), "soft"))


def sky_rows(sky: list[Satellite], columns: int, rows: int, look: Look = Look()) -> list[Row]:
    """Satellites by azimuth and elevation; capitals are used in the fix, small letters are not."""
    drawing_rows = max(3, rows - 1)
    canvas = Canvas(columns, drawing_rows)
    radius = (min(canvas.width, canvas.height) - 4) / 2.0
    middle_x, middle_y = (canvas.width - 1) / 2.0, (canvas.height - 1) / 2.0
    angle = np.linspace(0, 2 * math.pi, int(8 * radius) + 8)
    for share in (1.0, 0.5):
        step = slice(None) if share == 1.0 else slice(None, None, 4)
        canvas.dots(
            middle_x + share * radius * np.sin(angle[step]), middle_y - share * radius * np.cos(angle[step]), "rule"
        )
    canvas.text(columns // 2, 0, "N", "soft")
    canvas.text(columns - 1, drawing_rows // 2, "E", "soft")
    canvas.text(0, drawing_rows // 2, "W", "soft")
    canvas.text(columns // 2, drawing_rows - 1, "S", "soft")
    for item in sky:
        if item.azimuth_deg is None or item.elevation_deg is None:
            continue
        reach = radius * (90.0 - item.elevation_deg) / 90.0
        azimuth = math.radians(item.azimuth_deg)
        x, y = middle_x + reach * math.sin(azimuth), middle_y - reach * math.cos(azimuth)
        letter = SYSTEM_LETTERS.get(item.system, "?")
        used = item.used
        canvas.glyphs(np.array([x]), np.array([y]), letter if used else letter.lower(), "strong" if used else "soft")
    used_count = sum(item.used for item in sky)
    note = f"sky: {used_count} used of {len(sky)}" if sky else "sky: nothing heard"
    return [*canvas.rows_of_spans(("rule",), ascii_only=look.ascii_only), row((fit(note, columns), "soft"))]


def trace_rows(trace: Trace | None, width: int, height: int, look: Look = Look()) -> list[Row]:
    """Height of the kept epochs about their mean against time, in millimetres."""
    if height < 3:
        return []
    title = row((" HEIGHT", "strong"), (" mm from mean, against time", "soft"))
    if trace is None:
        return [title, *[BLANK] * (height - 1)]
    # an epoch without height stays out of this figure; it is kept in the plan
    points = [(t, up, kept) for t, up, kept in zip(trace.time_s, trace.up_m, trace.kept, strict=True) if up is not None]
    if not points:
        return [title, row((" no heights received", "soft")), *[BLANK] * (height - 2)]
    time_s, up, kept = (np.asarray(column) for column in zip(*points, strict=True))
    kept = kept.astype(bool)
    label = 7
    canvas = Canvas(width - label - 1, height - 1)
    reach = max(0.001, float(np.quantile(np.abs(up[kept]), 0.995)) * 1.1 if kept.any() else 0.001)
    span = max(1.0, float(time_s.max() - time_s.min()))
    x = (time_s - time_s.min()) / span * (canvas.width - 1)
    y = (canvas.height - 1) / 2.0 * (1.0 - up / reach)
    zero = np.arange(0, canvas.width, 4, dtype=float)
    canvas.dots(zero, np.full(len(zero), (canvas.height - 1) / 2.0), "rule")
    canvas.dots(x[kept], y[kept], "text")
    inside = np.clip(y[~kept], 0, canvas.height - 1)  # what was set aside stays visible, at the edge if beyond it
    canvas.glyphs(x[~kept], inside, ASIDE, "warn")
    drawn = canvas.rows_of_spans(("rule", "text"), ascii_only=look.ascii_only)
    labels = [""] * len(drawn)
    labels[0], labels[len(drawn) // 2], labels[-1] = f"{1000 * reach:+.0f}", "0", f"{-1000 * reach:+.0f}"
    return [
        title,
        *[row((pad(text, label, right=True), "soft"), " ") + line for text, line in zip(labels, drawn, strict=True)],
    ]


def signal_rows(sky: list[Satellite], width: int, height: int) -> list[Row]:
    """Signal strengths in dB-Hz, strongest first; small letters are not used in the fix."""
    heard = sorted((item for item in sky if item.cn0_dbhz is not None), key=lambda item: -(item.cn0_dbhz or 0.0))
    if height < 1 or not heard:
        return []
    lines: list[Row] = []
    text = " dB-Hz"
    for item in heard:
        letter = SYSTEM_LETTERS.get(item.system, "?")
        part = f"  {letter if item.used else letter.lower()}{item.number:02d} {item.cn0_dbhz:.0f}"
        if len(text) + len(part) > width - 1:
            lines.append(cropped(row((text, "soft")), width))
            text = "      "
        text += part
    lines.append(row((text, "soft")))
    return lines[:height]
