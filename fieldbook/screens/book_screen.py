"""The open book: head line, index tabs, one page, leave check, keys. It is the desk the pages work at.

A timer asks the feed for a picture once a second, and at once after anything was written, and draws what has come.
Only lines that changed are painted. What is written goes through a hand, never through the drawing.
"""

# ruff: noqa: ARG005 - every maker of rows takes the size, and some do not need it

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any, ClassVar, cast

from textual.app import ComposeResult
from textual.binding import Binding, BindingType
from textual.message import Message
from textual.screen import Screen
from textual.widgets import ContentSwitcher

from fieldbook.clock import Clock
from fieldbook.model.live import LiveView
from fieldbook.screens import entry_forms, height_form, recording, setup_forms
from fieldbook.screens.actions import ACTIONS, BY_NAME, PAGES
from fieldbook.screens.alarm_log import Alarm, AlarmLog
from fieldbook.screens.big import BigView
from fieldbook.screens.bridge import Bridge
from fieldbook.screens.certificate import CertificatePage, paper
from fieldbook.screens.copying import copy_coordinate
from fieldbook.screens.cover import CoverPage
from fieldbook.screens.diary import DiaryPage
from fieldbook.screens.feed import Feed
from fieldbook.screens.frames_view import FramesView
from fieldbook.screens.hand import Hand, Outcome
from fieldbook.screens.head import head_row, keys_row, leave_row, rule_row, tabs_row
from fieldbook.screens.keys_page import KeysView
from fieldbook.screens.leave import LeavePage
from fieldbook.screens.links_page import LinksPage
from fieldbook.screens.marks import MarksPage
from fieldbook.screens.occupation import OccupationPage
from fieldbook.screens.page import Page, open_occupation
from fieldbook.screens.panel import Panel
from fieldbook.screens.reduction import ReductionPage
from fieldbook.screens.setup import SetupPage
from fieldbook.screens.sheets import Reduced

TICK_S = 0.25
ASK_EVERY = 4  # ticks: a picture a second; each one is a whole reduction of what was heard so far
PAGE_CLASSES: tuple[type[Page], ...] = (
    CoverPage,
    MarksPage,
    SetupPage,
    OccupationPage,
    LeavePage,
    ReductionPage,
    CertificatePage,
    DiaryPage,
    LinksPage,
)
WRITE_WAIT_S = 10.0  # on leaving, entries under way are waited for


