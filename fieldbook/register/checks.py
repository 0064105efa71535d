"""What is not in order in a register: the list an office works off before it publishes. Nothing here changes anything.

one_occupation      nothing checks the coordinate            requirement_not_met   of the strictest session of the mark
occupations_disagree, overlap, occupation_has_stop           class_not_met         of the office's classes
frame_differs       an occupation set apart for its frame    frames_mixed          marks of the register in several frames
no_geoid_height     an ellipsoidal height only               certificate_differs   the evidence no longer gives it
no_coordinate, not_reduced, open_question, occupation_open, same_bytes
"""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

from fieldbook.model.canonical import Tree
from fieldbook.reduce import frames
from fieldbook.reduce.geodesy import enu_difference

from .classes import OfficeClass
from .combining import combine_mark, measured
from .evidence import Evidence, Place
from .fold import HeldBook, Mark, RegisterState, label_of
from .history import apart_m, in_force
from .identity import Proposal, proposals
from .members import requirement_of
from .reading import evidence_by_key
from .results import Row, rows_of
from .store import Register

CERTIFICATE_TOLERANCE_M = 1e-4  # the last printed digit
FRAME_CODES = frozenset({"frame_differs", "motion_unknown", "frame_unreachable", "outside_area"})


@dataclass(frozen=True)
class Trouble:
    """One thing not in order. mark: number, None of the register as a whole. severity: "stop" or "caution"."""

    code: str
    severity: str
    mark: int | None
    name: str | None
    text: str


def check_register(register: Register, classes: Sequence[OfficeClass] = ()) -> list[Trouble]:
    """Everything that is not in order, stops first, then by mark.

    Raises:
        BookError: evidence is missing or damaged.
    """
    state, rows = register.state(), rows_of(register, classes)
    found = [item for row in rows for item in _of_row(row, classes)]
    found += _of_frames(rows)
    found += [_of_proposal(item) for item in proposals(state)]
    found += _of_books(state)
    found += [item for row in rows for item in _of_published(state, row)]
    found += _of_certificates(register)
    return sorted(found, key=lambda item: (item.severity != "stop", item.mark or 0, item.code))


def _of_row(row: Row, classes: Sequence[OfficeClass]) -> Iterator[Trouble]:
    value, mark = row.value, row.value.mark

    def say(code: str, severity: str, text: str) -> Trouble:
        return Trouble(code, severity, mark.number, mark.name, text)

    for item in value.findings:
        if item.severity == "stop" or item.code == "geoid_models_differ":
            yield say(item.code, item.severity, item.text)
    if not mark.occupations and mark.until_utc is None:
        yield say("no_coordinate", "caution", "No book holds an occupation of it.")
        return
    for left in value.apart:
        if left.code in FRAME_CODES:
            yield say("frame_differs", "caution", f"Occupation {left.label} takes no part. {left.text}")
        elif left.code in ("open", "same_bytes", "no_client_position", "no_height"):
            code = "occupation_open" if left.code == "open" else left.code
            yield say(code, "caution", f"Occupation {left.label} takes no part. {left.text}")
    if value.place is None:
        if mark.occupations:
            yield say("no_coordinate", "caution", "No occupation of it can be used.")
        return
    if len(value.members) == 1:
        text = f"Only occupation {value.labels[0]} stands for it: a blunder in it would show nowhere."
        yield say("one_occupation", "caution", text)
    if value.place.h_m is not None and value.height is None:
        yield say("no_geoid_height", "caution", "It has an ellipsoidal height and none by a geoid model.")
    yield from (say("requirement_not_met", "caution", text) for text in _requirement(row))
    if classes and row.office is None:
        lines = "; ".join(classes[-1].unmet(row.figures))
        yield say("class_not_met", "caution", f"It is of no class, not even {classes[-1].name}: {lines}.")


def _requirement(row: Row) -> Iterator[str]:
    """The strictest session's own lines, in the frame it speaks of."""
    value = row.value
    wanted = requirement_of(value.members)
    if math.isinf(wanted.horizontal_95_m):
        return  # coordinates from elsewhere alone: nobody asked anything of them
    figures = measured(value)
    plan, up = figures.horizontal95_m, figures.vertical95_m
    if wanted.in_frame == "client frame" and value.datum is not None:
        plan, up = value.datum.horizontal95_m, value.datum.vertical95_m
    if plan > wanted.horizontal_95_m:
        yield f"Plan {1000 * plan:.1f} mm at 95 % in the {wanted.in_frame}, {1000 * wanted.horizontal_95_m:g} mm were asked."
    if up is None or up > wanted.vertical_95_m:
        have = "not known" if up is None else f"{1000 * up:.1f} mm"
        yield f"Height {have} at 95 % in the {wanted.in_frame}, {1000 * wanted.vertical_95_m:g} mm were asked."
    if len(value.members) < wanted.occupations:
        yield f"{wanted.occupations} occupations were asked, {len(value.members)} can be used."


