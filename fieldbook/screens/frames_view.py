"""The book's pair of frames, as `fieldbook frames show` tells it, and what was to be asked about the corrections."""

# ruff: noqa: ARG005 - every maker of rows takes the size, and some do not need it

from __future__ import annotations

from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import Binding, BindingType

from fieldbook.screens.bridge import FramesTold
from fieldbook.screens.once import Once
from fieldbook.screens.panel import Panel
from fieldbook.screens.rows import BLANK, Row, heading, labelled_lines, paragraph, row

STYLES = {"refused": "bad", "mind": "warn", "effect": "strong", "operation": "strong"}
LABEL_WIDTH = 10


def frames_rows(told: FramesTold, width: int) -> list[Row]:
    """Rows of the view."""
    rows = [heading("FRAMES", width, "Esc: back"), row((f" at {told.place}", "soft")), BLANK]
    for text in told.pair:
        label, said = text[:LABEL_WIDTH].strip(), text[LABEL_WIDTH:]
        style = STYLES.get(label, "text")
        rows += labelled_lines(label, said, width, style=style, label_width=LABEL_WIDTH, most=4)
    rows += [BLANK, row((" What corrects this receiver", "soft"))]
    for number, text in enumerate(told.question):
        rows += paragraph(text, width, style="strong" if number == 0 else "text", most=4)
    return rows


class FramesView(Once[None]):
    """Scrolled with the arrows."""

    BINDINGS: ClassVar[list[BindingType]] = [
        Binding("escape,enter,m,M,q,Q", "back", "back"),
        Binding("down", "scroll(1)", "down"),
        Binding("up", "scroll(-1)", "up"),
        Binding("pagedown,space", "scroll(10)", "page down"),
        Binding("pageup", "scroll(-10)", "page up"),
    ]

    def __init__(self, told: FramesTold) -> None:
        super().__init__()
        self._told = told

    def compose(self) -> ComposeResult:
        """One panel."""
        yield Panel(lambda width, height: frames_rows(self._told, width), id="frames")

    def action_scroll(self, lines: int) -> None:
        """Move the lines."""
        self.query_one("#frames", Panel).scroll_rows(lines)

    def action_back(self) -> None:
        """Back to the book."""
        self.dismiss(None)
