"""Forms of the set-up: height reading, antenna, reported point and centring, link.

Before the occupation they change what the book offers for it (a `session` entry); while it is open they are entries
of the occupation (`height`, `setup`). A reading that does not agree may be written, and stands as not agreeing.
"""

# ruff: noqa: ARG001 - every maker of rows takes the size, and some do not need it

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from fieldbook.errors import FieldbookError
from fieldbook.model.canonical import Tree
from fieldbook.model.session import Session
from fieldbook.screens.fields import Field
from fieldbook.screens.forms import Form, Values
from fieldbook.screens.heights import drawing, judgement
from fieldbook.screens.page import Desk, next_tree, open_occupation
from fieldbook.screens.rows import BLANK, Row, paragraph, row
from fieldbook.screens.setup import current_readings, current_session
from fieldbook.settings.schema import METHODS, OCCASIONS, REPORTED_POINTS, TABLES, UNITS, words


def height(desk: Desk) -> None:
    """Ask for a height reading and write it."""
    session, problem = current_session(desk.view, desk.bridge)
    if session is None:
        desk.tell(problem or "The book is still being opened.", "bad")
        return
    readings = current_readings(desk.view)
    desk.ask(_height_form(desk, session, readings), lambda values: _write_height(desk, values))


def _height_form(desk: Desk, session: Session, readings: Sequence[Tree]) -> Form:
    last = readings[-1] if readings else None
    slant = session.antenna.slant_radius_m is not None and session.antenna.slant_mark_above_arp_m is not None
    opened = open_occupation(desk.view)
    fields = [
        Field(
            "method",
            "Method",
            words(*METHODS),
            last["method"] if last else ("slant" if slant else "vertical"),
            required=True,
        ),
        Field("value", "Reading", "positive", required=True, hint="as read from the tape"),
        Field("unit", "Unit", words(*UNITS), last["unit"] if last else "m", required=True),
        Field("when", "When", words(*OCCASIONS), "before" if opened is None else "after", required=True),
        Field("at", "At", hint="notch 1, ..."),
        Field("reader", "Read by", value=desk.bridge.observer),
    ]

    def judged(values: Values) -> tuple[float | None, list[Row]]:
        tree = reading_of(values)
        if Field("value", "", "positive", required=True).error(values["value"]):
            return None, []
        made = desk.bridge.heights(session, [*readings, tree])
        if made.height is None:
            return None, []  # the reason stands beside the field once writing is tried
        own = next((item for item in reversed(made.height.readings)), None)
        return (own.arp_m if own else None), judgement(made.height.readings, made.findings, 37)

    def sketch(values: Values, width: int, height: int) -> list[Row]:
        arp_m, said = judged(values)
        typed = f"{values['value']} {values['unit']}" if values["value"] else ""
        return [*drawing(values["method"], typed, arp_m, session.antenna), BLANK, *said]

    def check(values: Values) -> dict[str, str]:
        if values["method"] == "slant" and not slant:
            return {"method": "the antenna's rim radius and notch height are not stated: press Esc, then A"}
        made = desk.bridge.heights(session, [reading_of(values)])
        return {"value": made.problem} if made.height is None else {}

    limits = "Readings more than 3 mm apart: read again, or write a remark why."
    return Form("HEIGHT OF ANTENNA: which distance are you reading?", fields, note=limits, check=check, sketch=sketch)


def reading_of(values: Values) -> Tree:
    """The form's texts as keys of [[setup.height]]."""
    return {key: values[key] for key in ("method", "value", "unit", "when", "at", "reader") if values.get(key)}


def _write_height(desk: Desk, values: Values | None) -> None:
    if values is None or desk.view is None:
        return
    reading = reading_of(values)
    opened = open_occupation(desk.view)
    said = f"written: {reading['method']} {reading['value']} {reading['unit']} {reading['when']}"
    bridge = desk.bridge
    if opened is not None:
        number = opened.number
        desk.write(lambda: bridge.add_height(number, reading), lambda entry: desk.tell(f"{said} (entry {entry.seq})"))
        return
    tree = next_tree(desk.view)
    if tree is None:
        return
    setup = dict(tree["setup"])
    setup["height"] = [*setup.get("height", []), reading]
    desk.write(
        lambda: bridge.save_session({**tree, "setup": setup}), lambda entry: desk.tell(f"{said} (entry {entry.seq})")
    )


