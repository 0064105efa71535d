"""Links: the ports of this computer, none of them opened; and what the running recorder hears, sentence by sentence."""

# ruff: noqa: ARG002 - every maker of rows takes the size, and some do not need it

from __future__ import annotations

from typing import Any, ClassVar

from fieldbook.screens.bridge import Port
from fieldbook.screens.page import Page
from fieldbook.screens.plain import fit, pad
from fieldbook.screens.rows import BLANK, Row, heading, labelled, paragraph, row
from fieldbook.screens.setup_forms import link
from fieldbook.screens.words import duration


class LinksPage(Page):
    """A list with a cursor."""

    name_of_page: ClassVar[str] = "links"
    cursor = 0

    def on_mount(self) -> None:
        """No ports until they are listed."""
        self.ports: list[Port] | None = None

    def opened(self) -> None:
        """List the ports."""
        self.listen_again()

    def listen_again(self) -> None:
        """List the ports again; none is opened."""

        def taken(ports: Any) -> None:
            self.ports = list(ports)
            self.redraw()

        self.desk.work(self.desk.bridge.ports, taken)

    def move(self, lines: int) -> None:
        """The cursor."""
        self.cursor = max(0, min(self.cursor + lines, len(self.ports or []) - 1))
        self.redraw()

    def choose(self) -> None:
        """Type the chosen port's link out in full."""
        if self.ports and self.cursor < len(self.ports):
            link(self.desk, self.ports[self.cursor].address)
        else:
            link(self.desk)

    def left(self, width: int, height: int) -> list[Row]:
        """Ports, then the recorder's link."""
        rows = [heading("LINKS", width, "no port is opened by looking"), BLANK]
        if self.ports is None:
            rows.append(row(" listing …"))
        elif not self.ports:
            rows += [
                row(" No serial port is seen on this computer."),
                *paragraph(
                    "A receiver may also be reached by tcp://host:port or udp://host:port: press K.",
                    width,
                    style="soft",
                ),
            ]
        for index, port in enumerate(self.ports or []):
            here = index == self.cursor
            rows.append(
                row(
                    ("▶ " if here else "  ", "accent"),
                    (pad(port.name, 26), "chosen" if here else "strong"),
                    " ",
                    fit(port.description, width - 30),
                )
            )
        rows += [BLANK, row((" THE RECORDER'S LINK", "strong"))]
        return rows + self._recorder(width)

    def _recorder(self, width: int) -> list[Row]:
        view = self.view
        if view is None or view.recorder is None:
            return [row((" no recorder has run on this book yet", "soft"))]
        last = view.recorder
        state = last.link_state if view.recorder_alive else "recorder gone"
        reason = f": {last.link_reason}" if last.link_reason else ""
        rows = [labelled("Link", last.link, width), labelled("State", state + reason, width, style="strong")]
        if view.silence_s is not None:
            rows.append(
                labelled("Last byte", f"{duration(view.silence_s)} ago; {last.received_bytes} bytes in all", width)
            )
        if last.last_commit_took_ms is not None:
            rows.append(
                labelled("Commit", f"took {last.last_commit_took_ms:.0f} ms, {last.waiting_bytes} bytes waiting", width)
            )
        seconds = max(1.0, view.elapsed_s or 1.0)
        parts = [f"{name} {count / seconds:.1f}/s" for name, count in sorted(last.sentences.items())]
        rows += paragraph("Sentences  " + "   ".join(parts), width, most=4) if parts else []
        counters = [f"{name.replace('_', ' ')} {count}" for name, count in sorted(last.counters.items()) if count]
        return rows + (paragraph("Counted  " + ", ".join(counters), width, style="soft", most=3) if counters else [])
