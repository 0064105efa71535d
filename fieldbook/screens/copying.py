"""Copying the coordinate in sight: to the clipboard of the terminal (OSC 52), or to a file. Never a bare number."""

from __future__ import annotations

from collections.abc import Callable

from fieldbook.model.coordinates import FORMS
from fieldbook.screens.fields import Field
from fieldbook.screens.forms import Form, Values
from fieldbook.screens.page import Desk
from fieldbook.screens.sheets import Sheet, coordinate_text
from fieldbook.settings.schema import words


def copy_coordinate(desk: Desk, sheet: Sheet | None, to_clipboard: Callable[[str], None]) -> None:
    """Ask for the form and, if wanted, a file."""
    if sheet is None:
        desk.tell("No occupation is reduced yet.", "bad")
        return
    forms = [form for form in FORMS if form != "grid" or sheet.reduction.grid is not None]
    fields = [
        Field("form", "Form", words(*forms), "dms", required=True),
        Field("path", "File", hint="empty: to the clipboard"),
    ]
    note = "Frame, epoch and 95 % go with it. Not every terminal takes a clipboard: a file always works."

    def written(values: Values | None) -> None:
        if values is None:
            return
        bridge, path = desk.bridge, values["path"].strip()

        def job() -> tuple[str, str]:
            text = coordinate_text(sheet, values["form"])
            return text, bridge.write_text(path, text) if path else ""

        def done(made: tuple[str, str]) -> None:
            text, file = made
            if not file:
                to_clipboard(text)
            desk.tell(f"in {file}: {text}" if file else f"to the clipboard: {text}")

        desk.work(job, done)

    desk.ask(Form(f"COPY {sheet.title}", fields, note=note), written)
