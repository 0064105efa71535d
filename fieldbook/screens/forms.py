"""Forms to fill in by keyboard: one line per field, what is wrong beside the field, the remedy with it.

Enter or the down arrow goes on, the up arrow back, Enter on the last line writes, Esc leaves without writing. A
choice is turned with the left and right arrows or by the first letter of a word. A form may show a drawing and say
what follows from what is typed; the drawing gives way where the terminal is narrow, the words never.

The form itself takes every key, in the order of typing: with one input widget per field a fast hand's Enter can
overtake the figures typed before it, and a height would be written with its last digits missing.
"""

from __future__ import annotations

# ruff: noqa: ARG002 - every maker of rows takes the size, and some do not need it
from collections.abc import Callable, Sequence
from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import Binding, BindingType
from textual.containers import Horizontal, Vertical
from textual.events import Key, Paste

from fieldbook.screens.fields import Field, FieldLine
from fieldbook.screens.once import Once
from fieldbook.screens.panel import Panel
from fieldbook.screens.plain import clean
from fieldbook.screens.rows import BLANK, Row, paragraph, row

Values = dict[str, str]
Check = Callable[[Values], dict[str, str]]
Sketch = Callable[[Values], Sequence[Row]]
Said = Callable[[Values, int], Sequence[Row]]


class Form(Once[Values | None]):
    """Asks for some fields; dismissed with their texts, or None after Esc."""

    HORIZONTAL_BREAKPOINTS = [(0, "-tight"), (76, "-roomy")]  # noqa: RUF012 - Textual declares it without ClassVar
    # keys are taken in on_key; these are what Textual would otherwise do with them
    BINDINGS: ClassVar[list[BindingType]] = [Binding("tab,shift+tab,ctrl+p,super+c", "nothing", show=False)]

    def __init__(
        self,
        title: str,
        fields: Sequence[Field],
        *,
        note: str = "",
        check: Check | None = None,
        sketch: Sketch | None = None,
        said: Said | None = None,
    ) -> None:
        super().__init__()
        self.title_text, self.fields, self.note = title, tuple(fields), note
        self.lines = [FieldLine(field) for field in self.fields]
        self._check, self._sketch, self._said = check, sketch, said
        self.errors: dict[str, str] = {}
        self._asked = False  # errors stand beside the fields once writing was tried
        empty = [n for n, field in enumerate(self.fields) if not field.value and not field.words]
        self.here = empty[0] if empty else 0

    def compose(self) -> ComposeResult:
        """Fields on the left, the drawing on the right."""
        with Vertical(id="form"):
            yield Panel(self._title, id="form-title")
            with Horizontal(id="form-body"):
                yield Panel(self._fields, id="form-fields")
                if self._sketch:
                    yield Panel(self._drawing, id="form-sketch")
            yield Panel(self._foot, id="form-foot")

    def values(self) -> Values:
        """The texts as they stand; 'not stated' is empty."""
        return {line.field.key: line.value for line in self.lines}

    # --- drawing

    def _title(self, width: int, height: int) -> list[Row]:
        return [row((f" {clean(self.title_text)}", "strong"))]

    def _foot(self, width: int, height: int) -> list[Row]:
        return [row((" Enter on the last line writes · ↑ ↓ line · ← → word · Esc: not written", "soft"))]

    def _drawing(self, width: int, height: int) -> list[Row]:
        return list(self._sketch(self.values())) if self._sketch else []

    def _fields(self, width: int, height: int) -> list[Row]:
        label_width = 15 if self._sketch else 19
        rows: list[Row] = []
        last_needed = 0
        for number, line in enumerate(self.lines):
            rows.append(line.row(width, label_width, here=number == self.here))
            error = self.errors.get(line.field.key, "")
            if error:
                rows += paragraph(error, width, style="bad", mark=("▲", "bad"), most=6)
            if number == self.here:
                last_needed = len(rows)
        if self._said:
            rows += [BLANK, *self._said(self.values(), width)]
        if self.note:
            rows += [BLANK, *paragraph(self.note, width, style="soft")]
        return rows[max(0, last_needed - height) :]  # the line being filled is always in sight

    def redraw(self) -> None:
        """Draw again what follows the typing."""
        for name in ("#form-fields", "#form-sketch"):
            for panel in self.query(name).results(Panel):
                panel.redraw()

    # --- keys

    def on_key(self, event: Key) -> None:
        """Every key, in the order of typing."""
        event.stop()
        event.prevent_default()
        key = event.key
        if key == "escape":
            self.dismiss(None)
        elif key in ("enter", "down", "tab"):
            self._forward(write=key == "enter")
        elif key in ("up", "shift+tab"):
            self._go(self.here - 1)
        elif self.lines[self.here].press(key, event.character):
            self._changed()

    def on_paste(self, event: Paste) -> None:
        """A pasted text goes into the line being filled."""
        event.stop()
        if self.lines[self.here].insert(event.text):
            self._changed()

    def action_nothing(self) -> None:
        """Taken in on_key already."""

    def _changed(self) -> None:
        if self._asked:
            self.errors = self.judge()  # an error goes as soon as it is put right
        self.redraw()

    def _go(self, number: int) -> None:
        self.here = max(0, min(number, len(self.lines) - 1))
        self.redraw()

    def _forward(self, *, write: bool) -> None:
        if self.here + 1 < len(self.lines):
            self._go(self.here + 1)
        elif write:
            self._write()

    def judge(self) -> dict[str, str]:
        """Error texts by field key, of the texts as they stand."""
        values = self.values()
        errors = {field.key: text for field in self.fields if (text := field.error(values[field.key]))}
        if not errors and self._check:
            errors = self._check(values)
        return errors

    def _write(self) -> None:
        self._asked = True
        self.errors = self.judge()
        if not self.errors:
            self.dismiss(self.values())
            return
        wrong = [number for number, field in enumerate(self.fields) if field.key in self.errors]
        self._go(wrong[0] if wrong else 0)
