"""Plan of the fixes and height trace as SVG, drawn from the facts alone and shared by HTML and PDF.

Black on white, one accent for the 95 % figures; what was not used has its own shape (a cross), initialisations differ
by shape, so that a grey print loses nothing. The plan is 1:1: one millimetre east is one millimetre north. Units of
the drawing are tenths of a millimetre on paper; everything is written with fixed decimals, so equal facts give equal
bytes.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from html import escape

from fieldbook.model.canonical import Tree

ACCENT = "#1d4e79"
INK = "#1a1a1a"
PALE = "#9a9a9a"
HAIR = "#c9c9c9"
FONT = "Libertinus Serif, Georgia, serif"
SHAPES = ("circle", "square", "triangle", "diamond", "down", "bar")
TENTHS = 10_000  # stored positions are integers of 0.1 mm


@dataclass(frozen=True)
class Point:
    """One drawn epoch: seconds, metres east, north, up, used or not, initialisation."""

    time_s: float
    east_m: float
    north_m: float
    up_m: float | None
    used: bool
    initialisation: int


def points(facts: Tree) -> list[Point]:
    """The thinned trace of the facts in metres; epochs without a plan position are left out."""
    trace = facts["trace"]
    rows = zip(
        trace["time_ds"],
        trace["east"],
        trace["north"],
        trace["up"],
        trace["used"],
        trace["initialisation"],
        strict=True,
    )
    return [
        Point(time / 10, e / TENTHS, n / TENTHS, None if u is None else u / TENTHS, bool(used), number)
        for time, e, n, u, used, number in rows
        if e is not None and n is not None
    ]


def nice(value: float) -> float:
    """The largest 1, 2 or 5 times a power of ten that is not above `value` (above zero)."""
    power = 10.0 ** math.floor(math.log10(value))
    return max(step * power for step in (1.0, 2.0, 5.0) if step * power <= value * (1 + 1e-9))


def length_text(metres: float) -> str:
    """`10 mm`, `0.5 m`."""
    return f"{metres * 1000:g} mm" if metres < 0.5 else f"{metres:g} m"


def plan_svg(facts: Tree) -> str:
    """Plan of the fixes at 1:1 with the 95 % ellipse of the mean, scale bar and north arrow."""
    drawn = points(facts)
    ellipse = facts["uncertainty"]["receiver"]["ellipse95"]
    major, minor = float(ellipse["major_m"]), float(ellipse["minor_m"])
    half = _half_window([max(abs(p.east_m), abs(p.north_m)) for p in drawn if p.used], major)
    side, margin = 780.0, 10.0
    centre = margin + side / 2
    scale = side / 2 / half
    parts = [_frame(margin, margin, side, side), _cross(margin, side)]
    outside = 0
    for point in sorted(drawn, key=lambda item: item.used):
        x, y = centre + point.east_m * scale, centre - point.north_m * scale
        if not _inside(x, y, margin, side):
            outside += 1
            parts.append(_edge_tick(x, y, centre, side / 2))
        else:
            parts.append(_symbol(x, y, point))
    parts.append(_ellipse(centre, major * scale, minor * scale, float(ellipse["azimuth_deg"])))
    parts.append(_scale_bar(margin + 30, margin + side - 30, nice(half * 0.7), scale))
    parts.append(_north(margin + side - 52, margin + 36))
    legend, height = _legend(facts, drawn, margin, margin + side + 42, outside)
    return _svg(
        800,
        margin + side + 42 + height,
        parts + legend,
        "Plan of the fixes at 1:1 with the 95 % ellipse of their mean",
    )


def height_svg(facts: Tree) -> str:
    """Up component of the fixes over time, about their mean, with the 95 % half-width of the mean."""
    drawn = [point for point in points(facts) if point.up_m is not None]
    left, top, width, height = 92.0, 10.0, 698.0, 700.0
    stated = facts["uncertainty"]["receiver"]["vertical95_m"]
    used = [abs(point.up_m or 0.0) for point in drawn if point.used]
    half = _half_window(used, float(stated or 0.0))
    span = max((point.time_s for point in drawn), default=0.0) or 1.0
    middle = top + height / 2
    scale = height / 2 / half
    parts = [_frame(left, top, width, height)]
    if not drawn:
        parts.append(_text(left + width / 2, middle, "no heights received", "middle"))
        return _svg(800, top + height + 140, parts, "No heights received")
    parts += _height_axis(left, top, width, height, half)
    parts += _time_axis(left, top + height, width, span)
    for point in sorted(drawn, key=lambda item: item.used):
        x, y = left + point.time_s / span * width, middle - (point.up_m or 0.0) * scale
        if y < top or y > top + height:
            edge = top if y < top else top + height
            parts.append(_line(x, edge, x, edge + (14 if y < top else -14), PALE, 2))
        else:
            parts.append(_symbol(x, y, point))
    if stated is not None:
        for sign in (-1, 1):
            y = middle + sign * float(stated) * scale
            parts.append(_line(left, y, left + width, y, ACCENT, 2.4, dash="14 9"))
    start = (facts["occupation"]["heard_from"] or "")[11:19]
    parts.append(_text(left + width / 2, top + height + 76, f"minutes after {start} UTC", "middle"))
    parts.append(_line(left, top + height + 112, left + 64, top + height + 112, ACCENT, 2.4, dash="14 9"))
    parts.append(_text(left + 78, top + height + 120, "95 % of the mean height", "start"))
    return _svg(800, top + height + 140, parts, "Height of the fixes about their mean, over time")


def _half_window(sizes: list[float], region_m: float) -> float:
    """Half the side of a window that holds nearly all used fixes and the 95 % region."""
    ordered = sorted(sizes)
    most = ordered[min(len(ordered) - 1, int(0.995 * len(ordered)))] if ordered else 0.0
    return max(1.15 * most, 1.25 * region_m, 0.001)


def _inside(x: float, y: float, margin: float, side: float) -> bool:
    return margin <= x <= margin + side and margin <= y <= margin + side


def _symbol(x: float, y: float, point: Point) -> str:
    if not point.used:
        return (
            f'<path d="M{x - 6:.1f} {y - 6:.1f}L{x + 6:.1f} {y + 6:.1f}M{x - 6:.1f} {y + 6:.1f}'
            f'L{x + 6:.1f} {y - 6:.1f}" stroke="{PALE}" stroke-width="2.2" fill="none"/>'
        )
    return _shape(x, y, SHAPES[(point.initialisation - 1) % len(SHAPES)])


def _shape(x: float, y: float, shape: str) -> str:
    style = f'fill="white" fill-opacity="0.55" stroke="{INK}" stroke-width="1.5"'
    if shape == "circle":
        return f'<circle cx="{x:.1f}" cy="{y:.1f}" r="5" {style}/>'
    if shape == "square":
        return f'<rect x="{x - 4.6:.1f}" y="{y - 4.6:.1f}" width="9.2" height="9.2" {style}/>'
    corners = {
        "triangle": ((0, -6), (5.4, 4.4), (-5.4, 4.4)),
        "down": ((0, 6), (5.4, -4.4), (-5.4, -4.4)),
        "diamond": ((0, -6.4), (6.4, 0), (0, 6.4), (-6.4, 0)),
        "bar": ((-2, -6), (2, -6), (2, 6), (-2, 6)),
    }[shape]
    path = " ".join(f"{x + dx:.1f},{y + dy:.1f}" for dx, dy in corners)
    return f'<polygon points="{path}" {style}/>'


def _ellipse(centre: float, major: float, minor: float, azimuth_deg: float) -> str:
    """Major axis at an azimuth from north, clockwise; SVG turns clockwise from east, y downwards."""
    return (
        f'<ellipse cx="{centre:.1f}" cy="{centre:.1f}" rx="{major:.2f}" ry="{minor:.2f}" fill="none" '
        f'stroke="{ACCENT}" stroke-width="4" transform="rotate({azimuth_deg - 90:.2f} {centre:.1f} {centre:.1f})"/>'
    )


def _edge_tick(x: float, y: float, centre: float, half: float) -> str:
    """A fix outside the window: a short tick on its border, in the direction of the fix."""
    dx, dy = x - centre, y - centre
    reach = half / max(abs(dx), abs(dy))
    size = math.hypot(dx, dy)
    x1, y1 = centre + dx * reach, centre + dy * reach
    return _line(x1 - dx / size * 16, y1 - dy / size * 16, x1, y1, PALE, 2)


def _legend(facts: Tree, drawn: list[Point], left: float, top: float, outside: int) -> tuple[list[str], float]:
    rows: list[tuple[str, str]] = []
    used = [item["number"] for item in facts["occupation"]["initialisations"] if item["used"]]
    if len(used) > len(SHAPES):
        words = f"{len(used)} initialisations, shapes in turn from this one"
        rows.append((_shape(left + 12, 0, SHAPES[(used[0] - 1) % len(SHAPES)]), words))
    else:
        for number in used:
            shape = _shape(left + 12, 0, SHAPES[(number - 1) % len(SHAPES)])
            rows.append((shape, f"initialisation {number}"))
    if any(not point.used for point in drawn):
        rows.append((_symbol(left + 12, 0, Point(0, 0, 0, 0, used=False, initialisation=0)), "not used"))
    rows.append((_line(left, 0, left + 24, 0, ACCENT, 4), "95 % of the mean, not of the fixes"))
    parts, x, y = [], 0.0, top
    for symbol, words in rows:
        width = 44 + 13.5 * len(words) + 22
        if x and x + width > 780:
            x, y = 0.0, y + 36
        parts.append(f'<g transform="translate({x:.1f} {y:.1f})">{symbol}</g>')
        parts.append(_text(left + x + 36, y + 8, words, "start"))
        x += width
    if outside:
        y += 36
        words = f"{outside} of the epochs drawn lie outside: ticks at the edge"
        parts.append(_text(left, y + 8, words, "start"))
    return parts, y - top + 24


def _height_axis(left: float, top: float, width: float, height: float, half: float) -> list[str]:
    step = nice(half / 2)
    in_mm = half < 0.5
    parts = []
    count = math.floor(half / step)
    for index in range(-count, count + 1):
        value = index * step
        y = top + height / 2 - value / half * height / 2
        parts.append(_line(left, y, left + width, y, HAIR if index else PALE, 1.2 if index else 2))
        label = f"{value * 1000:g}" if in_mm else f"{value:g}"
        parts.append(_text(left - 12, y + 9, label.replace("-", "−"), "end"))
    unit = "mm" if in_mm else "m"
    x, y = 20.0, top + height / 2
    parts.append(_text(x, y, f"up, {unit}", "middle", turn=f"rotate(-90 {x:.1f} {y:.1f})"))
    return parts


def _time_axis(left: float, bottom: float, width: float, span_s: float) -> list[str]:
    step = max(nice(span_s / 60 / 4), 1 / 60)
    parts = []
    for index in range(math.floor(span_s / 60 / step) + 1):
        x = left + index * step * 60 / span_s * width
        parts.append(_line(x, bottom, x, bottom + 10, INK, 1.5))
        parts.append(_text(x, bottom + 38, f"{index * step:g}", "middle"))
    return parts


def _scale_bar(x: float, y: float, length_m: float, scale: float) -> str:
    end = x + length_m * scale
    bar = f"M{x:.1f} {y - 8:.1f}V{y + 8:.1f}M{x:.1f} {y:.1f}H{end:.1f}M{end:.1f} {y - 8:.1f}V{y + 8:.1f}"
    label = _text(
        (x + end) / 2,
        y - 14,
        length_text(length_m),
        "middle",
        halo=True,
    )
    return f'<path d="{bar}" stroke="{INK}" stroke-width="3" fill="none"/>{label}'


def _north(x: float, y: float) -> str:
    arrow = f"{x:.1f},{y:.1f} {x + 15:.1f},{y + 62:.1f} {x:.1f},{y + 47:.1f} {x - 15:.1f},{y + 62:.1f}"
    half = f"{x:.1f},{y:.1f} {x + 15:.1f},{y + 62:.1f} {x:.1f},{y + 47:.1f}"
    return (
        f'<polygon points="{arrow}" fill="white" stroke="{INK}" stroke-width="2"/>'
        f'<polygon points="{half}" fill="{INK}"/>' + _text(x, y + 94, "N", "middle", halo=True)
    )


def _frame(x: float, y: float, width: float, height: float) -> str:
    return (
        f'<rect x="{x:.1f}" y="{y:.1f}" width="{width:.1f}" height="{height:.1f}" fill="white" '
        f'stroke="{INK}" stroke-width="2"/>'
    )


def _cross(margin: float, side: float) -> str:
    centre, end = margin + side / 2, margin + side
    return _line(margin, centre, end, centre, HAIR, 1.5) + _line(centre, margin, centre, end, HAIR, 1.5)


def _line(x1: float, y1: float, x2: float, y2: float, colour: str, width: float, dash: str = "") -> str:
    dashes = f' stroke-dasharray="{dash}"' if dash else ""
    return (
        f'<line x1="{x1:.1f}" y1="{y1:.1f}" x2="{x2:.1f}" y2="{y2:.1f}" stroke="{colour}" '
        f'stroke-width="{width:g}"{dashes}/>'
    )


def _text(x: float, y: float, words: str, anchor: str, *, halo: bool = False, turn: str = "") -> str:
    under = ""
    place = f'x="{x:.1f}" y="{y:.1f}" text-anchor="{anchor}"' + (f' transform="{turn}"' if turn else "")
    if halo:
        under = f'<text {place} stroke="white" stroke-width="7" fill="white">{escape(words)}</text>'
    return f'{under}<text {place} fill="{INK}">{escape(words)}</text>'


def _svg(width: float, height: float, parts: list[str], title: str) -> str:
    return (
        f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 {width:.0f} {height:.0f}" '
        f'font-family="{FONT}" font-size="27" role="img"><title>{escape(title)}</title>{"".join(parts)}</svg>'
    )


def captions(facts: Tree) -> tuple[str, str]:
    """Captions of plan and height trace; of a combined mark they say whose fixes are drawn, and about what."""
    combined = facts.get("combined")
    if not combined:
        return "Plan of the fixes, equal scales", "Height of the fixes about their mean"
    drawn = combined["drawn"]
    return (
        f"Fixes of occupation {drawn} about the combined mark, equal scales",
        f"Height of the fixes of occupation {drawn} about the combined mark",
    )
