"""The set-up: antenna, reported point, centring, link on the left; the heights with their drawing on the right."""

# ruff: noqa: ARG002 - every maker of rows takes the size, and some do not need it

from __future__ import annotations

from decimal import Decimal
from typing import ClassVar

from fieldbook.errors import FieldbookError
from fieldbook.model.canonical import Tree
from fieldbook.model.live import LiveView
from fieldbook.model.session import HeightReading, Session
from fieldbook.screens.bridge import Bridge, Heights
from fieldbook.screens.heights import disagree, drawing, readings_block
from fieldbook.screens.page import Page, next_tree, open_occupation
from fieldbook.screens.plain import fit, pad
from fieldbook.screens.rows import BLANK, Row, beside, heading, paragraph, row

CONSEQUENCE = {
    "phase centre": "the heights AND the offset to the phase centre are taken off",
    "ARP": "the heights are taken off, no phase centre offset",
    "mark": "nothing is taken off: the receiver did it; heights are check readings",
}


def current_session(view: LiveView | None, bridge: Bridge) -> tuple[Session | None, str]:
    """The session of the open occupation, else of the next one; and what is wrong with it."""
    if view is None:
        return None, ""
    opened = open_occupation(view)
    if opened is not None:
        return opened.session, ""
    tree = next_tree(view)
    if tree is None:
        return None, "The book has no session yet: press 1, then F, and load a session file."
    try:
        return bridge.session(tree), ""
    except FieldbookError as problem:
        return None, f"{problem.text} {problem.remedy}"


def reading_tree(item: HeightReading) -> Tree:
    """A reading as the keys of [[setup.height]]."""
    tree: Tree = {"method": item.method, "value": format(item.value, "f"), "unit": item.unit, "when": item.when}
    for key in ("at", "reader", "time"):
        if getattr(item, key) is not None:
            tree[key] = getattr(item, key)
    for key in ("sigma_m", "tape_offset_m"):
        if getattr(item, key) is not None:
            tree[key] = format(Decimal(repr(getattr(item, key))), "f")
    return tree


def current_readings(view: LiveView | None) -> list[Tree]:
    """Readings of the open occupation, else those already read for the next one."""
    opened = open_occupation(view)
    if opened is not None:
        return [reading_tree(item) for item in opened.heights]
    tree = next_tree(view) if view else None
    return list(tree.get("setup", {}).get("height", [])) if tree else []


class SetupPage(Page):
    """What stands over the mark."""

    name_of_page: ClassVar[str] = "setup"
    facing: ClassVar[bool] = True
    _judged: tuple[object, Heights] | None = None

    def left(self, width: int, height: int) -> list[Row]:
        """Antenna, point, centring, link."""
        session, problem = current_session(self.view, self.desk.bridge)
        opened = open_occupation(self.view)
        note = f"occupation {opened.number}, open" if opened else "of the next occupation"
        rows = [heading("SET-UP", width, note)]
        if session is None:
            return [*rows, BLANK, *paragraph(problem or "opening …", width, mark=("▲", "warn"))]
        rows += setup_rows(session, width)
        judged = self._heights(session)
        count = len(judged.height.readings) if judged.height else 0
        arp = judged.height.height_arp_m if judged.height else None
        text = (
            "no reading yet"
            if arp is None
            else f"ARP {arp:.4f} m above mark, {count} reading{'s' if count > 1 else ''}"
        )
        rows += [BLANK, _keyed("H", "Heights", text, width, style="warn" if arp is None else "strong")]
        if judged.problem or disagree(judged.findings):
            rows += paragraph(
                judged.problem or disagree(judged.findings),
                width,
                style="bad",
                indent=3,
                mark=("■ READ AGAIN", "bad"),
                most=3,
            )
        rows.append(BLANK)
        if opened is None:
            carried = self.view is not None and bool(self.view.state.occupations)
            if carried:
                rows += paragraph(
                    "Values stand as in the last set-up: look at each before you start.", width, style="carried"
                )
            rows.append(row("  ", ("S", "strong"), "  start: begins the occupation and its recorder"))
        return rows

    def right(self, width: int, height: int) -> list[Row]:
        """Drawing and readings."""
        session, _ = current_session(self.view, self.desk.bridge)
        rows = [heading("HEIGHT OF ANTENNA", width, "Tab: the other page" if width > 75 else "")]
        if session is None:
            return rows
        judged = self._heights(session)
        readings = current_readings(self.view)
        last = readings[-1] if readings else None
        method = last["method"] if last else ("slant" if session.antenna.slant_radius_m else "vertical")
        typed = f"{last['value']} {last['unit']}" if last else ""
        arp = judged.height.readings[-1].arp_m if judged.height and judged.height.readings else None
        picture = drawing(method, typed, arp, session.antenna)
        room = width - 38 if width >= 76 else width
        block = [*paragraph(judged.problem, room, style="bad", most=6)] if judged.problem else []
        block += readings_block(judged.height, judged.findings, room, session.requirement.height_readings)
        if width >= 76:  # readings beside the drawing
            return [*rows, BLANK, *beside(picture, block, 38)]
        return [*rows, BLANK, *picture, BLANK, *block]

    def _heights(self, session: Session) -> Heights:
        """Judged once per change, not once per drawing."""
        readings = current_readings(self.view)
        opened = open_occupation(self.view)
        explained = opened is not None and any("height_difference" in entry.body for entry in opened.decisions)
        key = (session, tuple(tuple(sorted(item.items())) for item in readings), explained)
        if self._judged is None or self._judged[0] != key:
            self._judged = (key, self.desk.bridge.heights(session, readings, explained=explained))
        return self._judged[1]


