"""The lines that never change place: head (mark, occupation, fix, clock), index tabs, leave check, keys."""

from __future__ import annotations

from collections.abc import Sequence

from fieldbook.clock import Clock
from fieldbook.model.live import LiveView
from fieldbook.model.reduction import LeaveLine
from fieldbook.screens.actions import PAGE_TABS, PAGE_TITLES, PAGES, foot_text
from fieldbook.screens.alarm_log import Alarm
from fieldbook.screens.head_words import wrong_now
from fieldbook.screens.plain import fit, pad, width_of
from fieldbook.screens.rows import Row, Span, row
from fieldbook.screens.words import VERDICT, clock_text, duration, leave_word, quality_word


def alarms(view: LiveView | None) -> list[str]:
    """What is wrong with the recording right now, the worst first."""
    return [item.text for item in wrong_now(view)]


def state_word(view: LiveView | None) -> str:
    """`recording`, `ended`, or nothing."""
    if view is None or view.occupation is None:
        return ""
    if not view.occupation.open:
        return "ended"
    return "recording" if view.recorder_alive else "open"


def head_row(view: LiveView | None, clock: Clock, width: int, unseen: Sequence[Alarm] = ()) -> Row:
    """The head line: an alarm stands in it while it holds, and after that until somebody has seen it."""
    time_text = f"{clock_text(clock.utc_ms())} UTC "
    wrong = alarms(view)
    over = [alarm for alarm in unseen if not alarm.holds and not alarm.good]
    news = [alarm for alarm in unseen if alarm.good]
    right: list[Span] = []
    if wrong:
        right = [(f" {fit(wrong[0], 30)} ", "alarm")]
        if len(wrong) + len(over) > 1:
            right.append((f" +{len(wrong) + len(over) - 1}", "alarm"))
        right.append(("  ", "text"))
    elif view is not None and view.recorder is not None and view.recorder_alive:
        last = view.recorder
        right = [(quality_word(last.quality), "strong"), (f"  {_count(last.satellites)} sat  ", "text")]
        if last.age_s is not None and not (over or news):
            right.append((f"age {last.age_s:.1f} s  ", "text"))
    if over and not wrong:
        more = f" +{len(over) - 1}" if len(over) > 1 else ""
        right = [(f" was {fit(over[0].text, 22)}{more} ", "alarm"), ("  ", "text"), *right]
    elif news and not wrong:
        right = [(f" {news[0].text} ", "good"), ("  ", "text"), *right]
    used = sum(width_of(text) for text, _ in right) + width_of(time_text)
    left = _left(view, max(0, width - used))
    return (*left, *right, (time_text, "text"))


def _count(satellites: int | None) -> str:
    return "–" if satellites is None else str(satellites)


def _left(view: LiveView | None, room: int) -> list[Span]:
    if view is None:
        return [(pad(" opening …", room), "soft")]
    if view.occupation is None:
        title = view.state.session.job.title if view.state.session else "no session yet"
        return [(pad(f" {fit(title, room - 2)}", room), "strong")]
    rest = f"  occupation {view.occupation.number}  {state_word(view)}"
    if room < len(rest) + 8:
        rest = f"  {view.occupation.number}  {state_word(view)}"
    mark = fit(view.occupation.mark, max(4, room - len(rest) - 2))
    return [(" " + mark, "strong"), (pad(rest, max(0, room - width_of(mark) - 1)), "text")]


def tabs_row(page: str, width: int) -> Row:
    """Index tabs of the book, the open one turned over."""
    titles = PAGE_TITLES if width >= 110 else PAGE_TABS
    spans: list[Span] = [(" ", "rule")]
    for number, name in enumerate(PAGES, start=1):
        if name == page:
            spans.append((f"{number} {titles[name]}", "chosen"))
        else:
            spans += [(f"{number}", "strong"), (f" {titles[name]}", "soft")]
        spans.append((" ", "rule"))
    return tuple(spans)


def rule_row(notice: tuple[str, str] | None, width: int) -> Row:
    """A rule, or what was just said."""
    if notice is None:
        return row(("─" * width, "rule"))
    text, style = notice
    shown = fit(text, width - 5)
    return row(("── ", "rule"), (shown, style), " ", ("─" * max(0, width - width_of(shown) - 4), "rule"))


SHORT = {
    "horizontal_95_m": "95 % horizontal",
    "vertical_95_m": "95 % height",
    "minimum_time_s": "time",
    "initialisations": "another initialisation",
}


def open_text(line: LeaveLine) -> str:
    """An open line of the leave check in a few words."""
    if line.line == "height_readings":
        return "height after" if line.have == "before" else "height readings"
    go = f" {duration(line.time_to_go_s)}" if line.time_to_go_s else ""
    return SHORT.get(line.line, leave_word(line.line)) + go


def leave_row(view: LiveView | None, width: int) -> Row:
    """The leave check in one line."""
    if view is None or view.occupation is None:
        return row((" no occupation", "soft"), ("   the leave check begins with the recording", "soft"))
    leave = view.reduction.leave if view.reduction else None
    if leave is None:
        return row((" NOT YET ", "warn"), ("  nothing reduced yet", "text"))
    own = [item for item in leave.lines if item.scope == "set-up"]
    missing = [item for item in own if not item.met]
    mark_open = [item for item in leave.lines if item.scope != "set-up" and not item.met]
    if not view.occupation.open:
        text = f"{len(missing)} of {len(own)} lines of the set-up open" if missing else "every line of the set-up met"
        return row((" ended ", "strong"), (fit(f"  leave check: {leave.verdict}; {text}", width - 8), "text"))
    word = leave.verdict.upper()
    spans: list[Span] = [(f" {word} ", VERDICT.get(leave.verdict, "warn"))]
    if missing:
        text = f"  {len(missing)} of {len(own)} open: " + " · ".join(open_text(item) for item in missing)
        spans.append((fit(text, width - len(word) - 3), "text"))
    else:
        later = "  all of this set-up is met"
        later += (
            "; the mark: " + " · ".join(dict.fromkeys(item.text or open_text(item) for item in mark_open))
            if mark_open
            else ""
        )
        spans.append((fit(later, width - len(word) - 3), "text"))
    return tuple(spans)


def keys_row(page: str, width: int, hide: frozenset[str]) -> Row:
    """The keys that work here."""
    spans: list[Span] = [(" ", "text")]
    for key, label in foot_text(page, width - 1, hide=hide):
        spans += [(key, "strong"), (f" {label}  ", "soft")]
    return tuple(spans)
