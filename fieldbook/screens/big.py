"""The distance view: one word, one number, elapsed time, in solid block letters readable from three metres."""

from __future__ import annotations

from collections.abc import Sequence
from typing import ClassVar, cast

from textual.app import ComposeResult
from textual.binding import Binding, BindingType

from fieldbook.model.live import LiveView
from fieldbook.model.reduction import Reduction
from fieldbook.screens.alarm_log import Alarm
from fieldbook.screens.digits import big
from fieldbook.screens.head import alarms
from fieldbook.screens.once import Once
from fieldbook.screens.page import Desk
from fieldbook.screens.panel import Panel
from fieldbook.screens.rows import BLANK, Row, row
from fieldbook.screens.words import length_95, stopwatch


def big_words(view: LiveView | None) -> tuple[str, str, str]:
    """Word, number, elapsed time."""
    if view is None or view.occupation is None:
        return "NO MARK", "-", "-"
    wrong = alarms(view)
    elapsed = stopwatch(view.elapsed_s)
    reduction = view.reduction
    number = length_95(_judged_m(reduction)) if reduction else "-"
    if wrong:
        word = next(
            (short for short in ("RECORDER GONE", "LINK LOST", "NO DATA") if wrong[0].startswith(short)), "NO FIX"
        )
        return ("NO REC" if word == "RECORDER GONE" else word), number, elapsed
    if not view.occupation.open:
        return "ENDED", number, elapsed
    verdict = reduction.leave.verdict if reduction and reduction.leave else "not yet"
    return {"good to leave": "DONE", "cannot reach": "CANNOT"}.get(verdict, "NOT YET"), number, elapsed


def _judged_m(reduction: Reduction) -> float | None:
    """The 95 % that the leave check judges, in the frame the requirement names."""
    lines = reduction.leave.lines if reduction.leave else []
    line = next((item for item in lines if item.line == "horizontal_95_m"), None)
    return float(line.have) if line and isinstance(line.have, int | float) else None


def big_rows(view: LiveView | None, width: int, height: int, unseen: Sequence[Alarm] = ()) -> list[Row]:
    """Three blocks of letters, the word largest."""
    word, number, elapsed = big_words(view)
    third = max(5, (height - 3) // 3)
    rows: list[Row] = []
    style = "good" if word == "DONE" else "strong"
    for text, look in ((word, style), (number, "strong"), (elapsed, "soft")):
        rows += [row("  ", (line, look)) for line in big(text, width - 4, third)]
        rows.append(BLANK)
    mark = view.occupation.mark if view and view.occupation else ""
    rows = [*rows[: height - 1], *[BLANK] * max(0, height - 1 - len(rows))]
    over = [alarm for alarm in unseen if not alarm.holds and not alarm.good]
    if over:
        more = f" and {len(over) - 1} more" if len(over) > 1 else ""
        return [*rows, row(("  ", "text"), (f" was {over[0].text}{more} ", "alarm"), (" Space: seen", "strong"))]
    note = " 95 % horizontal of this set-up; elapsed time.  B or Esc: back"
    return [*rows, row((f"  {mark}" if mark else "", "text"), (note, "soft"))]


class BigView(Once[None]):
    """Fills the terminal."""

    BINDINGS: ClassVar[list[BindingType]] = [
        Binding("b,B,escape,enter", "back", "back"),
        Binding("space", "seen", "seen"),
    ]

    def __init__(self, desk: Desk) -> None:
        super().__init__()
        self._desk = desk

    def compose(self) -> ComposeResult:
        """One panel."""
        yield Panel(
            lambda width, height: big_rows(self._desk.view, width, height, self._desk.alarms.unseen()), id="big"
        )

    def on_mount(self) -> None:
        """Follow the recording."""
        self.set_interval(0.5, lambda: cast(Panel, self.query_one("#big")).redraw())

    def action_seen(self) -> None:
        """The alarms have been seen."""
        self._desk.do_seen()

    def action_back(self) -> None:
        """Back to the book."""
        self.dismiss(None)
