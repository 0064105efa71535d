"""What a panel shows: rows of (text, style name) spans, compared as plain tuples, so equal rows cost no repaint."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from fieldbook.screens.plain import fit, pad, width_of, wrapped

Span = tuple[str, str]
Row = tuple[Span, ...]

STYLES = (
    "text",
    "strong",
    "soft",
    "good",
    "warn",
    "bad",
    "accent",
    "rule",
    "struck",
    "chosen",
    "alarm",
    "carried",
    "field",
    "hint",
)
BLANK: Row = ()


def row(*parts: str | Span) -> Row:
    """A row of texts (style "text") and (text, style) spans."""
    return tuple((part, "text") if isinstance(part, str) else part for part in parts)


def row_width(line: Row) -> int:
    """Cells of a row."""
    return sum(width_of(text) for text, _ in line)


def cropped(line: Row, width: int) -> Row:
    """The row in exactly `width` cells."""
    result: list[Span] = []
    left = width
    for text, style in line:
        size = width_of(text)
        if size >= left:
            result.append((pad(text, left) if size > left else text, style))
            return tuple(result)
        result.append((text, style))
        left -= size
    result.append((" " * left, "text"))
    return tuple(result)


def beside(left: Sequence[Row], right: Sequence[Row], left_width: int) -> list[Row]:
    """Two columns: the left one `left_width` cells wide."""
    count = max(len(left), len(right))
    first = [*left, *[BLANK] * (count - len(left))]
    second = [*right, *[BLANK] * (count - len(right))]
    return [cropped(one, left_width) + two for one, two in zip(first, second, strict=True)]


def heading(title: str, width: int, note: str = "") -> Row:
    """A page's title, with a soft note at the right edge."""
    room = max(0, width - width_of(title) - 3)
    return row((f" {title}", "strong"), (pad(note, room, right=True), "soft"), " ")


def labelled(label: str, value: object, width: int, *, style: str = "text", label_width: int = 13) -> Row:
    """` Label       value`, cut to the width."""
    return row((" " + pad(label, label_width), "soft"), (fit(value, width - label_width - 2), style))


def labelled_lines(
    label: str, value: object, width: int, *, style: str = "text", label_width: int = 13, most: int = 2
) -> list[Row]:
    """The same on as many lines as the value needs, up to `most`."""
    lines = wrapped(value, width - label_width - 2, most)
    return [
        row((" " + pad(label if number == 0 else "", label_width), "soft"), (line, style))
        for number, line in enumerate(lines)
    ]


def paragraph(
    text: object, width: int, *, style: str = "text", indent: int = 1, most: int = 99, mark: Span | None = None
) -> list[Row]:
    """Wrapped text; `mark` (a shape or word) stands before the first line."""
    lead = width_of(mark[0]) + 1 if mark else 0
    lines = wrapped(text, width - indent - lead - 1, most)
    result: list[Row] = []
    for number, line in enumerate(lines):
        head: Iterable[Span] = ()
        if mark:
            head = (mark, (" ", "text")) if number == 0 else ((" " * lead, "text"),)
        result.append(((" " * indent, "text"), *head, (line, style)))
    return result