def _keyed(key: str, label: str, value: str, width: int, *, style: str = "text") -> Row:
    # the key stands before what it changes
    return row((f" {key or ' '} ", "strong"), (pad(label, 12), "soft"), (fit(value, width - 16), style))


def setup_rows(session: Session, width: int) -> list[Row]:
    """The set-up as it stands; what is not stated says so."""
    antenna, setup, receiver = session.antenna, session.setup, session.receiver
    serial = f", serial {antenna.serial}" if antenna.serial else ", serial not stated"
    up = antenna.arp_to_phase_centre_up_m
    calibrated = antenna.calibration
    offset = (
        f"by {calibrated.file}, {antenna.offset_frequency}; receiver applies {antenna.receiver_applies}"
        if calibrated is not None
        else "not stated"
        if up is None
        else (
            f"{up:+.4f} m up, N {antenna.arp_to_phase_centre_north_m or 0:+.4f}, "
            f"E {antenna.arp_to_phase_centre_east_m or 0:+.4f}"
        )
    )
    turned = "unknown" if antenna.orientation_deg is None else f"north mark at {antenna.orientation_deg:g}°"
    slant = "not stated: vertical readings only"
    if antenna.slant_radius_m is not None and antenna.slant_mark_above_arp_m is not None:
        slant = f"radius {antenna.slant_radius_m:.4f} m, notch {antenna.slant_mark_above_arp_m:.4f} m above ARP"
    support = setup.support or "support not stated"
    support += f", tribrach {setup.tribrach_id}" if setup.tribrach_id else ""
    return [
        _keyed("", "Mark", session.mark.name, width, style="strong"),
        _keyed("A", "Antenna", antenna.model + serial, width),
        _keyed("", "", f"phase centre {offset}", width),
        _keyed("", "", f"turned {turned}; rim {slant}" if width > 90 else f"turned: {turned}", width),
        *([] if width > 90 else [_keyed("", "", slant, width)]),
        _keyed("P", "Reported", f"the receiver reports the {setup.reported_point.upper()}", width, style="strong"),
        *[_keyed("", "", CONSEQUENCE.get(setup.reported_point, ""), width, style="soft")],
        _keyed("", "Support", support, width),
        _keyed("", "Centring", f"{setup.centring}, u {1000 * setup.centring_sigma_m:.1f} mm per axis", width),
        _keyed("K", "Link", receiver.link, width),
        _keyed(
            "",
            "Corrections",
            session.corrections.kind
            + (f", station {session.corrections.station}" if session.corrections.station else ""),
            width,
        ),
    ]
