"""Every key, from the table of actions."""

# ruff: noqa: ARG005 - every maker of rows takes the size, and some do not need it

from __future__ import annotations

from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import Binding, BindingType

from fieldbook.screens.actions import ACTIONS, PAGE_TITLES, PAGES
from fieldbook.screens.once import Once
from fieldbook.screens.panel import Panel
from fieldbook.screens.plain import pad
from fieldbook.screens.rows import BLANK, Row, heading, row


def keys_rows(page: str, width: int) -> list[Row]:
    """Keys of the open page first, then the others."""
    rows = [
        heading("KEYS", width, "Esc: back"),
        row(
            " ",
            ("1", "strong"),
            " to ",
            ("9", "strong"),
            " open a page: ",
            (", ".join(PAGE_TITLES[name] for name in PAGES), "soft"),
        ),
        BLANK,
    ]
    here = [item for item in ACTIONS if page in item.pages]
    others = [item for item in ACTIONS if page not in item.pages]
    for title, items in ((f"On this page, {PAGE_TITLES[page]}", here), ("On other pages", others)):
        rows.append(row((f" {title}", "soft")))
        for item in items:
            shown = item.shown + (f" {item.double.upper()}" if item.double else "")
            where = "" if page in item.pages else f" ({', '.join(PAGE_TITLES[name] for name in item.pages[:3])})"
            rows.append(row("  ", (pad(shown, 7), "strong"), (item.help + where, "text")))
            if item.command:
                rows.append(row("         ", (item.command, "soft")))
    return rows


class KeysView(Once[None]):
    """The list of keys, scrolled with the arrows."""

    BINDINGS: ClassVar[list[BindingType]] = [
        Binding("escape,enter,question_mark,f1,q,Q", "back", "back"),
        Binding("down", "scroll(1)", "down"),
        Binding("up", "scroll(-1)", "up"),
        Binding("pagedown,space", "scroll(10)", "page down"),
        Binding("pageup", "scroll(-10)", "page up"),
    ]

    def __init__(self, page: str) -> None:
        super().__init__()
        self._page = page

    def compose(self) -> ComposeResult:
        """One panel."""
        yield Panel(lambda width, height: keys_rows(self._page, width), id="keys")

    def action_scroll(self, lines: int) -> None:
        """Move the lines."""
        self.query_one("#keys", Panel).scroll_rows(lines)

    def action_back(self) -> None:
        """Back to the book."""
        self.dismiss(None)
