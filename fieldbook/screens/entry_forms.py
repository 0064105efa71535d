"""Forms that write entries: session file, observer, mark, remark."""

from __future__ import annotations

from typing import Any

from fieldbook.errors import FieldbookError
from fieldbook.model.canonical import Tree
from fieldbook.screens.cover import requirement_rows
from fieldbook.screens.fields import Field
from fieldbook.screens.forms import Form, Values
from fieldbook.screens.page import Desk, next_tree, open_occupation
from fieldbook.screens.rows import BLANK, Row, paragraph
from fieldbook.screens.words import leave_word
from fieldbook.settings.profiles import requirement_by
from fieldbook.settings.schema import words


def load_session(desk: Desk) -> None:
    """Ask for the path of a session file and make it the session of the next occupation."""
    found: dict[str, Tree] = {}

    def check(values: Values) -> dict[str, str]:
        try:
            found["tree"] = desk.bridge.session_file(values["path"])
        except FieldbookError as problem:
            return {"path": f"{problem.text} {problem.remedy}"}
        return {}

    def written(values: Values | None) -> None:
        if values is None:
            return
        tree, bridge = found["tree"], desk.bridge
        if not bridge.observer:
            bridge.observer = str(tree["job"]["observer"])
        desk.write(
            lambda: bridge.save_session(tree),
            lambda entry: desk.tell(f"session of {tree['mark']['name']} written (entry {entry.seq})"),
        )

    note = "A text file with [job], [requirement], [frame], [corrections], [mark], [antenna], [setup], [receiver]."
    desk.ask(Form("SESSION FILE", [Field("path", "Path", required=True)], note=note, check=check), written)


def profile(desk: Desk) -> None:
    """Choose a document; its demands become the requirement of the next occupation."""
    tree = next_tree(desk.view) if desk.view else None
    if tree is None:
        desk.tell("There is no session yet: press F and load one first.", "bad")
        return
    try:
        known = desk.bridge.profiles()
    except FieldbookError as problem:
        desk.tell(f"{problem.text} {problem.remedy}", "bad")
        return

    def said(values: Values, width: int) -> list[Row]:
        chosen = known[values["name"]]
        rows = paragraph(chosen.title, width, style="strong")
        rows += paragraph(chosen.source, width, style="soft" if chosen.standing == "read" else "warn")
        rows += [BLANK, *requirement_rows(bridge.session(changed(values)).requirement, width)]
        kept = [leave_word(key) for key in chosen.open_keys]
        if kept:
            text = f"The document leaves open, and the session's own stay: {', '.join(kept)}."
            rows += paragraph(text, width, style="warn")
        for text in chosen.also:
            rows += paragraph(f"also, for you to see to: {text}", width, style="soft")
        return rows

    def changed(values: Values) -> Tree:
        return {**tree, "requirement": requirement_by(known[values["name"]], tree["requirement"])}

    def written(values: Values | None) -> None:
        if values is None:
            return
        desk.write(
            lambda: bridge.save_session(changed(values)),
            lambda entry: desk.tell(f"requirement by {values['name']} written (entry {entry.seq})"),
        )

    bridge = desk.bridge
    field = Field("name", "Document", words(*known), next(iter(known)), required=True)
    note = "← → turns to the next document. It is the requirement of the next occupation, not of one that has begun."
    desk.ask(Form("WHAT MUST THE MARK REACH?", [field], note=note, said=said), written)


def observer(desk: Desk) -> None:
    """Ask who signs from now on."""

    def taken(values: Values | None) -> None:
        if values:
            desk.bridge.observer = values["name"]
            desk.tell(f"Entries are signed {values['name']} from now on.")
            desk.redraw()

    desk.ask(
        Form(
            "WHO OBSERVES?",
            [Field("name", "Name", value=desk.bridge.observer, required=True)],
            note="Every entry is signed with this name.",
        ),
        taken,
    )


def new_mark(desk: Desk) -> None:
    """Describe a mark; it becomes the mark of the next set-up."""
    view = desk.view
    if view is None:
        desk.tell("The book is still being opened: press again in a moment.", "bad")
        return
    fields = [
        Field("name", "Name", required=True),
        Field("description", "Description", hint="brass plate in rock, ..."),
        Field("inscription", "Inscription", hint="read it from the metal"),
        Field("access", "Access"),
        Field("condition", "Condition", hint="as found"),
    ]

    def check(values: Values) -> dict[str, str]:
        if values["name"] in view.state.marks:
            return {"name": "there is a mark of this name: choose it in the list, or write another name"}
        return {}

    def written(values: Values | None) -> None:
        if values is None or desk.view is None:
            return
        mark = {key: text for key, text in values.items() if text}
        bridge, tree, opened = desk.bridge, next_tree(desk.view), open_occupation(desk.view)

        def job() -> Any:
            entry = bridge.add_mark(mark)
            if tree is not None and opened is None:
                bridge.save_session({**tree, "mark": mark})
            return entry

        said = f"mark {mark['name']} written" + ("" if tree is None or opened else "; it is the next set-up's")
        desk.write(job, lambda entry: desk.tell(f"{said} (entry {entry.seq})"))

    desk.ask(
        Form("DESCRIBE A MARK", fields, note="What a stranger needs to find it and be sure of it.", check=check),
        written,
    )


def remark(desk: Desk) -> None:
    """A remark, at any moment."""
    opened = open_occupation(desk.view)
    number = opened.number if opened else None
    where = f"occupation {number} of {opened.mark}" if opened else "the book"

    def written(values: Values | None) -> None:
        if values:
            bridge, text = desk.bridge, values["text"]
            desk.write(
                lambda: bridge.add_remark(number, text), lambda entry: desk.tell(f"remark written (entry {entry.seq})")
            )

    desk.ask(
        Form(
            f"REMARK to {where}",
            [Field("text", "Remark", required=True)],
            note="It gets the time of writing and your name, and is never erased.",
        ),
        written,
    )
