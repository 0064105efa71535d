"""Tables of the calibration benchmark, in Markdown: coverage and width per regime, pooled width, location."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np
from coverage_regimes import REGIMES
from coverage_rows import MEANS, Row

Rows = dict[tuple[str, int], list[Row]]
GOAL, WASTE, WIDEST_POOLED, WIDEST = 95.0, 99.0, 1.5, 2.0
LEAST_TO_JUDGE = 200  # sessions: below it a ratio of root-mean-squares is noise of several percent
LOCATION_AGAINST_MEANS, LOCATION_AGAINST_KNOWN, LOCATION_DISTURBED = 1.05, 1.08, 1.20


def table(head: Sequence[str], body: Sequence[Sequence[str]]) -> Iterator[str]:
    """Lines of a Markdown table."""
    yield "| " + " | ".join(head) + " |"
    yield "|" + "|".join(" --- " for _ in head) + "|"
    for line in body:
        yield "| " + " | ".join(line) + " |"


def percent(flags: object) -> float:
    """Share of true ones, in percent."""
    return 100.0 * float(np.mean(flags))  # type: ignore[arg-type]


def least(count: int) -> float:
    """The goal less two binomial errors of `count` sessions, percent."""
    return GOAL - 200.0 * float(np.sqrt(0.05 * 0.95 / count))


def duration(seconds: int) -> str:
    """2 min, 4 h."""
    return f"{seconds // 60} min" if seconds < 3600 else f"{seconds // 3600} h"


def coverage(rows: Rows) -> Iterator[str]:
    """Coverage of circle, ellipse, plan components and height, naive beside it, width. ! = below the goal, + = waste."""
    body = []
    for (name, length_s), found in rows.items():
        inside = np.array([item.inside for item in found])
        naive = np.array([item.naive_inside for item in found])
        width = np.array([item.width for item in found])
        count = len(found)
        body.append([
            name, duration(length_s), str(count), f"{np.median([item.ratio for item in found]):.2g}",
            _marked(percent([item.circle for item in found]), count),
            _marked(percent([item.ellipse for item in found]), count),
            _marked(percent(inside[:, :2]), count),
            _marked(percent(inside[:, 2]), count),
            f"{percent([item.naive_circle for item in found]):.0f} / {percent(naive[:, :2]):.0f} / {percent(naive[:, 2]):.0f}",
            f"{np.median(width[:, :2]):.2f}", f"{np.median(width[:, 2]):.2f}",
        ])  # fmt: skip
    head = ("regime", "length", "n", "T/tau", "circle %", "ellipse %", "E, N %", "V %", "naive circle / EN / V %")
    yield from table((*head, "width EN", "width V"), body)


def _marked(value: float, count: int) -> str:
    sign = " !" if value < least(count) else " +" if value > WASTE else ""
    return f"{value:.1f}{sign}"


def pooled_width(rows: Rows) -> Iterator[str]:
    """Median width per component, pooled by T/tau; quantised regimes apart; worst regimes."""
    body = []
    for label, groups in (("not quantised", ("clean", "disturbed")), ("quantised", ("quantised",))):
        found = [item for (name, _), items in rows.items() if REGIMES[name].group in groups for item in items]
        for text, low, high in (("< 5", 0, 5), ("5 to 20", 5, 20), ("> 20", 20, np.inf)):
            chosen = [item for item in found if low <= item.ratio < high]
            if not chosen:
                continue
            width = np.array([item.width for item in chosen])
            medians = [np.median(width[:, axis]) for axis in range(3)]
            sign = " !" if max(medians) > WIDEST_POOLED and label == "not quantised" else ""
            body.append([
                label, text, str(len(chosen)), *[f"{value:.2f}" for value in medians],
                f"{np.median(width):.2f}{sign}", f"{percent([item.circle for item in chosen]):.1f}",
                f"{percent([item.inside[2] for item in chosen]):.1f}",
            ])  # fmt: skip
    yield from table(("outputs", "T/tau", "n", "E", "N", "V", "all", "circle %", "V %"), body)
    wide = []
    for (name, length_s), items in rows.items():
        medians = np.median([item.width for item in items], axis=0)
        if max(medians) > WIDEST and REGIMES[name].group != "quantised":
            wide.append(f"{name} {duration(length_s)} ({max(medians):.2f})")
    yield ""
    yield "Wider than 2.0: " + (", ".join(wide) or "none") + "."


def location(rows: Rows) -> Iterator[str]:
    """Root-mean-square error of the product over that of the known-covariance mean / over the best usual mean's."""
    lengths = sorted({length_s for _, length_s in rows})
    body = []
    for name in dict.fromkeys(name for name, _ in rows):
        disturbed = name in ("rtk_outliers", "rtk_long_bursts", "rtk_gaps", "rtk_frozen")
        if REGIMES[name].group != "clean" and not disturbed:
            continue
        cells = [_located(rows[name, length_s], disturbed) for length_s in lengths]
        every = [item for length_s in lengths for item in rows[name, length_s]]
        known = _rms([item.oracle for item in every])
        usual = [f"{_rms([item.means[k] for item in every]) / known:.3f}" for k in range(len(MEANS))]
        kept = 100 * float(np.mean([item.kept for item in every]))
        body.append([name, *cells, *usual, f"{kept:.1f}"])
    head = ("regime", *map(duration, lengths), *(f"{name}, all lengths" for name in MEANS), "kept / good epochs %")
    yield from table(head, body)