def _of_frames(rows: Sequence[Row]) -> Iterator[Trouble]:
    used = Counter(
        (row.value.place.frame, row.value.place.frame_name, None if row.value.place.epoch is None else f"{row.value.place.epoch:.2f}")
        for row in rows
        if row.value.place is not None
    )  # fmt: skip
    if len(used) > 1:
        listed = "; ".join(
            f"{count} in {name} ({code}){'' if epoch is None else ' at ' + epoch}"
            for (code, name, epoch), count in used.most_common()
        )
        text = f"Marks of this register are in several frames or epochs: {listed}. Decide one (`register decide REG frame`)."
        yield Trouble("frames_mixed", "caution", None, None, text)


def _of_proposal(item: Proposal) -> Trouble:
    text = f"{item.text}. Decide it (`register proposals` shows the evidence)."
    return Trouble("open_question", "caution", item.marks[0], item.names[0], text)


def _of_books(state: RegisterState) -> Iterator[Trouble]:
    for book in state.books.values():
        for item in book.failed:
            number = state.root_of(book.numbers[item["mark"]]) if item["mark"] in book.numbers else None
            label = label_of(book.id, int(item["occupation"]))
            yield Trouble(
                "not_reduced", "caution", number, item["mark"], f"Occupation {label} was not reduced: {item['text']}"
            )


def _of_published(state: RegisterState, row: Row) -> Iterator[Trouble]:
    value = row.value
    held = in_force(state, value.mark.number)
    if held is None:
        return
    evidence = [[m.held.book, m.held.occupation, m.held.evidence] for m in value.members]
    if held.entry.body["evidence"] == evidence:
        return
    moved = None if value.place is None else apart_m(held.entry.body["place"], value.place)
    by = "in another frame" if moved is None else f"{1000 * math.hypot(moved[0], moved[1]):.1f} mm away in plan"
    if value.place is None:
        by = "nothing"
    text = f"The evidence has changed since {held.number} was published ({held.entry.utc[:10]}); it now gives a place {by}."
    yield Trouble("published_outdated", "caution", value.mark.number, value.mark.name, text)


# -- certificates ----------------------------------------------------------------------------------------------


def _of_certificates(register: Register) -> Iterator[Trouble]:
    """Standing certificates of the books against what their own occupations give today."""
    state = register.state()
    standing = [(book, item) for book in state.books.values() for item in _standing(book)]
    wanted = [held for book, item in standing for held in book.occupations if held.occupation in _numbers(item)]
    evidence = evidence_by_key(register, wanted)
    for book, item in standing:
        text = _differs(state, book, item, evidence)
        if text:
            number = state.root_of(book.numbers[item["mark"]]) if item["mark"] in book.numbers else None
            said = f"Certificate {item['number']} of {item['mark']} ({str(item['issued_utc'])[:10]}): {text}"
            yield Trouble("certificate_differs", "stop", number, item["mark"], said)


def _standing(book: HeldBook) -> list[Tree]:
    superseded = {item["supersedes"] for item in book.certificates}
    return [item for item in book.certificates if item["number"] not in superseded]


def _numbers(item: Tree) -> list[int]:
    if item["occupation"] is not None:
        return [int(item["occupation"])]
    return [int(number) for number in item["occupations"] or []]


def _differs(state: RegisterState, book: HeldBook, item: Tree, evidence: dict[tuple[str, int], Evidence]) -> str:
    numbers = _numbers(item)
    gone = [number for number in numbers if (book.id, number) not in evidence]
    if gone:
        return f"occupation {', '.join(map(str, gone))} it rests on was struck or cannot be reduced any more."
    apart = [label_of(book.id, number) for number in numbers if (book.id, number) in state.excluded()]
    if apart:
        return f"occupation {', '.join(apart)} it rests on was set apart in this register."
    stated = item["client"]
    if stated is None:
        return ""
    place = _place_today(book, item, numbers, evidence)
    if place is None:
        return "its occupations no longer give a position."
    if place.frame != stated["frame"]:
        return f"it is in {stated['frame']}, its occupations now in {place.frame}."
    moved = _moved_m(stated, place)
    if moved > CERTIFICATE_TOLERANCE_M:
        return f"its occupations now give a position {1000 * moved:.1f} mm away. Have it issued again, superseding this one."
    return ""


def _place_today(
    book: HeldBook, item: Tree, numbers: list[int], evidence: dict[tuple[str, int], Evidence]
) -> Place | None:
    if len(numbers) == 1:
        return evidence[book.id, numbers[0]].place
    own = tuple(held for held in book.occupations if held.occupation in numbers)
    alone = Mark(0, str(item["mark"]), (str(item["mark"]),), (0,), (), own, None, None)
    return combine_mark(alone, evidence, RegisterState()).place


def _moved_m(stated: dict[str, Any], place: Place) -> float:
    ellipsoid = frames.frame_info(place.frame).ellipsoid
    level = place.h_m if place.h_m is not None else 0.0
    height = level if stated["h_m"] is None or place.h_m is None else float(stated["h_m"])
    start = (float(stated["lat_deg"]), float(stated["lon_deg"]), height)
    east, north, up = (float(v) for v in enu_difference(start, (place.lat_deg, place.lon_deg, level), ellipsoid))
    return math.sqrt(east * east + north * north + up * up)
