"""The second accuracy: between neighbouring marks. What both share has dropped out; what was not stated has not.

FGDC-STD-007.2 (from memory, high) calls local accuracy the average of the figures to the other observed points nearby. Both are
given here, the average and the worst, with the neighbours named: an average alone hides the one bad line.
"""

from __future__ import annotations

import math
from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass

from .combining import MarkValue, between_marks

NEIGHBOURS = 3
WITHIN_M = 20_000.0  # beyond it axes are not parallel enough, and nobody measures between
CELL_M = 2_000.0


@dataclass(frozen=True)
class Line:
    """Two neighbouring marks (numbers): 3-D distance, and 95 % of their difference in plan and height, metres."""

    first: int
    second: int
    distance_m: float
    horizontal95_m: float
    vertical95_m: float | None


@dataclass(frozen=True)
class Local:
    """A mark's accuracy relative to its neighbours."""

    lines: tuple[Line, ...]

    @property
    def horizontal_mean_m(self) -> float | None:
        """Average over the neighbours."""
        return _mean([line.horizontal95_m for line in self.lines])

    @property
    def horizontal_worst_m(self) -> float | None:
        """Worst of the neighbours."""
        return max((line.horizontal95_m for line in self.lines), default=None)

    @property
    def vertical_mean_m(self) -> float | None:
        """Average over the neighbours; None if one has no height."""
        return _mean([line.vertical95_m for line in self.lines])

    @property
    def vertical_worst_m(self) -> float | None:
        """Worst of the neighbours; None if one has no height."""
        values = [line.vertical95_m for line in self.lines if line.vertical95_m is not None]
        return max(values) if values and len(values) == len(self.lines) else None


def _mean(values: Sequence[float | None]) -> float | None:
    known = [value for value in values if value is not None]
    return sum(known) / len(known) if known and len(known) == len(values) else None


def local_accuracies(values: Sequence[MarkValue], only: Sequence[int] | None = None) -> dict[int, Local]:
    """Every mark (or those named) to its three nearest neighbours within 20 km in the same frame and epoch."""
    placed = {value.mark.number: value for value in values if value.place is not None and value.place.xyz_m is not None}
    cells: dict[tuple[int, int, int], list[int]] = defaultdict(list)
    for number, value in placed.items():
        cells[_cell(value)].append(number)
    known: dict[tuple[int, int], Line | None] = {}
    found: dict[int, Local] = {}
    for number, value in placed.items():
        if only is not None and number not in only:
            continue
        lines: list[Line] = []
        for other in _nearest(value, placed, cells):
            pair = (min(number, other), max(number, other))
            if pair not in known:
                known[pair] = _line(placed[pair[0]], placed[pair[1]])
            line = known[pair]
            if line is not None:
                lines.append(line)
            if len(lines) == NEIGHBOURS:
                break
        found[number] = Local(tuple(lines))
    return found


def _line(one: MarkValue, two: MarkValue) -> Line | None:
    combined = between_marks(one, two)
    if combined is None:
        return None
    distance = _distance(one, two)
    return Line(one.mark.number, two.mark.number, distance, combined.horizontal95_m, combined.vertical95_m)


def _nearest(value: MarkValue, placed: dict[int, MarkValue], cells: dict[tuple[int, int, int], list[int]]) -> list[int]:
    """Numbers of the marks around, nearest first: rings of cells outward until enough are surely the nearest."""
    x, y, z = _cell(value)
    seen: list[tuple[float, int]] = []
    for ring in range(math.ceil(WITHIN_M / CELL_M) + 1):
        for dx in range(-ring, ring + 1):
            for dy in range(-ring, ring + 1):
                for dz in range(-ring, ring + 1):
                    if max(abs(dx), abs(dy), abs(dz)) == ring:
                        for other in cells.get((x + dx, y + dy, z + dz), ()):
                            if other != value.mark.number:
                                seen.append((_distance(value, placed[other]), other))
        close = sorted(item for item in seen if item[0] <= min(ring * CELL_M, WITHIN_M))
        if len(close) >= 2 * NEIGHBOURS:  # some may be in other frames
            return [number for _, number in close]
    return [number for distance, number in sorted(seen) if distance <= WITHIN_M]


def _cell(value: MarkValue) -> tuple[int, int, int]:
    assert value.place is not None  # noqa: S101 - only placed marks come here
    assert value.place.xyz_m is not None  # noqa: S101
    x, y, z = (math.floor(item / CELL_M) for item in value.place.xyz_m)
    return x, y, z


def _distance(one: MarkValue, two: MarkValue) -> float:
    assert one.place is not None  # noqa: S101 - as above
    assert two.place is not None  # noqa: S101
    assert one.place.xyz_m is not None  # noqa: S101
    assert two.place.xyz_m is not None  # noqa: S101
    return math.dist(one.place.xyz_m, two.place.xyz_m)
