"""Waiting on a named condition instead of sleeping: the app's own pauses, and a clear word when it never comes."""

from __future__ import annotations

from collections.abc import AsyncIterator, Callable
from contextlib import asynccontextmanager

from textual.events import Paste
from textual.pilot import Pilot

from fieldbook.clock import FakeClock
from fieldbook.screens.app import FieldbookApp
from fieldbook.screens.book_screen import BookScreen
from fieldbook.screens.forms import Form
from fieldbook.screens.panel import Panel

from .fakes import NOW_MS, FakeBridge

SIZES = [(80, 24), (120, 40)]
ROUNDS = 400


async def wait_until(pilot: Pilot[int], condition: Callable[[], bool], what: str) -> None:
    """Let the app go on until the condition holds."""
    for _ in range(ROUNDS):
        if condition():
            return
        await pilot.pause(0.02)
    raise AssertionError(f"never came: {what}\n{screen_text(pilot)}")


def screen_text(pilot: Pilot[int]) -> str:
    """Everything the panels in sight say."""
    shown = [panel.text() for panel in pilot.app.screen.query(Panel) if panel.display and panel.size.height]
    return "\n".join(shown)


async def see(pilot: Pilot[int], *words: str) -> None:
    """Wait until all the words stand on the screen."""
    for word in words:
        await wait_until(pilot, lambda word=word: word in screen_text(pilot), f"{word!r} on the screen")  # type: ignore[misc]


def desk(pilot: Pilot[int]) -> BookScreen:
    """The book screen."""
    app = pilot.app
    assert isinstance(app, FieldbookApp)
    return app.desk


async def form(pilot: Pilot[int]) -> Form:
    """The form on top, once it is drawn."""
    await wait_until(
        pilot, lambda: isinstance(pilot.app.screen, Form) and "Esc: not written" in screen_text(pilot), "a form"
    )
    top = pilot.app.screen
    assert isinstance(top, Form)
    return top


async def typed(pilot: Pilot[int], text: str) -> None:
    """Put a text into the line being filled, as a paste over what stood there would."""
    top = await form(pilot)
    top.lines[top.here].put("")
    top.post_message(Paste(text))
    await wait_until(pilot, lambda: bool(top.lines[top.here].text), "the pasted text")


async def on_desk(pilot: Pilot[int]) -> None:
    """Wait until no form or question is on top."""
    await wait_until(pilot, lambda: pilot.app.screen is desk(pilot), "the book screen on top")


@asynccontextmanager
async def opened(
    bridge: FakeBridge, size: tuple[int, int] = (80, 24), theme: str = "noon"
) -> AsyncIterator[Pilot[int]]:
    """The app on a fake bridge, once the first picture has come."""
    app = FieldbookApp(bridge, clock=FakeClock(0, NOW_MS), theme=theme)
    async with app.run_test(size=size) as pilot:
        await wait_until(pilot, lambda: app.desk.view is not None and not app.desk._first, "the first picture")
        await pilot.pause()
        yield pilot
