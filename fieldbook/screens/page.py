"""A page of the book: one or two facing panels, and what the desk (the book screen) offers a page.

From 110 columns both pages lie open; below, Tab turns the leaf.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING, Any, ClassVar, Protocol, cast

from textual.app import ComposeResult
from textual.containers import Horizontal
from textual.widget import Widget

from fieldbook.clock import Clock
from fieldbook.model.canonical import Tree
from fieldbook.model.live import LiveView
from fieldbook.model.state import Occupation
from fieldbook.screens.alarm_log import AlarmLog
from fieldbook.screens.bridge import Bridge
from fieldbook.screens.panel import Panel
from fieldbook.screens.rows import Row
from fieldbook.screens.sheets import Reduced

if TYPE_CHECKING:
    from textual.screen import Screen


class Desk(Protocol):
    """What pages and forms may use of the book screen."""

    bridge: Bridge
    clock: Clock
    view: LiveView | None
    reduced: Reduced | None
    reducing: bool
    alarms: AlarmLog

    @property
    def ascii_only(self) -> bool:
        """Plots in ASCII."""
        ...

    def tell(self, text: str, style: str = "good") -> None:
        """Say something on the line above the leave check."""
        ...

    def write(self, job: Callable[[], Any], then: Callable[[Any], None] | None = None) -> None:
        """Do a writing job in its thread."""
        ...

    def work(self, job: Callable[[], Any], then: Callable[[Any], None] | None = None) -> None:
        """Do a long job in its thread."""
        ...

    def ask(self, screen: Screen[Any], then: Callable[[Any], None]) -> None:
        """Put a form or a question on top."""
        ...

    def go(self, page: str) -> None:
        """Open a page."""
        ...

    def reduce(self) -> None:
        """Reduce the whole book again."""
        ...

    def redraw(self) -> None:
        """Draw the open page again."""
        ...

    def do_seen(self) -> None:
        """The alarms have been seen."""
        ...


def next_tree(view: LiveView) -> Tree | None:
    """The session of the next occupation: the book's session, without readings that belong to the last set-up."""
    if view.state.session is None:
        return None
    tree = dict(view.state.session.tree)
    setup = dict(tree.get("setup", {}))
    used = [item.session.tree.get("setup", {}).get("height") for item in view.state.occupations.values()]
    if setup.get("height") and setup["height"] in used:
        setup.pop("height")
    if view.state.occupations:
        setup.pop("inscription_read", None)  # it is read anew from each metal
    tree["setup"] = setup
    return tree


def open_occupation(view: LiveView | None) -> Occupation | None:
    """The occupation that is not ended."""
    return view.state.open_occupation if view else None


class Page(Widget, can_focus=False):
    """One page; sub-classes fill `left` and, if they have a facing page, `right`."""

    name_of_page: ClassVar[str] = ""
    facing: ClassVar[bool] = False

    def compose(self) -> ComposeResult:
        """The panel or panels."""
        with Horizontal(classes="leaf"):
            yield Panel(self.left, classes="left")
            if self.facing:
                yield Panel(self.right, classes="right")

    @property
    def desk(self) -> Desk:
        """The book screen."""
        return cast(Desk, self.screen)

    @property
    def view(self) -> LiveView | None:
        """The latest picture."""
        return self.desk.view

    def left(self, width: int, height: int) -> list[Row]:
        """Rows of the left page."""
        raise NotImplementedError

    def right(self, width: int, height: int) -> list[Row]:
        """Rows of the facing page."""
        raise NotImplementedError

    def redraw(self) -> None:
        """Ask the panels for their rows again."""
        for panel in self.query(Panel):
            if panel.display:
                panel.redraw()

    def opened(self) -> None:
        """The page came into sight."""

    def turn(self) -> None:
        """Turn the leaf (only seen below 110 columns)."""
        self.toggle_class("turned")
        self.call_after_refresh(self.redraw)

    def choose(self) -> None:
        """Enter."""

    def move(self, lines: int) -> None:
        """Up and down: scroll."""
        for panel in self.query(Panel):
            panel.scroll_rows(lines)

    def side(self, step: int) -> None:
        """Left and right."""


def scrolled_to(index: int, top: int, height: int) -> int:
    """The first line to show so that line `index` is in sight."""
    if height < 1 or index < top:
        return max(0, index)
    return index - height + 1 if index >= top + height else top
