"""The height reading: which distance, its ARP height at once, whether it agrees, and to which occupation it belongs.

    an occupation is open                    the reading is a `height` entry of it
    none is open, read `before`              it stands in the session of the next one
    none is open, read `after`               it is a `height` entry of the last one: the tripod still stands there

A reading that does not agree may be written, and stands as not agreeing until it is struck out or read again.
"""

from __future__ import annotations

from typing import Any

from fieldbook.model.canonical import Tree
from fieldbook.model.live import LiveView
from fieldbook.model.session import Session
from fieldbook.model.state import Occupation
from fieldbook.screens.bridge import Heights
from fieldbook.screens.fields import Field
from fieldbook.screens.forms import Form, Values
from fieldbook.screens.heights import disagree, drawing, judgement
from fieldbook.screens.page import Desk, next_tree, open_occupation
from fieldbook.screens.rows import Row, row
from fieldbook.screens.setup import current_readings, current_session, reading_tree
from fieldbook.settings.schema import METHODS, OCCASIONS, UNITS, words

KEYS = ("method", "value", "unit", "tape_offset_m", "when", "at", "reader")
VALUE = Field("value", "Reading", "positive", required=True, hint="as read from the tape")


def owner(view: LiveView, when: str) -> Occupation | None:
    """The occupation a reading belongs to; None: the next one."""
    opened = view.state.open_occupation
    if opened is not None or when == "before":
        return opened
    return next(reversed(view.state.occupations.values()), None)


def height(desk: Desk) -> None:
    """Ask for a height reading and write it."""
    session, problem = current_session(desk.view, desk.bridge)
    if session is None or desk.view is None:
        desk.tell(problem or "The book is still being opened: press again in a moment.", "bad")
        return
    desk.ask(_form(desk, session), lambda values: _write(desk, values))


def reading_of(values: Values) -> Tree:
    """The form's texts as keys of [[setup.height]]."""
    return {key: values[key] for key in KEYS if values.get(key)}


def _form(desk: Desk, session: Session) -> Form:
    readings = current_readings(desk.view)
    last = readings[-1] if readings else None
    has_rim = session.antenna.slant_radius_m is not None and session.antenna.slant_mark_above_arp_m is not None
    method = last["method"] if last else ("slant" if has_rim else "vertical")
    when = "before" if open_occupation(desk.view) is None else "after"
    fields = [
        Field("method", "Method", words(*METHODS), method, required=True),
        VALUE,
        Field("unit", "Unit", words(*UNITS), last["unit"] if last else "m", required=True),
        Field("when", "When", words(*OCCASIONS), when, required=True),
        Field("at", "At", hint="notch 1, ..."),
        Field("reader", "Read by", value=desk.bridge.observer),
        Field(
            "tape_offset_m",
            "Tape offset, m",
            "number",
            str(last.get("tape_offset_m", "")) if last else "",
            hint="none; added to the reading",
        ),
    ]
    return Form(
        "HEIGHT OF ANTENNA: which distance are you reading?",
        fields,
        note="Readings more than 3 mm apart: read again, or say why (V).",
        check=lambda values: _check(desk, session, values),
        sketch=lambda values: _sketch(desk, session, values),
        said=lambda values, width: _said(desk, session, values, width),
    )


def _context(desk: Desk, session: Session, values: Values) -> tuple[Session, list[Tree], str]:
    """Session and readings a reading is judged with, and whose it is, in words."""
    view = desk.view
    whose = owner(view, values["when"]) if view else None
    if whose is None:
        return session, current_readings(view), "of the next occupation"
    return whose.session, [reading_tree(item) for item in whose.heights], f"of occupation {whose.number}, {whose.mark}"


def _judged(desk: Desk, session: Session, values: Values) -> Heights | None:
    """The reading judged with the others; None while there is nothing to judge."""
    if VALUE.error(values["value"]):
        return None
    judged_in, readings, _ = _context(desk, session, values)
    made = desk.bridge.heights(judged_in, [*readings, reading_of(values)])
    return made if made.height is not None else None  # else the reason stands beside the field once writing is tried


