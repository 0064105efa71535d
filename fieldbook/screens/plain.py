"""User text as plain text: no markup, no control characters, a known width in cells.

Whatever a person, a receiver or another book wrote may hold escape sequences, bidirectional overrides, wide
characters or three hundred letters. `clean` makes one visible line of it; `fit` and `pad` count cells, not letters.
"""

from __future__ import annotations

import textwrap

from rich.cells import cell_len, chop_cells, set_cell_size

from fieldbook.model.visible import visible

LONGEST = 2000  # characters of one text that a screen looks at
_ASCII = str.maketrans(
    {
        "─": "-", "━": "=", "│": "|", "┊": ":", "┌": "+", "┐": "+", "└": "+", "┘": "+", "├": "+", "┤": "+",
        "┬": "+", "┴": "+", "┼": "+", "╲": "\\", "╱": "/", "●": "o", "○": "o", "▲": "!", "■": "#", "▶": ">",
        "◀": "<", "▼": "v", "·": ".", "…": "~", "–": "-", "−": "-", "×": "x", "°": "d", "′": "'", "″": '"',
        "≥": ">", "≤": "<", "√": "V", "²": "2", "█": "#", "✓": "y", "‹": "<", "›": ">", "±": "~", "△": "^", "◆": "*",
        "←": "<", "→": ">", "↓": "v", "↑": "^", "╳": "X", "╌": "-", "▁": ".", "▏": "|",
    }
)  # fmt: skip


def clean(text: object, limit: int = LONGEST) -> str:
    r"""One line of visible characters: whatever cannot be seen stands as `\x1b` or `\u202e`, as on the command line.

    Line ends, tabs and other blanks become spaces, so nothing a book holds can move the cursor or turn the writing
    direction, and no two names look alike that are not.
    """
    source = str(text)
    cut = source[:limit]
    shown = visible("".join(" " if letter.isspace() else letter for letter in cut))
    return shown + "…" if len(source) > limit else shown


def width_of(text: str) -> int:
    """Cells the text takes in a terminal."""
    return cell_len(text)


def fit(text: object, width: int) -> str:
    """The cleaned text in at most `width` cells, with an ellipsis where it was cut."""
    shown = clean(text)
    if width <= 0:
        return ""
    if cell_len(shown) <= width:
        return shown
    return set_cell_size(shown, width - 1).rstrip() + "…"


def pad(text: object, width: int, *, right: bool = False) -> str:
    """The cleaned text in exactly `width` cells."""
    shown = fit(text, width)
    space = " " * max(0, width - cell_len(shown))
    return space + shown if right else shown + space


def wrapped(text: object, width: int, most: int = 99) -> list[str]:
    """The cleaned text in lines of at most `width` cells; the last one says with an ellipsis that there is more."""
    width = max(4, width)
    lines: list[str] = []
    for line in textwrap.wrap(clean(text), width, break_long_words=True) or [""]:
        # textwrap counts letters; wide characters need a second look
        lines.extend(chop_cells(line, width) if cell_len(line) > width else [line])
    if len(lines) > most:
        lines = [*lines[: most - 1], fit(lines[most - 1] + " " + lines[most], width - 1).rstrip("…") + "…"]
    return lines


def to_ascii(text: str) -> str:
    """The same text for a terminal that has only ASCII; letters of other scripts become question marks."""
    return text.translate(_ASCII).encode("ascii", "replace").decode("ascii")