class BookScreen(Screen[None]):
    """All pages of one book."""

    HORIZONTAL_BREAKPOINTS = [(0, "-narrow"), (110, "-wide")]  # noqa: RUF012 - Textual declares it without ClassVar
    BINDINGS: ClassVar[list[BindingType]] = [
        *[Binding(str(n), f"page('{name}')", name, show=False) for n, name in enumerate(PAGES, start=1)],
        *[
            Binding(item.keys, f"do('{item.name}')", item.label, show=False, priority=item.name == "turn")
            for item in ACTIONS
        ],
    ]

    class Came(Message):
        """A hand has finished a job."""

        def __init__(self, outcome: Outcome) -> None:
            super().__init__()
            self.outcome = outcome

    def __init__(self, bridge: Bridge, clock: Clock) -> None:
        super().__init__()
        self.bridge, self.clock = bridge, clock
        self.feed = Feed(bridge.snapshot, bridge.close)
        self.view: LiveView | None = None
        self.reduced: Reduced | None = None
        self.reducing = False
        self.page = "cover"
        self.notice: tuple[str, str] | None = None
        self._ticks = 0
        self.alarms = AlarmLog()
        self._first = True
        self._writing = Hand("writing", lambda outcome: self.post_message(self.Came(outcome)))
        self._working = Hand("working", lambda outcome: self.post_message(self.Came(outcome)))

    @property
    def ascii_only(self) -> bool:
        """Plots in ASCII."""
        return bool(getattr(self.app, "ascii_only", False))

    def compose(self) -> ComposeResult:
        """Lines that never change place, and the pages between them."""
        yield Panel(lambda width, height: [head_row(self.view, self.clock, width, self.alarms.unseen())], id="head")
        yield Panel(lambda width, height: [tabs_row(self.page, width)], id="tabs")
        with ContentSwitcher(initial="page-cover", id="pages"):
            for name, made in zip(PAGES, PAGE_CLASSES, strict=True):
                yield made(id=f"page-{name}")
        yield Panel(lambda width, height: [rule_row(self.notice, width)], id="rule")
        yield Panel(lambda width, height: [leave_row(self.view, width)], id="leave-line")
        yield Panel(lambda width, height: [keys_row(self.page, width, self._hidden())], id="keys-line")

    def on_mount(self) -> None:
        """Start looking."""
        self.feed.start()
        self.set_interval(TICK_S, self.tick)

    def on_unmount(self) -> None:
        """Finish what is being written; the recorder is another process and is not touched."""
        self.feed.stop()
        self._writing.close(WRITE_WAIT_S)
        self._working.close(0.2)

    # --- the picture

    def tick(self) -> None:
        """Draw what has come; ask for more once a second."""
        self._ticks += 1
        if self._ticks % ASK_EVERY == 1:
            self.feed.request()
        came = self.feed.latest
        if self.feed.problem is not None and came is None:
            self.tell(" ".join(self.feed.problem), "bad")
        if came is not None and came is not self.view:
            self.view = came
            self._arrived()
            self.current.redraw()
            self._lines()
        elif self._ticks % 2:
            self._lines()  # the clock

    def _arrived(self) -> None:
        if self._first and self.view is not None:
            self._first = False
            if not self.bridge.observer:
                opened = open_occupation(self.view)
                session = opened.session if opened else self.view.state.session
                self.bridge.observer = session.job.observer if session else ""
            if open_occupation(self.view) is not None and self.page == "cover":
                self.go("occupation")
            self.redraw()
        began = self.alarms.look(self.view, self.clock.utc_ms())
        if began:
            self.app.bell()
            self._enter([alarm for alarm in began if not alarm.recorded], acknowledged=False)

    def _enter(self, alarms: Sequence[Alarm], *, acknowledged: bool) -> None:
        """Alarms are entries: when one began, and when somebody had seen it."""
        if self.view is None or self.view.occupation is None or not alarms:
            return
        bridge, number = self.bridge, self.view.occupation.number
        bodies = [(alarm.code, alarm.text) for alarm in alarms if not alarm.good]
        self.write(lambda: [bridge.add_alarm(number, code, text, acknowledged=acknowledged) for code, text in bodies])

    def _lines(self) -> None:
        for name in ("head", "tabs", "rule", "leave-line", "keys-line"):
            self.query_one(f"#{name}", Panel).redraw()

    def _hidden(self) -> frozenset[str]:
        """Actions that would do nothing now are not offered in the foot line."""
        hidden = set()
        opened = open_occupation(self.view)
        if opened is None:
            hidden |= {"end"}
        elif self.view is not None and self.view.recorder_alive:
            hidden |= {"start"}
        if self.page == "occupation" and opened is None:
            hidden |= {"height"}
        if self.page == "leave":
            hidden |= {"leave"}
        if not self.alarms.standing:
            hidden |= {"seen"}
        if self.has_class("-wide"):
            hidden |= {"turn"}
        return frozenset(hidden)

    @property
    def current(self) -> Page:
        """The open page."""
        return cast(Page, self.query_one(f"#page-{self.page}"))

    # --- the desk

    def redraw(self) -> None:
        """Draw the open page and the lines again."""
        self.current.redraw()
        self._lines()

    def tell(self, text: str, style: str = "good") -> None:
        """Say something on the line above the leave check; it stays until the next page or word."""
        self.notice = (text, style)
        self.query_one("#rule", Panel).redraw()

    def write(self, job: Callable[[], Any], then: Callable[[Any], None] | None = None) -> None:
        """A writing job."""
        self._writing.give(job, then)

    def work(self, job: Callable[[], Any], then: Callable[[Any], None] | None = None) -> None:
        """A long job."""
        self._working.give(job, then)

    def on_book_screen_came(self, message: Came) -> None:
        """A job is done."""
        outcome = message.outcome
        if outcome.problem is not None:
            self.reducing = False
            text, remedy = outcome.problem
            self.tell(f"{text} {remedy}", "bad")
            self.app.bell()
        elif outcome.then is not None:
            outcome.then(outcome.result)
        self.feed.request()
        self._lines()

    def ask(self, screen: Screen[Any], then: Callable[[Any], None]) -> None:
        """Put a form or a question on top."""
        self.app.push_screen(screen, then)

    def go(self, page: str) -> None:
        """Open a page."""
        if page != self.page:
            self.notice = None
        self.page = page
        self.query_one("#pages", ContentSwitcher).current = f"page-{page}"
        self.current.opened()
        self.call_after_refresh(self.redraw)

    def reduce(self) -> None:
        """Reduce the whole book again, unless that is under way."""
        if self.reducing:
            return
        self.reducing = True

        def came(reduced: Any) -> None:
            self.reduced, self.reducing = reduced, False
            self.redraw()

        self.work(self.bridge.reduce, came)

    # --- the actions

    def action_page(self, page: str) -> None:
        """A digit."""
        self.go(page)

    def action_do(self, name: str) -> None:
        """An action of the table, if it applies to the open page."""
        if self.page in BY_NAME[name].pages:
            getattr(self, f"do_{name}")()

    def do_load_session(self) -> None:
        entry_forms.load_session(self)

    def do_profile(self) -> None:
        entry_forms.profile(self)

    def do_observer(self) -> None:
        entry_forms.observer(self)

    def do_new_mark(self) -> None:
        entry_forms.new_mark(self)

    def do_remark(self) -> None:
        entry_forms.remark(self)

    def do_height(self) -> None:
        height_form.height(self)

    def do_explain(self) -> None:
        height_form.explain(self)

    def do_antenna(self) -> None:
        setup_forms.antenna(self)

    def do_point(self) -> None:
        setup_forms.point(self)

    def do_link(self) -> None:
        setup_forms.link(self)

    def do_start(self) -> None:
        recording.start(self)

    def do_end(self) -> None:
        recording.end(self)

    def do_graph(self) -> None:
        self.query_one(OccupationPage).graph()
        self.feed.request()

    def do_frames(self) -> None:
        self.work(self.bridge.frames, lambda told: self.ask(FramesView(told), lambda _: None))

    def do_leave(self) -> None:
        self.go("leave")

    def do_big(self) -> None:
        self.app.push_screen(BigView(self))

    def do_update(self) -> None:
        if self.page == "links":
            self.query_one(LinksPage).listen_again()
        else:
            self.reduce()
            self.redraw()

    def do_copy(self) -> None:
        copy_coordinate(self, self.query_one(ReductionPage).chosen(), self.app.copy_to_clipboard)

    def do_issue(self) -> None:
        paper(self, self.query_one(CertificatePage).chosen(), issue=True)

    def do_draft(self) -> None:
        paper(self, self.query_one(CertificatePage).chosen(), issue=False)

    def do_strike(self) -> None:
        if self.page == "setup":
            height_form.strike_reading(self)
        else:
            self.query_one(DiaryPage).strike()

    def do_whole(self) -> None:
        self.query_one(DiaryPage).toggle_whole()

    def do_choose(self) -> None:
        self.current.choose()

    def do_turn(self) -> None:
        self.current.turn()

    def do_up(self) -> None:
        self.current.move(-1)

    def do_down(self) -> None:
        self.current.move(1)

    def do_page_up(self) -> None:
        self.current.move(-10)

    def do_page_down(self) -> None:
        self.current.move(10)

    def do_previous(self) -> None:
        self.current.side(-1)

    def do_next(self) -> None:
        self.current.side(1)

    def do_seen(self) -> None:
        seen = self.alarms.acknowledge()
        if seen:
            self._enter(seen, acknowledged=True)
            self.tell("seen: " + ", ".join(alarm.text for alarm in seen))
            self._lines()

    def do_theme(self) -> None:
        cast(Any, self.app).next_theme()
        self.redraw()

    def do_keys(self) -> None:
        self.app.push_screen(KeysView(self.page))

    def do_palette(self) -> None:
        self.app.action_command_palette()

    def do_quit(self) -> None:
        recording.leave_screen(self, lambda: self.app.exit(0))