def _located(items: list[Row], disturbed: bool) -> str:
    own, known = _rms([item.product for item in items]), _rms([item.oracle for item in items])
    best = min(_rms([item.means[k] for item in items]) for k in range(len(MEANS)))
    missed = own / known > (LOCATION_DISTURBED if disturbed else LOCATION_AGAINST_KNOWN)
    missed |= not disturbed and own / best > LOCATION_AGAINST_MEANS
    return f"{own / known:.3f} / {own / best:.3f}" + (" !" if missed and len(items) >= LEAST_TO_JUDGE else "")


def _rms(errors: Sequence[object]) -> float:
    return float(np.sqrt(np.mean(np.square(np.array(errors)))))


def compact(rows: Rows) -> Iterator[str]:
    """One line per regime: circle / ellipse / height coverage per length, and the naive circle's range."""
    lengths = sorted({length_s for _, length_s in rows})
    body = []
    for name in dict.fromkeys(name for name, _ in rows):
        cells, naive, width = [], [], []
        for length_s in lengths:
            items = rows[name, length_s]
            figures = ([r.circle for r in items], [r.ellipse for r in items], [r.inside[2] for r in items])
            cells.append(" / ".join(f"{percent(item):.1f}" for item in figures))
            naive.append(percent([r.naive_circle for r in items]))
            width.append(float(np.median([r.width for r in items])))
        spans = f"{min(naive):.0f} to {max(naive):.0f}", f"{min(width):.2f} to {max(width):.2f}"
        body.append([name, *cells, *spans])
    yield from table(("regime", *map(duration, lengths), "naive circle", "width"), body)


def sums(rows: Rows) -> Iterator[str]:
    """What must be zero, and the lowest coverage."""
    everything = [item for items in rows.values() for item in items]
    yield f"{len(everything)} sessions; time to go against the printed figure: {sum(r.contradictions for r in everything)} contradictions."
    by_rows = {f"{name} {duration(length_s)}": items for (name, length_s), items in rows.items()}
    for label, figure in (
        ("circle", lambda item: item.circle),
        ("ellipse", lambda item: item.ellipse),
        ("height", lambda item: item.inside[2]),
    ):
        lowest = min(by_rows, key=lambda key: percent([figure(item) for item in by_rows[key]]))
        value = percent([figure(item) for item in by_rows[lowest]])
        yield f"Lowest {label}: {value:.1f} % ({lowest}); goal {least(len(by_rows[lowest])):.1f} %."
