"""Forms to fill in by keyboard: one line per field, what is wrong beside the field, the remedy with it.

Enter or the down arrow goes on, the up arrow back, Enter on the last line writes, Esc leaves without writing. A
choice is turned with the left and right arrows or by the first letter of a word. A form may show a drawing that
follows what is typed.
"""

# ruff: noqa: ARG001, ARG002 - every maker of rows takes the size, and some do not need it

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any, ClassVar

from textual.app import ComposeResult
from textual.binding import Binding, BindingType
from textual.containers import Horizontal, Vertical
from textual.events import Key
from textual.message import Message
from textual.screen import ModalScreen
from textual.widget import Widget
from textual.widgets import Input

from fieldbook.screens.panel import Panel
from fieldbook.screens.plain import clean, width_of, wrapped
from fieldbook.screens.rows import Row, paragraph, row
from fieldbook.settings.values import BadValue, checked

Values = dict[str, str]
Check = Callable[[Values], dict[str, str]]
Sketch = Callable[[Values, int, int], Sequence[Row]]


@dataclass(frozen=True)
class Field:
    """One line of a form. `kind` is a kind of `settings.schema`; words become a choice."""

    key: str
    label: str
    kind: str = "text"
    value: str = ""
    required: bool = False
    hint: str = ""

    @property
    def words(self) -> tuple[str, ...]:
        """The words of a choice, or none. An optional choice may stay open."""
        if not self.kind.startswith("words:"):
            return ()
        words = tuple(self.kind.removeprefix("words:").split("|"))
        return words if self.required else ("not stated", *words)

    def error(self, text: str) -> str:
        """What is wrong with the text, with the remedy; empty if nothing is."""
        shown = text.strip()
        if not shown:
            return "is needed: write it" if self.required else ""
        if self.words:
            return "" if shown in self.words else "take one of the words"
        if self.kind in ("number", "positive", "epoch") and "," in shown:
            return "write the decimal sign as a point"
        try:
            checked(self.kind, shown, stored=True)
        except BadValue as problem:
            return clean(str(problem))
        return ""


class ChoiceLine(Widget, can_focus=True):
    """A choice among a few words: arrows or first letters turn it."""

    class Turned(Message):
        """Another word was chosen."""

    def __init__(self, field: Field, **options: Any) -> None:
        super().__init__(**options)
        self.words = field.words
        self.value = field.value if field.value in self.words else self.words[0]

    def render_line(self, y: int) -> Any:
        """The words on one line, the chosen one between brackets."""
        from rich.segment import Segment
        from textual.strip import Strip

        if y:
            return Strip.blank(self.size.width, self.rich_style)
        segments = []
        style = self.rich_style
        for word in self.words:
            chosen = word == self.value
            segments.append(
                Segment(f"[{word}]" if chosen else f" {word} ", style + _bold(reverse=chosen and self.has_focus))
            )
        if sum(width_of(segment.text) for segment in segments) > self.size.width:
            segments = [Segment(f"‹ {self.value} ›", style + _bold(reverse=self.has_focus))]
        return Strip(segments).adjust_cell_length(self.size.width, style)

    def on_key(self, event: Key) -> None:
        """Left and right turn; a first letter goes to its word."""
        here = self.words.index(self.value)
        if event.key in ("left", "right"):
            self._turn((here + (1 if event.key == "right" else -1)) % len(self.words), event)
        elif event.character and event.character.isalpha():
            order = [*range(here + 1, len(self.words)), *range(here + 1)]
            found = [i for i in order if self.words[i].lower().startswith(event.character.lower())]
            if found:
                self._turn(found[0], event)

    def _turn(self, index: int, event: Key) -> None:
        event.stop()
        self.value = self.words[index]
        self.refresh()
        self.post_message(self.Turned())

    def on_focus(self) -> None:
        """Show the focus."""
        self.refresh()

    def on_blur(self) -> None:
        """Show that the focus went on."""
        self.refresh()


def _bold(*, reverse: bool) -> Any:
    from rich.style import Style

    return Style(reverse=reverse, bold=reverse)


