"""One line of a form: what may stand in it, what is wrong with it, and the keys that change it. No widget."""

from __future__ import annotations

from dataclasses import dataclass

from fieldbook.screens.plain import clean, fit, pad, width_of
from fieldbook.screens.rows import Row, Span, row
from fieldbook.settings.values import BadValue, checked

LONGEST_FIELD = 1000  # characters; a remark is a sentence, not a file
NOT_STATED = "not stated"


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
        return words if self.required else (NOT_STATED, *words)

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


class FieldLine:
    """A field being filled: its text, and where the cursor stands."""

    def __init__(self, field: Field) -> None:
        self.field = field
        self.text = field.value
        if field.words and field.value not in field.words:
            self.text = field.words[0]
        self.cursor = len(self.text)

    @property
    def value(self) -> str:
        """The text without blanks at its ends; a choice left open is empty."""
        return "" if self.field.words and self.text == NOT_STATED else self.text.strip()

    def put(self, text: str) -> None:
        """Another text altogether, the cursor at its end."""
        self.text, self.cursor = text, len(text)

    def insert(self, text: str) -> bool:
        """Text at the cursor, as one line; whether anything changed. A choice takes none."""
        if self.field.words:
            return False
        # what cannot be printed is not typed: escape sequences of a paste never reach the book
        shown = "".join(letter if letter.isprintable() else " " for letter in text)
        shown = shown[: max(0, LONGEST_FIELD - len(self.text))]
        self.text = self.text[: self.cursor] + shown + self.text[self.cursor :]
        self.cursor += len(shown)
        return bool(shown)

    def press(self, key: str, character: str | None) -> bool:
        """A key; whether it changed what is seen."""
        if self.field.words:
            return self._turn(key, character)
        if character and character.isprintable():
            return self.insert(character)
        return self._edit(key)

    def _turn(self, key: str, character: str | None) -> bool:
        words = self.field.words
        here = words.index(self.text)
        if key in ("left", "right", "space"):
            self.text = words[(here + (-1 if key == "left" else 1)) % len(words)]
            return True
        if character and character.isalpha():
            order = [*words[here + 1 :], *words[: here + 1]]
            found = [word for word in order if word.lower().startswith(character.lower())]
            self.text = found[0] if found else self.text
            return bool(found)
        return False

    def _edit(self, key: str) -> bool:
        at = self.cursor
        if key == "backspace" and at:
            self.text, self.cursor = self.text[: at - 1] + self.text[at:], at - 1
        elif key == "delete":
            self.text = self.text[:at] + self.text[at + 1 :]
        elif key in ("left", "right", "home", "end"):
            moved = {"left": at - 1, "right": at + 1, "home": 0, "end": len(self.text)}[key]
            self.cursor = max(0, min(moved, len(self.text)))
        else:
            return False
        return True

    def row(self, width: int, label_width: int, *, here: bool) -> Row:
        """The line as drawn: a shape before the one being filled, the cursor as a turned cell."""
        room = max(1, width - label_width - 2)
        head: tuple[Span, Span] = (
            ("▶" if here else " ", "accent"),
            (pad(self.field.label, label_width), "strong" if here else "text"),
        )
        return row(*head, *(self._choice(room, here=here) if self.field.words else self._typed(room, here=here)))

    def _choice(self, room: int, *, here: bool) -> list[Span]:
        words = self.field.words
        if sum(width_of(word) + 2 for word in words) > room:
            return [(fit(f"‹ {self.text} ›", room), "chosen" if here else "strong")]
        return [
            (f"[{word}]", "chosen" if here else "strong") if word == self.text else (f" {word} ", "soft")
            for word in words
        ]

    def _typed(self, room: int, *, here: bool) -> list[Span]:
        if not here:
            if self.text:
                return [(pad(self.text, room), "field")]
            return [(pad(self.field.hint, room), "hint")]
        if not self.text:
            hint = fit(self.field.hint, room - 1)
            return [(" ", "chosen"), (pad(hint, room - 1), "hint")]
        before, under = self.text[: self.cursor], self.text[self.cursor : self.cursor + 1] or " "
        while width_of(clean(before)) + 2 > room:  # the cursor is always in sight
            before = before[1:]
        after_room = max(0, room - width_of(clean(before)) - max(1, width_of(clean(under))))
        after = pad(self.text[self.cursor + 1 :], after_room) if after_room else ""
        return [(clean(before), "field"), (clean(under), "chosen"), (after, "field")]
