"""Every page at 80x24 and 120x40, on an invented job: what must stand on it stands on it, and nothing overflows."""

from __future__ import annotations

import asyncio
import dataclasses

import pytest
from rich.cells import cell_len
from textual.widgets import ContentSwitcher

from fieldbook.screens.actions import PAGES
from fieldbook.screens.panel import Panel

from .fakes import HOSTILE, SESSION_TREE, FakeBridge, recorder, reduction
from .waiting import SIZES, desk, on_desk, opened, screen_text, see, wait_until

PAGE_WORDS = {
    "cover": ("FIELD BOOK", "Kestrel Ridge control", "EPSG:7912", "EPSG:7843", "20 mm"),
    "marks": ("MARKS", "KR-07", "brass plate in rock", "asked for from the metal"),
    "setup": ("SET-UP", "DEMO-A1 NONE", "PHASE CENTRE", "1.4946 m"),
    "occupation": ("FIGURES", "23°40′12.4460″ S", "148°53′07.8478″ E", "GDA2020", "842 kept of 861", "worth about 4"),
    "leave": ("MAY THE TRIPOD COME DOWN?", "NOT YET", "58 s", "Come back from 13:40 UTC", "What cannot be known here"),
    "reduction": ("REDUCTION", "as observed", "ITRF2014", "E 692244.123", "552.11 m", "no national height"),
    "certificate": ("CERTIFICATE", "end it first"),
    "diary": ("DIARY", "KR-07: brass plate in rock"),
    "links": ("LINKS", "/dev/ttyUSB0", "GNGGA 1.0/s"),
}


def widths_hold(pilot: object) -> None:
    """No line of a panel in sight is drawn wider than the panel."""
    app = pilot.app  # type: ignore[attr-defined]
    for panel in app.screen.query(Panel):
        if panel.display and panel.size.width and panel.size.height:
            for y in range(panel.size.height):
                strip = panel.render_line(y)
                assert strip.cell_length == panel.size.width, (panel, y)


@pytest.mark.parametrize("size", SIZES, ids=str)
@pytest.mark.parametrize("page", PAGES)
def test_page_shows_what_it_must(page: str, size: tuple[int, int]) -> None:
    async def go() -> None:
        async with opened(FakeBridge(recording=True), size) as pilot:
            await pilot.press(str(PAGES.index(page) + 1))
            await see(pilot, *PAGE_WORDS[page])
            assert pilot.app.screen.query_one(ContentSwitcher).current == f"page-{page}"
            await see(pilot, "NOT YET", "09:41:22 UTC", "RTK fixed", "19 sat")
            widths_hold(pilot)

    asyncio.run(go())


@pytest.mark.parametrize("page", ["setup", "occupation", "reduction"])
def test_leaf_turns_at_80_and_both_lie_open_at_120(page: str) -> None:
    right = {"setup": "HEIGHT OF ANTENNA", "occupation": "SKETCH", "reduction": "BUDGET AND FINDINGS"}[page]
    left = {"setup": "SET-UP", "occupation": "FIGURES", "reduction": "REDUCTION"}[page]

    async def narrow() -> None:
        async with opened(FakeBridge(recording=True)) as pilot:
            await pilot.press(str(PAGES.index(page) + 1))
            await see(pilot, left)
            assert right not in screen_text(pilot)
            await pilot.press("tab")
            await see(pilot, right)
            assert left not in screen_text(pilot)
            widths_hold(pilot)
            await pilot.press("tab")
            await see(pilot, left)

    async def wide() -> None:
        async with opened(FakeBridge(recording=True), (120, 40)) as pilot:
            await pilot.press(str(PAGES.index(page) + 1))
            await see(pilot, left, right)

    asyncio.run(narrow())
    asyncio.run(wide())


def test_book_without_session_asks_for_a_session_file() -> None:
    async def go() -> None:
        async with opened(FakeBridge(with_session=False)) as pilot:
            await see(pilot, "This book has no session yet.", "None of them has a default")
            await pilot.press("s")
            await see(pilot, "load a session file")

    asyncio.run(go())


@pytest.mark.parametrize(
    ("change", "word"),
    [
        (lambda b: setattr(b, "alive", False), "RECORDER GONE"),
        (lambda b: setattr(b, "silence_s", 7.4), "NO DATA 7 s"),
        (lambda b: setattr(b, "recorder", recorder(link_state="lost")), "LINK LOST"),
        (lambda b: setattr(b, "recorder", recorder(quality=5)), "NOT ACCEPTED: RTK float"),
        (lambda b: setattr(b, "recorder", recorder(alarms=["disk_too_slow"])), "DISK TOO SLOW"),
    ],
)
def test_what_is_wrong_stands_in_the_head_line(change: object, word: str) -> None:
    async def go() -> None:
        bridge = FakeBridge(recording=True)
        async with opened(bridge) as pilot:
            await see(pilot, "RTK fixed")
            change(bridge)  # type: ignore[operator]
            await see(pilot, word)

    asyncio.run(go())