class Form(ModalScreen[Values | None]):
    """Asks for some fields; dismissed with their texts, or None after Esc."""

    BINDINGS: ClassVar[list[BindingType]] = [
        Binding("escape", "leave", "leave without writing"),
        Binding("enter", "forward(True)", "next, write", priority=True),
        Binding("down,tab", "forward(False)", "next", priority=True),
        Binding("up,shift+tab", "back", "previous", priority=True),
    ]

    def __init__(
        self,
        title: str,
        fields: Sequence[Field],
        *,
        note: str = "",
        check: Check | None = None,
        sketch: Sketch | None = None,
        write_word: str = "Enter on the last line writes",
    ) -> None:
        super().__init__()
        self.title_text, self.fields, self.note = title, tuple(fields), note
        self._check, self._sketch, self._write_word = check, sketch, write_word
        self.errors: dict[str, str] = {}
        self._asked = False  # errors stand beside the fields once writing was tried, or a field was left

    def compose(self) -> ComposeResult:
        """Fields on the left, the drawing on the right."""
        with Vertical(id="form", classes="with-sketch" if self._sketch else ""):
            yield Panel(self._title, id="form-title")
            with Horizontal(id="form-body"):
                with Vertical(id="form-fields"):
                    for field in self.fields:
                        with Horizontal(classes="form-line"):
                            yield Panel(self._label(field), classes="form-label")
                            if field.words:
                                yield ChoiceLine(field, id=f"field-{field.key}", classes="form-choice")
                            else:
                                yield Input(
                                    value=field.value,
                                    id=f"field-{field.key}",
                                    classes="form-input",
                                    compact=True,
                                    placeholder=field.hint,
                                    select_on_focus=False,
                                )
                        yield Panel(self._error(field), id=f"error-{field.key}", classes="form-error")
                    yield Panel(self._note, id="form-note")
                if self._sketch:
                    yield Panel(self._drawing, id="form-sketch")
            yield Panel(self._foot, id="form-foot")

    def on_mount(self) -> None:
        """Start on the first field that is not filled."""
        empty = [field for field in self.fields if not field.value and not field.words]
        self._line(empty[0] if empty else self.fields[0]).focus()

    def _line(self, field: Field) -> Input | ChoiceLine:
        found = self.query_one(f"#field-{field.key}")
        assert isinstance(found, Input | ChoiceLine)  # noqa: S101 - compose yields nothing else
        return found

    def values(self) -> Values:
        """The texts as they stand; 'not stated' is empty."""
        texts = {field.key: self._line(field).value.strip() for field in self.fields}
        return {key: "" if text == "not stated" else text for key, text in texts.items()}

    def _title(self, width: int, height: int) -> list[Row]:
        return [row((f" {clean(self.title_text)}", "strong"))]

    def _foot(self, width: int, height: int) -> list[Row]:
        return [row((f" {self._write_word} · ↑ ↓ line · ← → word · Esc: not written", "soft"))]

    def _note(self, width: int, height: int) -> list[Row]:
        return paragraph(self.note, width, style="soft") if self.note else []

    def _label(self, field: Field) -> Callable[[int, int], list[Row]]:
        def made(width: int, height: int) -> list[Row]:
            here = self.focused is not None and self.focused.id == f"field-{field.key}"
            return [row(("▶" if here else " ", "accent"), (field.label, "strong" if here else "text"))]

        return made

    def _error(self, field: Field) -> Callable[[int, int], list[Row]]:
        def made(width: int, height: int) -> list[Row]:
            text = self.errors.get(field.key, "")
            return paragraph(text, width, style="bad", mark=("▲", "bad"), most=6) if text else []

        return made

    def _drawing(self, width: int, height: int) -> list[Row]:
        return list(self._sketch(self.values(), width, height)) if self._sketch else []

    def judge(self) -> dict[str, str]:
        """Error texts by field key, of the texts as they stand."""
        values = self.values()
        errors = {field.key: text for field in self.fields if (text := field.error(values[field.key]))}
        if not errors and self._check:
            errors = self._check(values)
        return errors

    def _show_errors(self) -> None:
        for field in self.fields:
            panel = self.query_one(f"#error-{field.key}", Panel)
            text = self.errors.get(field.key, "")
            lines = len(wrapped(text, panel.size.width - 4, 6)) if text else 0
            panel.styles.height = lines
            panel.redraw()
        if self._sketch:
            self.query_one("#form-sketch", Panel).redraw()

    def on_input_changed(self) -> None:
        """The drawing follows; an error goes as soon as it is put right."""
        self._follow()

    def on_choice_line_turned(self) -> None:
        """The drawing follows."""
        self._follow()

    def _follow(self) -> None:
        if self._asked:
            self.errors = self.judge()
        self._show_errors()

    def on_descendant_focus(self) -> None:
        """A shape before the line that is being filled."""
        for panel in self.query(".form-label").results(Panel):
            panel.redraw()

    def _here(self) -> int:
        focused = self.focused
        keys = [f"field-{field.key}" for field in self.fields]
        return keys.index(focused.id) if focused and focused.id in keys else 0

    def action_forward(self, write: bool) -> None:
        """To the next line; on the last one, write if all is well."""
        here = self._here()
        if here + 1 < len(self.fields):
            self._line(self.fields[here + 1]).focus()
        elif write:
            self._write()

    def action_back(self) -> None:
        """To the line before."""
        self._line(self.fields[max(0, self._here() - 1)]).focus()

    def action_leave(self) -> None:
        """Nothing is written."""
        self.dismiss(None)

    def _write(self) -> None:
        self._asked = True
        self.errors = self.judge()
        self._show_errors()
        if not self.errors:
            self.dismiss(self.values())
            return
        first = next((field for field in self.fields if field.key in self.errors), self.fields[0])
        self._line(first).focus()
