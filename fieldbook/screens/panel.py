"""A panel: rows drawn line by line with `render_line`; only lines whose content changed are painted again."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any, ClassVar

from rich.segment import Segment
from textual.geometry import Region
from textual.strip import Strip
from textual.widget import Widget

from fieldbook.screens.plain import clean, to_ascii
from fieldbook.screens.rows import BLANK, STYLES, Row, cropped

Maker = Callable[[int, int], Sequence[Row]]


class Panel(Widget, can_focus=False):
    """Shows what its maker draws for (width, height). `redraw` asks the maker again; equal lines cost nothing."""

    COMPONENT_CLASSES: ClassVar[set[str]] = {f"panel--{name}" for name in STYLES}

    def __init__(self, maker: Maker, **options: Any) -> None:
        super().__init__(**options)
        self._maker = maker
        self.rows: tuple[Row, ...] = ()
        self.all_rows: tuple[Row, ...] = ()
        self.top = 0  # first line in sight, for pages longer than the panel
        self.painted = 0  # lines asked to be painted, for tests of the repaint economy

    def redraw(self) -> None:
        """Ask the maker for rows and repaint the lines that differ."""
        width, height = self.size
        if width < 1 or height < 1:
            return
        self.show(self._maker(width, height))

    def scroll_rows(self, lines: int) -> None:
        """Move the lines in sight; only a panel with more rows than it can show moves."""
        self.top = max(0, min(self.top + lines, len(self.all_rows) - self.size.height))
        self.show(self.all_rows)

    def _in_sight(self, rows: tuple[Row, ...]) -> tuple[Row, ...]:
        height = self.size.height
        self.top = max(0, min(self.top, len(rows) - height))
        part = rows[self.top : self.top + height]
        left = len(rows) - self.top - height
        if left > 0 and part:
            part = (*part[:-1], ((f" ▼ {left + 1} more lines (↓)", "soft"),))
        return part

    def show(self, rows: Sequence[Row]) -> None:
        """Take new rows; repaint the lines that differ."""
        self.all_rows = tuple(rows)
        before, self.rows = self.rows, self._in_sight(self.all_rows)
        width = self.size.width
        for y in range(max(len(before), len(self.rows))):
            old = before[y] if y < len(before) else BLANK
            new = self.rows[y] if y < len(self.rows) else BLANK
            if old != new:
                self.painted += 1
                self.refresh(Region(0, y, width, 1))

    def on_resize(self) -> None:
        """Another size, other rows."""
        self.redraw()
        self.refresh()

    def render_line(self, y: int) -> Strip:
        """One line as segments, exactly as wide as the panel."""
        width = self.size.width
        line = cropped(self.rows[y] if y < len(self.rows) else BLANK, width)
        ascii_only = bool(getattr(self.app, "ascii_only", False))
        segments = []
        for text, name in line:
            shown = clean(text, 100_000)
            segments.append(
                Segment(to_ascii(shown) if ascii_only else shown, self.get_component_rich_style(f"panel--{name}"))
            )
        return Strip(segments).adjust_cell_length(width, self.rich_style)

    def text(self) -> str:
        """What stands on the panel, for tests and for copying."""
        return "\n".join("".join(text for text, _ in line).rstrip() for line in self.rows)
