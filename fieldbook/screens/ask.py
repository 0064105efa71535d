"""Questions with a safe answer: Enter and Esc always mean 'leave everything as it is'."""

# ruff: noqa: ARG002 - every maker of rows takes the size, and some do not need it

from __future__ import annotations

from collections.abc import Sequence
from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import Binding, BindingType
from textual.containers import Vertical
from textual.events import Key

from fieldbook.screens.once import Once
from fieldbook.screens.panel import Panel
from fieldbook.screens.plain import width_of
from fieldbook.screens.rows import BLANK, Row, paragraph, row

Answer = tuple[str, str, str]  # key, word returned, what it does


class Question(Once[str]):
    """A question with a few one-letter answers; dismissed with the word of the answer, "" for the safe one."""

    BINDINGS: ClassVar[list[BindingType]] = [Binding("enter,escape", "safe", "stay")]

    def __init__(self, title: str, text: Sequence[str], safe: str, answers: Sequence[Answer]) -> None:
        super().__init__()
        self.title_text, self.text, self.safe, self.answers = title, tuple(text), safe, tuple(answers)

    def compose(self) -> ComposeResult:
        """One panel."""
        with Vertical(id="question"):
            yield Panel(self._rows, id="question-panel")

    def _rows(self, width: int, height: int) -> list[Row]:
        rows: list[Row] = [row((f" {self.title_text}", "strong")), BLANK]
        for line in self.text:
            rows += paragraph(line, width)
        rows.append(BLANK)
        lines = [("Enter", self.safe), *((key.upper(), what) for key, _, what in self.answers)]
        wide = max(width_of(key) for key, _ in lines) + 1
        for key, what in lines:
            rows += paragraph(what, width, indent=2, mark=(key.ljust(wide), "strong"))
        return rows

    def action_safe(self) -> None:
        """Leave everything as it is."""
        self.dismiss("")

    def on_key(self, event: Key) -> None:
        """One of the answers."""
        for key, word, _ in self.answers:
            if event.character and event.character.lower() == key:
                event.stop()
                self.dismiss(word)
                return