def _sketch(desk: Desk, session: Session, values: Values) -> list[Row]:
    judged_in, _, _ = _context(desk, session, values)
    made = _judged(desk, session, values)
    typed = f"{values['value']} {values['unit']}" if values["value"] else ""
    arp_m = made.height.readings[-1].arp_m if made and made.height else None
    return drawing(values["method"], typed, arp_m, judged_in.antenna)


def _said(desk: Desk, session: Session, values: Values, width: int) -> list[Row]:
    _, _, whose = _context(desk, session, values)
    made = _judged(desk, session, values)
    rows = [row((f" {whose}", "soft"))]
    if made is None or made.height is None:
        return rows
    arp = made.height.readings[-1].arp_m
    return [
        *rows,
        row(" ARP above mark ", (f"{arp:.4f} m", "strong")),
        *judgement(made.height.readings, made.findings, width),
    ]


def _check(desk: Desk, session: Session, values: Values) -> dict[str, str]:
    judged_in, _, _ = _context(desk, session, values)
    antenna = judged_in.antenna
    if values["method"] in ("mount", "rod") and antenna.arp_above_mount_m is None:
        return {"method": "how far the ARP is above the bottom of the mount is not stated: press Esc, then A"}
    if values["method"] == "rod" and values["tape_offset_m"]:
        return {"tape_offset_m": "a rod's fixed height has no tape: leave it empty"}
    if values["method"] == "slant" and (antenna.slant_radius_m is None or antenna.slant_mark_above_arp_m is None):
        return {"method": "the antenna's rim radius and notch height are not stated: press Esc, then A"}
    if open_occupation(desk.view) is None and values["when"] != "before":
        if values["when"] == "during":
            return {"when": "no occupation is open: take 'before' for the next one or 'after' for the last one"}
        if desk.view is not None and owner(desk.view, "after") is None:
            return {"when": "there was no occupation yet: take 'before'"}
    made = desk.bridge.heights(judged_in, [reading_of(values)])
    return {"value": made.problem} if made.height is None else {}


def _write(desk: Desk, values: Values | None) -> None:
    if values is None or desk.view is None:
        return
    reading, bridge = reading_of(values), desk.bridge
    whose = owner(desk.view, reading["when"])
    said = f"written: {reading['method']} {reading['value']} {reading['unit']} {reading['when']}"
    if whose is not None:
        number = whose.number
        desk.write(
            lambda: bridge.add_height(number, reading),
            lambda entry: desk.tell(f"{said}, occupation {number} (entry {entry.seq})"),
        )
        return
    tree = next_tree(desk.view)
    if tree is None:
        return
    setup = {**tree["setup"], "height": [*tree["setup"].get("height", []), reading]}
    desk.write(
        lambda: bridge.save_session({**tree, "setup": setup}),
        lambda entry: desk.tell(f"{said}, next occupation (entry {entry.seq})"),
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


def explain(desk: Desk) -> None:
    """Say why readings of the open or last occupation differ and still stand."""
    view, bridge = desk.view, desk.bridge
    whose = owner(view, "after") if view else None
    if whose is None:
        desk.tell("There is no occupation yet: read again, and strike the wrong reading out (X).", "bad")
        return
    made = bridge.heights(whose.session, [reading_tree(item) for item in whose.heights])
    wrong = disagree(made.findings)
    if not wrong:
        desk.tell(f"The readings of occupation {whose.number} agree; nothing is to be explained.", "bad")
        return
    number = whose.number

    def written(values: Values | None) -> None:
        if values:
            desk.write(
                lambda: bridge.explain_heights(number, values["reason"]),
                lambda entry: desk.tell(f"decision written: the readings stand (entry {entry.seq})"),
            )

    title = f"WHY DO THE READINGS OF OCCUPATION {number} DIFFER?"
    desk.ask(Form(title, [Field("reason", "Reason", required=True)], note=wrong), written)
