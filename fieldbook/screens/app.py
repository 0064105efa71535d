"""`fieldbook open BOOK`: the screen of one book. It looks and writes entries; recording is another process.

Closing the terminal, killing this process or leaving it never touches the recorder. Colours come from the table of
themes; NO_COLOR is respected by Textual's own filter, and every state is a word or a shape first.
"""

from __future__ import annotations

import os
import sys
from collections.abc import Iterable
from pathlib import Path
from typing import ClassVar

from textual.app import App, SystemCommand
from textual.binding import Binding, BindingType
from textual.screen import Screen

from fieldbook.clock import Clock, SystemClock
from fieldbook.screens.actions import ACTIONS
from fieldbook.screens.book_screen import BookScreen
from fieldbook.screens.bridge import Bridge
from fieldbook.screens.terminal_watch import leave_with_the_terminal
from fieldbook.screens.themes import BY_NAME, PALETTES, textual_theme


class FieldbookApp(App[int], inherit_bindings=False):
    """One book on one screen."""

    CSS_PATH = "app.tcss"
    TITLE = "Fieldbook"
    ENABLE_COMMAND_PALETTE = True
    COMMAND_PALETTE_BINDING = "f4"  # a double of the colon; no control combinations
    BINDINGS: ClassVar[list[BindingType]] = [Binding("ctrl+c", "ask_quit", "quit", show=False, priority=True)]

    def __init__(self, bridge: Bridge, clock: Clock | None = None, theme: str = "dusk") -> None:
        super().__init__()
        self.desk = BookScreen(bridge, clock or SystemClock())
        for palette in PALETTES:
            self.register_theme(textual_theme(palette))
        self.theme = theme
        self.animation_level = "none"  # nothing moves but the figures; cheap over slow lines

    @property
    def ascii_only(self) -> bool:
        """Whether this theme draws in ASCII."""
        palette = BY_NAME.get(self.theme)
        return palette is not None and palette.ascii_only

    def on_mount(self) -> None:
        """Open the book."""
        self.push_screen(self.desk)

    def next_theme(self) -> None:
        """The next light."""
        names = list(BY_NAME)
        self.theme = names[(names.index(self.theme) + 1) % len(names)]
        self.desk.tell(f"light: {self.theme}")

    def action_ask_quit(self) -> None:
        """Ctrl+C goes the same way as Q: it asks."""
        if self.screen is self.desk:
            self.desk.do_quit()
        else:
            self.screen.dismiss()

    def get_system_commands(self, screen: Screen[object]) -> Iterable[SystemCommand]:  # noqa: ARG002 - Textual's form
        """The palette holds the table of actions and nothing else."""
        for item in ACTIONS:
            if self.desk.page in item.pages and item.name not in ("up", "down", "palette"):
                yield SystemCommand(f"{item.label} ({item.shown})", item.help, getattr(self.desk, f"do_{item.name}"))


def first_theme() -> str:
    """Console where the terminal is plain or not UTF-8, else noon by day: black on white reads best in the sun."""
    encoding = (getattr(sys.stdout, "encoding", "") or "").lower().replace("-", "")
    if os.environ.get("TERM", "") in ("linux", "vt100", "dumb") or encoding not in ("utf8", ""):
        return "console"
    return "noon"


def run(book_path: Path) -> int:
    """Show a book until the person leaves.

    Returns:
        Exit code of the command.
    """
    bridge = Bridge(Path(book_path))
    app = FieldbookApp(bridge, theme=first_theme())
    watch = leave_with_the_terminal()
    try:
        return int(app.run(mouse=False) or 0)
    finally:
        watch.set()
