"""Forms of the set-up: height reading, antenna, reported point and centring, link.

Before the occupation they change what the book offers for it (a `session` entry); while it is open they are entries
of the occupation (`height`, `setup`). A reading that does not agree may be written, and stands as not agreeing.
"""

from __future__ import annotations

from typing import Any

from fieldbook.errors import FieldbookError
from fieldbook.model.canonical import Tree
from fieldbook.screens.fields import Field
from fieldbook.screens.forms import Form, Values
from fieldbook.screens.page import Desk, next_tree, open_occupation
from fieldbook.screens.rows import Row, paragraph
from fieldbook.screens.setup import CONSEQUENCE, current_session
from fieldbook.settings.schema import REPORTED_POINTS, TABLES, words

ANTENNA_KEYS = (
    "model",
    "serial",
    "orientation_deg",
    "slant_radius_m",
    "slant_mark_above_arp_m",
    "arp_above_mount_m",
    "offset_frequency",
    "receiver_applies",
)


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
        Field(
            "arp_above_mount_m",
            "ARP over mount, m",
            "number",
            _text_of(tree, "arp_above_mount_m"),
            hint="not stated",
        ),
        Field("north", "Ph. centre N, m", "number", _text_of(offset, "north"), hint="not stated"),
        Field("east", "Ph. centre E, m", "number", _text_of(offset, "east"), hint="not stated"),
        Field("up", "Ph. centre up, m", "number", _text_of(offset, "up"), hint="not stated"),
        Field("offset_frequency", "Signals", "text", _text_of(tree, "offset_frequency"), hint="L1, L1/L2, ..."),
        Field(
            "receiver_applies",
            "Receiver applies",
            kinds["receiver_applies"],
            _text_of(tree, "receiver_applies"),
        ),
        Field(
            "listed",
            "From your list",
            "text",
            _text_of(tree, "listed"),
            hint=", ".join(desk.bridge.antenna_names()) or "empty",
        ),
    ]

    def changes(values: Values) -> Tree:
        keys: Tree = {key: values[key] for key in ANTENNA_KEYS if values[key]}
        parts = {key: values[key] for key in ("north", "east", "up") if values[key]}
        if parts:
            keys["arp_to_phase_centre_m"] = parts
        if values["listed"] and values["listed"] != tree.get("listed"):
            # what is listed under the name comes whole, in place of what stood here
            keys |= desk.bridge.antenna_from_list(values["listed"], values["offset_frequency"])
        elif "calibration" in tree:
            keys["arp_to_phase_centre_m"] = desk.bridge.calibrated_offset(
                tree["calibration"], values["offset_frequency"]
            )
        return {"antenna": keys}

    def check(values: Values) -> dict[str, str]:
        try:
            changes(values)
        except FieldbookError as problem:
            signals = problem.text.startswith("Say which signals")
            return {"offset_frequency" if signals else "listed": f"{problem.text} {problem.remedy}"}
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

    def said(values: Values, width: int) -> list[Row]:
        return paragraph(CONSEQUENCE.get(values["reported_point"], ""), width, style="strong", mark=("→", "accent"))

    note = "Look at the receiver's own settings: a height taken off twice is the classic blunder."
    form = Form(
        "WHAT POINT DOES THE RECEIVER REPORT?", fields, note=note, check=_session_check(desk, changes), said=said
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
