"""A canvas of dots: 2 x 4 dots per character cell, drawn with numpy, printed as braille or as ASCII.

A terminal cell is about twice as high as wide, so dots are square and a plan drawn with one scale for both axes is
1:1. Glyphs (crosses, rings) may be put on whole cells above the dots. Outside points are counted, never wrapped.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]
# Unicode braille: bit of the dot in column x (0, 1), row y (0..3); The Unicode Standard, block U+2800
_BITS = np.array([[0x01, 0x02, 0x04, 0x40], [0x08, 0x10, 0x20, 0x80]], dtype=np.int64)
_ASCII_SHADE = " .:+*%#@#"  # by number of dots in the cell


class Canvas:
    """Dots and glyphs on `columns` x `rows` character cells, with layers that keep their own style name."""

    def __init__(self, columns: int, rows: int) -> None:
        self.columns, self.rows = max(1, columns), max(1, rows)
        self._dots: dict[str, NDArray[np.bool_]] = {}
        self._glyphs: dict[tuple[int, int], tuple[str, str]] = {}
        self.outside = 0

    @property
    def width(self) -> int:
        """Dots across."""
        return 2 * self.columns

    @property
    def height(self) -> int:
        """Dots down."""
        return 4 * self.rows

    def _layer(self, style: str) -> NDArray[np.bool_]:
        if style not in self._dots:
            self._dots[style] = np.zeros((self.height, self.width), dtype=bool)
        return self._dots[style]

    def _inside(self, x: Floats, y: Floats) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
        column = np.floor(x + 0.5).astype(np.int64)
        line = np.floor(y + 0.5).astype(np.int64)
        good = (column >= 0) & (column < self.width) & (line >= 0) & (line < self.height)
        self.outside += int((~good).sum())
        return column[good], line[good]

    def dots(self, x: Floats, y: Floats, style: str) -> None:
        """Dots at x (right) and y (down), in dots."""
        column, line = self._inside(x, y)
        self._layer(style)[line, column] = True

    def glyphs(self, x: Floats, y: Floats, glyph: str, style: str) -> None:
        """A character on each cell that holds one of the points."""
        column, line = self._inside(x, y)
        for place in set(zip((line // 4).tolist(), (column // 2).tolist(), strict=True)):
            self._glyphs[place] = (glyph, style)

    def uncover(self, column: int, line: int) -> None:
        """Take the glyph off a cell, so that dots there are seen."""
        self._glyphs.pop((line, column), None)

    def line(self, start: tuple[float, float], end: tuple[float, float], style: str) -> None:
        """A straight line of dots; parts outside are left out."""
        count = int(max(abs(end[0] - start[0]), abs(end[1] - start[1]))) * 2 + 2
        before = self.outside
        self.dots(np.linspace(start[0], end[0], count), np.linspace(start[1], end[1], count), style)
        self.outside = before

    def text(self, column: int, line: int, text: str, style: str) -> None:
        """Characters on cells, cut at the right edge."""
        if 0 <= line < self.rows:
            for offset, letter in enumerate(text):
                if 0 <= column + offset < self.columns:
                    self._glyphs[line, column + offset] = (letter, style)

    def rows_of_spans(self, order: Sequence[str], *, ascii_only: bool = False) -> list[tuple[tuple[str, str], ...]]:
        """The drawing as rows of (text, style) spans. Of layers that share a cell the later in `order` gives the
        style, and the dots of all of them are seen."""
        code = np.zeros((self.rows, self.columns), dtype=np.int64)
        owner = np.full((self.rows, self.columns), -1, dtype=np.int64)
        for rank, style in enumerate(order):
            if style not in self._dots:
                continue
            cells = self._dots[style].reshape(self.rows, 4, self.columns, 2)
            bits = np.einsum("ryxc,cy->rx", cells.astype(np.int64), _BITS)
            code |= bits
            owner[bits > 0] = rank
        return [self._row(line, code[line], owner[line], order, ascii_only) for line in range(self.rows)]

    def _row(
        self, line: int, code: NDArray[np.int64], owner: NDArray[np.int64], order: Sequence[str], ascii_only: bool
    ) -> tuple[tuple[str, str], ...]:
        spans: list[tuple[str, str]] = []
        for column in range(self.columns):
            value = int(code[column])
            letter, style = " ", "text"
            if value:
                letter = _ASCII_SHADE[value.bit_count()] if ascii_only else chr(0x2800 + value)
                style = order[int(owner[column])]
            letter, style = self._glyphs.get((line, column), (letter, style))
            if spans and spans[-1][1] == style:
                spans[-1] = (spans[-1][0] + letter, style)
            else:
                spans.append((letter, style))
        return tuple(spans)


def ellipse_points(major: float, minor: float, azimuth_deg: float, count: int = 240) -> tuple[Floats, Floats]:
    """East and north of an ellipse about zero: semi-axes as given, azimuth of the major one from north, clockwise."""
    angle = np.linspace(0.0, 2.0 * math.pi, count, endpoint=False)
    along, across = major * np.cos(angle), minor * np.sin(angle)
    azimuth = math.radians(azimuth_deg)
    east = along * math.sin(azimuth) + across * math.cos(azimuth)
    north = along * math.cos(azimuth) - across * math.sin(azimuth)
    return east, north


def nice_length(limit: float) -> float:
    """The largest of 1, 2, 5 x a power of ten that is not above `limit` (> 0)."""
    power = 10.0 ** math.floor(math.log10(limit))
    return max(step * power for step in (1.0, 2.0, 5.0) if step * power <= limit * (1 + 1e-9))
