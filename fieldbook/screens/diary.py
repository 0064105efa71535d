"""The diary: every entry in time; strike from here with a reason. A struck line stays legible."""

from __future__ import annotations

from typing import Any, ClassVar

from fieldbook.model.entry import Entry
from fieldbook.screens.diary_text import OWN, entry_text
from fieldbook.screens.fields import Field
from fieldbook.screens.forms import Form, Values
from fieldbook.screens.page import Page, scrolled_to
from fieldbook.screens.plain import fit, pad
from fieldbook.screens.rows import BLANK, Row, heading, paragraph, row


class DiaryPage(Page):
    """A list with a cursor; the chosen entry in full below."""

    name_of_page: ClassVar[str] = "diary"
    cursor = -1  # -1: the last entry
    top = 0
    whole = False

    def on_mount(self) -> None:
        """No entries until they are read."""
        self.entries: list[Entry] = []
        self._read_at = -1
        self._reading = False

    def opened(self) -> None:
        """Read the entries again."""
        self._read()

    def redraw(self) -> None:
        """Read again when the book has grown."""
        if self.view is not None and self.view.state.head_seq != self._read_at:
            self._read()
        super().redraw()

    def _read(self) -> None:
        if self._reading or self.view is None:
            return
        self._reading, at = True, self.view.state.head_seq

        def taken(entries: Any) -> None:
            follow = self.cursor < 0 or self.cursor >= len(self.shown()) - 1
            self.entries, self._read_at, self._reading = list(entries), at, False
            if follow:
                self.cursor = len(self.shown()) - 1
            super(DiaryPage, self).redraw()

        self.desk.work(self.desk.bridge.entries, taken)

    def shown(self) -> list[Entry]:
        """The entries in the list."""
        return self.entries if self.whole else [item for item in self.entries if item.kind not in OWN]

    def toggle_whole(self) -> None:
        """Show or hide what the program itself wrote."""
        here = self.chosen()
        self.whole = not self.whole
        shown = self.shown()
        self.cursor = shown.index(here) if here in shown else len(shown) - 1
        super().redraw()

    def chosen(self) -> Entry | None:
        """The entry under the cursor."""
        shown = self.shown()
        return shown[self.cursor] if 0 <= self.cursor < len(shown) else None

    def move(self, lines: int) -> None:
        """The cursor."""
        self.cursor = max(0, min(self.cursor + lines, len(self.shown()) - 1))
        super().redraw()

    def left(self, width: int, height: int) -> list[Row]:
        """List and the chosen entry."""
        shown = self.shown()
        hidden = len(self.entries) - len(shown)
        note = f"{len(shown)} entries" + (f", {hidden} of the program not shown" if hidden else "")
        rows = [heading("DIARY", width, note)]
        if not shown:
            return [*rows, BLANK, row(" reading …")]
        strikes = self.view.state.strikes if self.view else {}
        room = max(3, height - 6)
        self.top = scrolled_to(self.cursor, min(self.top, max(0, len(shown) - room)), room)
        for index in range(self.top, min(len(shown), self.top + room)):
            rows.append(self._line(shown[index], index, strikes, width))
        rows += [BLANK] * (room + 1 - len(rows))
        entry = self.chosen()
        return rows + (self._full(entry, strikes, width) if entry else [])

    def _line(self, entry: Entry, index: int, strikes: dict[int, Entry], width: int) -> Row:
        here = index == self.cursor
        struck = entry.seq in strikes
        text_width = max(8, width - 41)
        look = "struck" if struck else ("chosen" if here else "text")
        return row(
            ("▶" if here else " ", "accent"),
            (f"{entry.seq:>5} ", "soft"),
            (entry.utc[5:16].replace("T", " ") + " ", "soft"),
            (pad(entry.kind, 11) + " ", "strong"),
            (fit(entry_text(entry), text_width), look),
            ("  ╌ struck" if struck else "", "warn"),
        )

    def _full(self, entry: Entry, strikes: dict[int, Entry], width: int) -> list[Row]:
        rows: list[Row] = [row(("─" * width, "rule"))]
        rows += paragraph(f"{entry_text(entry)}  · {entry.observer}, {entry.utc}", width, most=2)
        strike = strikes.get(entry.seq)
        if strike is not None:
            reason = f"struck: {strike.body.get('reason')} · {strike.observer}, {strike.utc[:16]} (entry {strike.seq})"
            rows += paragraph(reason, width, style="warn", most=2)
        return rows

    def strike(self) -> None:
        """Ask for the reason, then strike the chosen entry out."""
        entry, desk = self.chosen(), self.desk
        if entry is None:
            return
        if not desk.bridge.strikeable(entry):
            desk.tell(f"Entry {entry.seq} was not written by a person and is never struck out.", "bad")
            return
        if self.view and entry.seq in self.view.state.strikes:
            desk.tell(f"Entry {entry.seq} is struck out already.", "bad")
            return
        note = f"Entry {entry.seq}, {entry.kind}: {entry_text(entry)}"
        form = Form(f"STRIKE OUT entry {entry.seq}", [Field("reason", "Reason", required=True)], note=note)
        bridge, seq = desk.bridge, entry.seq

        def written(values: Values | None) -> None:
            if values:
                desk.write(
                    lambda: bridge.strike(seq, values["reason"]),
                    lambda made: desk.tell(f"entry {seq} is struck out (entry {made.seq})"),
                )

        desk.ask(form, written)
