"""How the mean of an occupation came to rest: the running mean with its 95 % figures, and since when they suffice.

Strategy: the blocks of the used initialisations are cut off at up to 40 instants, evenly spaced in time, and each
beginning is estimated like a whole occupation. The figures at each instant come from the caller, who prints them: with
the budget lines of today (antenna, frame, class of fix, which initialisations are right), since what is known now is
what the record is judged by. The last instant is the whole occupation, so its figures are the printed ones exactly.
Forty estimates cost about a fifth of a second: made when asked for, never on the way of the live figure.

In sessions over 320 s the first minutes are judged on 10 s blocks, where the live screen then had 1 s ones.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from fieldbook.model.reduction import Convergence
from fieldbook.reduce.blocks import Blocks
from fieldbook.reduce.correlated_mean import correlated_mean
from fieldbook.reduce.estimate import Estimate
from fieldbook.reduce.resolution import u_of_steps

MOST_INSTANTS = 40
LEAST_SPAN_S = 30.0

Figures = Callable[[Estimate], tuple[float, float | None]]


def convergence(
    found: Estimate,
    figures: Figures,
    required_m: tuple[float, float],
    utc_text_of: Callable[[float], str | None],
    start_ms: int,
) -> Convergence:
    """The running mean about the final one.

    Args:
        found: the estimate of the whole occupation.
        figures: printed horizontal95_m and vertical95_m of an estimate.
        required_m: the requirement, horizontal and vertical.
        utc_text_of: an instant of the occupation's clock in ms as text, None while the date is unknown.
        start_ms: zero of `times_s` on the occupation's clock.
    """
    result = Convergence([], [], [], [], [], [])
    inside_from_ms: float | None = None
    for end_ms, part in _beginnings(found):
        horizontal_m, vertical_m = figures(part)
        result.times_s.append((end_ms - start_ms) / 1000.0)
        result.east_m.append(part.mean.east.mean_m - found.mean.east.mean_m)
        result.north_m.append(part.mean.north.mean_m - found.mean.north.mean_m)
        up, last_up = part.mean.up, found.mean.up
        result.up_m.append(None if up is None or last_up is None else up.mean_m - last_up.mean_m)
        result.horizontal95_m.append(horizontal_m)
        result.vertical95_m.append(vertical_m)
        inside = horizontal_m <= required_m[0] and vertical_m is not None and vertical_m <= required_m[1]
        if not inside:
            inside_from_ms = None
        elif inside_from_ms is None:
            inside_from_ms = end_ms
    result.inside_since = None if inside_from_ms is None else utc_text_of(inside_from_ms)
    return result


def _beginnings(found: Estimate) -> list[tuple[float, Estimate]]:
    """(end on the occupation's clock in ms, estimate of the blocks up to there), in order; the last is the whole."""
    blocks = found.blocks
    ends_ms = (blocks.column("index") + 1) * (1000 * blocks.block_s)
    first_ms = float(ends_ms[0]) - 1000.0 * blocks.block_s
    span_ms = float(ends_ms[-1]) - first_ms
    count = int(min(MOST_INSTANTS, max(span_ms / (1000.0 * LEAST_SPAN_S), 1)))
    # of two initialisations the blocks may share a place: a cut behind the last row of an instant
    rows = np.searchsorted(ends_ms, first_ms + span_ms * np.arange(1, count) / count, side="right")
    cuts = sorted({int(row) for row in rows if 0 < row < len(blocks)})
    parts = [(float(ends_ms[row - 1]), _up_to(found, row)) for row in cuts]
    return [(end, part) for end, part in parts if part is not None] + [(float(found.last_ms), found)]


def _up_to(found: Estimate, rows: int) -> Estimate | None:
    """As `estimate` would make it of the first blocks, with the class and digits of the whole."""
    blocks = Blocks(found.blocks.block_s, found.blocks.whole[:rows], found.blocks.m2[:rows])
    east, north, up = blocks.bins(0), blocks.bins(1), blocks.bins(2)
    if east is None or north is None:
        return None
    mean, sd = correlated_mean(east, north, up, found.fix_class), blocks.sd_m()
    u = u_of_steps(found.resolution.step_enu_m, sd, found.resolution.distinct)
    return replace(
        found,
        mean=mean,
        floor_enu_m=(found.floor_enu_m[0], found.floor_enu_m[1], None if mean.up is None else found.floor_enu_m[2]),
        resolution=replace(found.resolution, u_enu_m=u),
        sd_enu_m=sd,
        blocks=blocks,
    )