def strike_reading(desk: Desk) -> None:
    """Strike the last reading out, with a reason."""
    view, bridge = desk.view, desk.bridge
    readings = current_readings(view)
    if view is None or not readings:
        desk.tell("There is no reading to strike out.", "bad")
        return
    last, opened, tree = readings[-1], open_occupation(view), next_tree(view)
    said = f"{last['method']} {last['value']} {last['unit']} {last['when']}"
    seq = opened.heights[-1].seq if opened else None
    if opened is not None and seq in (None, opened.entry_seq):
        desk.tell(f"{said} stands in the occupation's own entry: read again, and write a remark why.", "bad")
        return

    def struck(values: Values | None) -> None:
        if values is None:
            return
        reason = values["reason"]
        if seq is not None:
            desk.write(
                lambda: bridge.strike(seq, reason), lambda entry: desk.tell(f"struck: {said} (entry {entry.seq})")
            )
        elif tree is not None:
            setup = {**tree["setup"], "height": readings[:-1]}
            if not readings[:-1]:
                setup.pop("height")
            remark = f"reading {said} taken back before the occupation: {reason}"

            def job() -> Any:
                bridge.add_remark(None, remark)
                return bridge.save_session({**tree, "setup": setup})

            desk.write(job, lambda entry: desk.tell(f"taken back: {said} (entry {entry.seq})"))

    note = f"{said}. The entry stays in the diary."
    desk.ask(Form("STRIKE OUT the last reading", [Field("reason", "Reason", required=True)], note=note), struck)


def _change(desk: Desk, changes: Tree) -> None:
    """Write changed keys where they belong: the open occupation, or the next session."""
    view, bridge = desk.view, desk.bridge
    if view is None:
        return
    session, _ = current_session(view, bridge)
    before = session.tree if session else {}
    changes = {
        table: changed
        for table, keys in changes.items()
        if (changed := {key: value for key, value in keys.items() if before.get(table, {}).get(key) != value})
    }
    if not changes:
        desk.tell("Nothing was changed, nothing is written.", "soft")
        return
    opened = open_occupation(view)
    names = ", ".join(sorted(key for table in changes.values() for key in table))

    def done(entry: Any) -> None:
        desk.tell(f"written: {names} (entry {entry.seq})")

    if opened is not None:
        number = opened.number
        desk.write(lambda: bridge.add_setup(number, changes), done)
        return
    tree = next_tree(view)
    if tree is None:
        return
    for table, keys in changes.items():
        merged = {**tree.get(table, {}), **keys}
        tree = {**tree, table: {key: value for key, value in merged.items() if value not in ("", None)}}
    final = tree
    desk.write(lambda: bridge.save_session(final), done)


def _session_check(desk: Desk, changes_of: Any) -> Any:
    """The same checks as a session file's, said beside the first field."""

    def check(values: Values) -> dict[str, str]:
        session, _ = current_session(desk.view, desk.bridge)
        if session is None:
            return {}
        tree = dict(session.tree)
        for table, keys in changes_of(values).items():
            tree[table] = {**tree.get(table, {}), **keys}
        try:
            desk.bridge.session(tree)
        except FieldbookError as problem:
            return {next(iter(values)): f"{problem.text} {problem.remedy}"}
        return {}

    return check


def _text_of(tree: Tree, key: str) -> str:
    return str(tree.get(key, ""))


