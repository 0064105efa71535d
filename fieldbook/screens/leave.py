"""The leave check: every line with wanted, have, open, time to go; and what it cannot prove."""

# ruff: noqa: ARG002 - every maker of rows takes the size, and some do not need it

from __future__ import annotations

from typing import ClassVar

from fieldbook.model.live import LiveView
from fieldbook.model.reduction import LeaveLine
from fieldbook.screens.page import Page
from fieldbook.screens.plain import fit, pad, width_of
from fieldbook.screens.rows import BLANK, Row, paragraph, row
from fieldbook.screens.words import VERDICT, duration, leave_word, length_95

CANNOT_KNOW = (
    "What cannot be known here: a wrong fix common to all initialisations, an error of the base, a mark that moves. "
    "Tie to a known mark."
)
WIDE = 100
GATE_KEYS = ("accept_quality", "max_hdop", "max_pdop", "max_correction_age_s", "min_satellites")


class LeavePage(Page):
    """May the tripod come down?"""

    name_of_page: ClassVar[str] = "leave"

    def left(self, width: int, height: int) -> list[Row]:
        """The full page."""
        return leave_rows(self.view, width)


def leave_rows(view: LiveView | None, width: int) -> list[Row]:
    """Rows of the leave check."""
    leave = view.reduction.leave if view and view.reduction else None
    verdict = leave.verdict.upper() if leave else "NOT YET"
    title = " MAY THE TRIPOD COME DOWN?"
    style = VERDICT.get(leave.verdict if leave else "", "warn")
    rows = [
        row((title, "strong"), " " * max(1, width - len(title) - len(verdict) - 5), (f"  {verdict}  ", style)),
        BLANK,
    ]
    if view is None or leave is None:
        rows.append(row(" Nothing is reduced yet, so nothing speaks for leaving."))
        if view is not None and view.problem is not None:
            rows += paragraph(" ".join(view.problem[1:]), width, mark=("▲", "warn"))
        return rows
    name_width = 27 if width < WIDE else 34
    rows.append(
        row((pad("", name_width + 3), "soft"), (pad("wanted", 18), "soft"), (pad("have", 14), "soft"), ("open", "soft"))
    )
    for scope in ("set-up", "mark"):
        lines = [item for item in leave.lines if item.scope == scope]
        if scope == "mark" and lines:
            rows += [BLANK, row((" Of the mark, not of this set-up", "soft"))]
        if width < WIDE:
            lines = _met_gates_as_one(lines)
        for item in lines:
            rows += _line(item, width, name_width)
    rows += [BLANK, *paragraph(CANNOT_KNOW, width, style="soft")]
    return rows


def _met_gates_as_one(lines: list[LeaveLine]) -> list[LeaveLine]:
    """The gates that are met in one line, where the first of them stands: a small screen is for what is open."""
    met = [item for item in lines if item.met and item.line in GATE_KEYS]
    if len(met) < 2:
        return lines
    one = LeaveLine("gates", "set-up", f"{len(met)} limits", "all kept", "", True, 0.0, "")
    return [one if item is met[0] else item for item in lines if item is met[0] or item not in met]


def figure(value: float | str | None, unit: str) -> str:
    """A wanted or had value with its unit in words."""
    if value is None:
        return "–"
    if isinstance(value, str):
        return "both" if value == "before and after" else value.removesuffix(" epochs")
    if unit == "m":
        return length_95(value)
    if unit == "s":
        return duration(value)
    number = f"{value:.1f}".removesuffix(".0")
    return f"{number} {unit}".strip()


def _line(item: LeaveLine, width: int, name_width: int) -> list[Row]:
    shape: tuple[str, str] = ("✓", "good") if item.met else ("○", "warn")
    room = width - (name_width + 3 + 18 + 14) - 1
    said = "" if item.met else item.text
    beside = said if said and width_of(said) <= room else (duration(item.time_to_go_s) if item.time_to_go_s else "")
    head = row(
        " ",
        shape,
        " ",
        (pad(leave_word(item.line), name_width), "text" if item.met else "strong"),
        pad(figure(item.wanted, item.unit), 18),
        (pad(figure(item.have, item.unit), 14), "strong"),
        ("–" if item.met else fit(beside, room), "text" if item.met else "warn"),
    )
    if not said or beside == said:
        return [head]
    return [head, *paragraph(said, width - 3, style="warn", indent=3, most=2)]
