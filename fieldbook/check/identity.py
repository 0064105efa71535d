"""Is it the right mark? What the receiver's own position and the inscription say against the name that was given.

The position is compared in the receiver's frame with approximate positions of unknown frame, so metres between frames do not
count: limits are those of a handheld receiver and of a finder's sketch (common practice, no source), and never less than
three times the stated 95 %. Nearness to another mark of the book is a stop: a wrong mark makes a right coordinate worthless.
"""

from __future__ import annotations

import math
import unicodedata
from collections.abc import Iterator, Mapping

from fieldbook.model.canonical import Tree
from fieldbook.model.reduction import Finding, Reduction
from fieldbook.model.session import Mark, Session
from fieldbook.reduce.geodesy import enu_difference

FAR_M = 20.0
AT_ANOTHER_M = 5.0
NOT_READ = "not "  # "not readable because ...": a field holds a value, or why it does not


def identity_findings(session: Session, reduction: Reduction, marks: Mapping[str, Tree]) -> Iterator[Finding]:
    """Findings on which mark it is.

    Args:
        marks: name -> tree of [mark], as last described in the book.
    """
    yield from _inscription(session, marks.get(reduction.mark, {}).get("inscription") or session.mark.inscription)
    places = {name: place for name, tree in marks.items() if (place := _place(tree)) is not None}
    own = places.get(reduction.mark) or _session_place(session.mark)
    if own is None:
        return
    distance_m = _distance_m(reduction, own)
    limit_m = max(FAR_M, 3 * reduction.uncertainty.horizontal95_m)
    if distance_m <= limit_m:
        return
    others = {name: _distance_m(reduction, place) for name, place in places.items() if name != reduction.mark}
    nearest = min(others, key=lambda name: others[name], default=None)
    figures = {"distance_m": distance_m, "nearest": nearest, "nearest_m": None if nearest is None else others[nearest]}
    if nearest is not None and others[nearest] <= max(AT_ANOTHER_M, 3 * reduction.uncertainty.horizontal95_m):
        text = (
            f"The antenna stands {others[nearest]:.1f} m from {nearest} and {distance_m:.0f} m from {reduction.mark}, the "
            "mark that was named. Read the inscription; occupy it under its own name, or correct the approximate positions."
        )
        yield Finding("at_another_mark", "stop", text, figures)
        return
    text = (
        f"You are {distance_m:.0f} m from the mark you named, by its approximate position. Read the inscription again; "
        "if it is the right mark, correct its approximate position."
    )
    yield Finding("far_from_mark", "caution", text, figures)


def same_inscription(read: str, expected: str) -> bool:
    """Letters and digits alike, in order; spaces, dashes, case and width apart."""
    return _letters(read) == _letters(expected)


def was_read(text: str | None) -> bool:
    """Whether the inscription was read, rather than the reason given why it was not."""
    return bool(text) and not str(text).casefold().startswith(NOT_READ)


def _inscription(session: Session, expected: str | None) -> Iterator[Finding]:
    read = session.setup.inscription_read
    if read is None:
        return
    if not was_read(read):
        yield Finding(
            "inscription_not_read", "info", f"The inscription was {read.strip().rstrip('.')}.", {"read": read}
        )
    elif expected is not None and not same_inscription(read, expected):
        text = f'The metal says "{read}", the description of the mark "{expected}". Is it the right mark?'
        yield Finding("inscription_differs", "caution", text, {"read": read, "expected": expected})


def _letters(text: str) -> str:
    return "".join(letter for letter in unicodedata.normalize("NFKC", text).casefold() if letter.isalnum())


def _place(tree: Tree) -> tuple[float, float] | None:
    place = tree.get("approximate") or {}
    if "lat_deg" not in place or "lon_deg" not in place:
        return None
    return float(place["lat_deg"]), float(place["lon_deg"])


def _session_place(mark: Mark) -> tuple[float, float] | None:
    if mark.approximate_lat_deg is None or mark.approximate_lon_deg is None:
        return None
    return mark.approximate_lat_deg, mark.approximate_lon_deg


def _distance_m(reduction: Reduction, place: tuple[float, float]) -> float:
    here = reduction.receiver
    east, north, _ = enu_difference((place[0], place[1], 0.0), (here.lat_deg, here.lon_deg, 0.0))
    return math.hypot(float(east), float(north))