def antenna(desk: Desk) -> None:
    """Change the antenna's data."""
    session, problem = current_session(desk.view, desk.bridge)
    if session is None:
        desk.tell(problem or "The book is still being opened.", "bad")
        return
    tree = session.tree.get("antenna", {})
    offset = tree.get("arp_to_phase_centre_m", {})
    kinds = TABLES["antenna"]
    fields = [
        Field("model", "Model", "text", _text_of(tree, "model"), required=True),
        Field("serial", "Serial", "text", _text_of(tree, "serial")),
        Field(
            "orientation_deg",
            "North mark, deg",
            kinds["orientation_deg"],
            _text_of(tree, "orientation_deg"),
            hint="unknown",
        ),
        Field(
            "slant_radius_m",
            "Rim radius, m",
            kinds["slant_radius_m"],
            _text_of(tree, "slant_radius_m"),
            hint="not stated",
        ),
        Field(
            "slant_mark_above_arp_m",
            "Notch over ARP, m",
            "number",
            _text_of(tree, "slant_mark_above_arp_m"),
            hint="not stated",
        ),
        Field("north", "Ph. centre N, m", "number", _text_of(offset, "north"), hint="not stated"),
        Field("east", "Ph. centre E, m", "number", _text_of(offset, "east"), hint="not stated"),
        Field("up", "Ph. centre up, m", "number", _text_of(offset, "up"), hint="not stated"),
    ]

    def changes(values: Values) -> Tree:
        keys: Tree = {
            key: values[key]
            for key in ("model", "serial", "orientation_deg", "slant_radius_m", "slant_mark_above_arp_m")
            if values[key]
        }
        parts = {key: values[key] for key in ("north", "east", "up") if values[key]}
        if parts:
            keys["arp_to_phase_centre_m"] = parts
        return {"antenna": keys}

    def check(values: Values) -> dict[str, str]:
        parts = [key for key in ("north", "east", "up") if not values[key]]
        if 0 < len(parts) < 3:
            return {parts[0]: "write all three parts of the offset, or none"}
        found: dict[str, str] = _session_check(desk, changes)(values)
        return found

    form = Form("ANTENNA", fields, note="From the antenna's drawing and calibration.", check=check)
    desk.ask(form, lambda values: _change(desk, changes(values)) if values else None)


def point(desk: Desk) -> None:
    """Say what point the receiver reports, and how the antenna stands."""
    session, problem = current_session(desk.view, desk.bridge)
    if session is None:
        desk.tell(problem or "The book is still being opened.", "bad")
        return
    tree = session.tree.get("setup", {})
    kinds = TABLES["setup"]
    fields = [
        Field(
            "reported_point", "Reported point", words(*REPORTED_POINTS), _text_of(tree, "reported_point"), required=True
        ),
        Field(
            "receiver_height_m",
            "Keyed height, m",
            "number",
            _text_of(tree, "receiver_height_m"),
            hint="only with 'mark'",
        ),
        Field("support", "Support", kinds["support"], _text_of(tree, "support")),
        Field("tribrach_id", "Tribrach", "text", _text_of(tree, "tribrach_id")),
        Field("centring", "Centring by", "text", _text_of(tree, "centring"), required=True),
        Field("centring_sigma_m", "Centring u, m", "positive", _text_of(tree, "centring_sigma_m"), required=True),
        Field(
            "reading_sigma_m", "Reading u, m", "positive", _text_of(tree, "reading_sigma_m"), hint="not stated: 0.0015"
        ),
    ]

    def changes(values: Values) -> Tree:
        return {"setup": {key: text for key, text in values.items() if text}}

    def sketch(values: Values, width: int, height: int) -> list[Row]:
        from fieldbook.screens.setup import CONSEQUENCE

        said = CONSEQUENCE.get(values["reported_point"], "")
        return [row((" What is done with it", "soft")), *paragraph(said, width, style="strong")]

    note = "Look at the receiver's own settings: a height taken off twice is the classic blunder."
    form = Form(
        "WHAT POINT DOES THE RECEIVER REPORT?", fields, note=note, check=_session_check(desk, changes), sketch=sketch
    )
    desk.ask(form, lambda values: _change(desk, changes(values)) if values else None)


def link(desk: Desk, suggested: str = "") -> None:
    """Type the link to the receiver."""
    session, problem = current_session(desk.view, desk.bridge)
    if session is None:
        desk.tell(problem or "The book is still being opened.", "bad")
        return
    if open_occupation(desk.view) is not None:
        desk.tell("An occupation is open on its link; end it before another link is chosen.", "bad")
        return
    fields = [Field("link", "Link", "text", suggested or session.receiver.link, required=True)]
    note = (
        "serial:///dev/ttyUSB0?baud=115200   serial:COM5?baud=115200   tcp://host:port   udp://host:port   "
        "file:PATH   sim:NAME?seed=7"
    )

    def check(values: Values) -> dict[str, str]:
        said = desk.bridge.link_problem(values["link"])
        return {"link": said} if said else {}

    form = Form("LINK TO THE RECEIVER", fields, note=note, check=check)
    desk.ask(form, lambda values: _change(desk, {"receiver": {"link": values["link"]}}) if values else None)
