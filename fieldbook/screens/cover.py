"""The cover: whose book this is, which job, which frames, what is wanted, and what is to be done next."""

# ruff: noqa: ARG002 - every maker of rows takes the size, and some do not need it

from __future__ import annotations

from typing import ClassVar

from fieldbook.model.live import LiveView
from fieldbook.model.session import FrameChoice, Requirement, Session
from fieldbook.screens.bridge import Bridge
from fieldbook.screens.head import alarms, state_word
from fieldbook.screens.page import Page, next_tree, open_occupation
from fieldbook.screens.rows import BLANK, Row, heading, labelled, paragraph, row
from fieldbook.screens.words import duration, length_95, quality_word


class CoverPage(Page):
    """Book, job, frames, requirement, open occupation, recorder."""

    name_of_page: ClassVar[str] = "cover"

    def left(self, width: int, height: int) -> list[Row]:
        """The cover."""
        return cover_rows(self.view, self.desk.bridge, width)

    def choose(self) -> None:
        """On to the next page of the work."""
        self.desk.go("occupation" if open_occupation(self.view) else "marks")


def cover_rows(view: LiveView | None, bridge: Bridge, width: int) -> list[Row]:
    """Rows of the cover."""
    if view is None:
        return [heading("FIELD BOOK", width), BLANK, row(" opening …")]
    session = view.occupation.session if view.occupation and view.occupation.open else view.state.session
    rows = [heading("FIELD BOOK", width, str(bridge.path.name)), BLANK]
    if session is None:
        rows += [
            row((" This book has no session yet.", "strong")),
            BLANK,
            *paragraph(
                "A session file names the frames and epochs, the requirement, the antenna and the corrections. "
                "None of them has a default: a wrong frame cannot be seen afterwards.",
                width,
            ),
            BLANK,
            row("  ", ("F", "strong"), "  type the path of a session file"),
        ]
        return rows
    rows += _job(session, bridge, width)
    rows += [BLANK, *frame_rows(session.frame, width), BLANK, *requirement_rows(session.requirement, width), BLANK]
    return rows + _now(view, width)


def _job(session: Session, bridge: Bridge, width: int) -> list[Row]:
    job = session.job
    rows = [labelled("Job", job.title, width, style="strong")]
    if job.client or job.firm:
        rows.append(labelled("For, by", " · ".join(text for text in (job.client, job.firm) if text), width))
    signer = bridge.observer or "nobody yet: press O"
    rows.append(labelled("Observer", signer, width, style="text" if bridge.observer else "warn"))
    return [*rows, labelled("Signature", bridge.signature, width)] if bridge.signature else rows


def frame_rows(frame: FrameChoice, width: int) -> list[Row]:
    """Frames and epochs; none of them is assumed."""

    def at(epoch: float | str | None) -> str:
        if epoch is None:
            return ", no epoch stated"
        return f", epoch {epoch}" if isinstance(epoch, str) else f", epoch {epoch:.2f}"

    rows = [
        labelled("Receiver", f"coordinates in {frame.receiver}{at(frame.receiver_epoch)}", width),
        labelled("Client", f"coordinates in {frame.client}{at(frame.client_epoch)}", width),
    ]
    extra = [
        f"grid {frame.grid}" if frame.grid else "no grid",
        f"geoid {frame.geoid}" if frame.geoid else "no geoid: no H",
    ]
    return [*rows, labelled("", " · ".join(extra), width)]


def requirement_rows(wanted: Requirement, width: int) -> list[Row]:
    """What this mark must reach."""
    qualities = ", ".join(quality_word(item) for item in wanted.accept_quality)
    first = f"95 % {length_95(wanted.horizontal_95_m)} horizontal, {length_95(wanted.vertical_95_m)} height"
    first += f", in the {wanted.in_frame}"
    second = [qualities]
    if wanted.minimum_time_s:
        second.append(f"at least {duration(wanted.minimum_time_s)}")
    if wanted.initialisations:
        second.append(f"{wanted.initialisations} initialisations")
    third = [f"{wanted.occupations} occupation{'s' if wanted.occupations > 1 else ''}"]
    if wanted.hours_between:
        third.append(f"{wanted.hours_between:g} h between")
    third.append(f"height read {wanted.height_readings or 'as you like'}")
    return [
        labelled("Wanted", first, width),
        labelled("", " · ".join(second), width),
        labelled("", " · ".join(third), width),
    ]


def _now(view: LiveView, width: int) -> list[Row]:
    opened = view.state.open_occupation
    if opened is None:
        done = len(view.state.occupations)
        rows = [labelled("Now", f"no occupation open; {done} in the book", width)]
        if next_tree(view) is not None:
            rows.append(
                row("  ", ("Enter", "strong"), "  choose the mark, then the set-up, then ", ("S", "strong"), " starts")
            )
        return rows
    words = alarms(view)
    rows = [labelled("Now", f"occupation {opened.number} of {opened.mark}: {state_word(view)}", width, style="strong")]
    if not view.recorder_alive:
        rows.append(row("  ", ("S", "strong"), "  starts the recorder again; what was recorded is kept"))
    elif words:
        rows.append(row("  ", (f" {words[0]} ", "alarm")))
    return rows