def test_no_reduction_says_why_and_what_to_do() -> None:
    async def go() -> None:
        bridge = FakeBridge(recording=True)
        bridge.reduction, bridge.problem = None, ("no_fix", "No usable fix yet.", "Wait for the receiver to fix.")
        async with opened(bridge) as pilot:
            await see(pilot, "No usable fix yet.", "Wait for the receiver to fix.", "NOT YET")
            await pilot.press("l")
            await see(pilot, "nothing speaks for leaving")

    asyncio.run(go())


def test_good_to_leave_says_what_the_mark_still_wants() -> None:
    async def go() -> None:
        bridge = FakeBridge(recording=True)
        bridge.reduction = reduction(met=True)
        async with opened(bridge) as pilot:
            await see(pilot, "GOOD TO LEAVE", "all of this set-up is met", "the mark: Come back from 13:40 UTC")

    asyncio.run(go())


def test_two_95_percents_stand_beside_their_own_frame() -> None:
    """The client's includes the frame operation, the requirement here is judged in the receiver frame."""

    async def go() -> None:
        async with opened(FakeBridge(recording=True)) as pilot:
            await see(pilot, "95 % 19 mm circle", "95 % 17 mm   wanted 20 mm   ✓ reached  in the receiver frame")

    asyncio.run(go())


def test_bell_rings_once_per_change() -> None:
    async def go() -> None:
        bridge = FakeBridge(recording=True)
        async with opened(bridge) as pilot:
            rung: list[int] = []
            pilot.app.bell = lambda: rung.append(1)  # type: ignore[method-assign]
            bridge.silence_s = 7.0
            await see(pilot, "NO DATA 7 s")
            bridge.silence_s = 8.0
            await see(pilot, "NO DATA 8 s")
            assert len(rung) == 1
            bridge.silence_s = 0.1
            await see(pilot, "RTK fixed")
            bridge.alive = False
            await see(pilot, "RECORDER GONE")
            assert len(rung) == 2

    asyncio.run(go())


def test_equal_pictures_paint_nothing() -> None:
    async def go() -> None:
        bridge = FakeBridge(recording=True)
        async with opened(bridge, (120, 40)) as pilot:
            await see(pilot, "FIGURES", "SKETCH")
            feed, panels = desk(pilot).feed, list(pilot.app.screen.query(Panel))
            await wait_until(pilot, lambda: feed.taken >= 3, "three pictures")
            painted, taken = sum(panel.painted for panel in panels), feed.taken
            await wait_until(pilot, lambda: feed.taken >= taken + 4, "four more pictures")
            assert sum(panel.painted for panel in panels) == painted

    asyncio.run(go())


@pytest.mark.parametrize("size", [(60, 20), (30, 8), (250, 80)], ids=str)
def test_other_sizes_break_nothing(size: tuple[int, int]) -> None:
    async def go() -> None:
        async with opened(FakeBridge(recording=True), size) as pilot:
            for number in range(1, 10):
                await pilot.press(str(number))
                await wait_until(pilot, lambda: True, "a pause")
                await pilot.pause()
                widths_hold(pilot)
            for key in ("h", "escape", "e", "escape", "b", "escape", "question_mark", "escape", "q", "enter"):
                await pilot.press(key)
                await pilot.pause()
            await on_desk(pilot)

    asyncio.run(go())


@pytest.mark.parametrize("kind", sorted(HOSTILE))
@pytest.mark.parametrize("size", SIZES, ids=str)
def test_hostile_text_is_only_text(kind: str, size: tuple[int, int]) -> None:
    """As mark name, description, remark, receiver text and finding: shown as text, on every page, in its width."""

    async def go() -> None:
        text = HOSTILE[kind]
        bridge = FakeBridge(recording=True)
        tree = {**SESSION_TREE, "mark": {**SESSION_TREE["mark"], "name": text, "description": text}}
        bridge.observer = "R. Kell"
        bridge._entry("session", {"tree": tree}, "R. Kell")
        bridge._entry("mark", tree["mark"], "R. Kell")
        bridge._entry("remark", {"occupation": 1, "text": text}, text[:80])
        assert bridge.reduction is not None
        bridge.reduction.findings[0] = dataclasses.replace(bridge.reduction.findings[0], text=text, severity="stop")
        bridge.reduction.mark = text
        bridge.state.occupations[1].mark = text
        bridge.recorder = recorder(link_reason=text, station=text, sentences={text[:20]: 3})
        async with opened(bridge, size) as pilot:
            for page in PAGES:
                await pilot.press(str(PAGES.index(page) + 1))
                await wait_until(pilot, lambda page=page: desk(pilot).page == page, page)  # type: ignore[misc]
                await pilot.pause()
                widths_hold(pilot)
                for panel in pilot.app.screen.query(Panel):
                    for y in range(panel.size.height if panel.display else 0):
                        line = panel.render_line(y).text
                        assert all(letter.isprintable() for letter in line), (page, line)
                        assert cell_len(line) == panel.size.width
            await pilot.press("8")
            shown = {
                "markup": "[bold red]x[/bold red]",
                "escapes": r"\x1b[31mred\x1b[0m",
                "long": "LLLLLLLL",
                "right_to_left": r"\u202eevil",
                "wide": "測量點",
            }[kind]
            await see(pilot, shown)

    asyncio.run(go())
