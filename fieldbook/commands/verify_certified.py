"""Certificates in a book against a reduction made again today.

What was issued is a statement about what the book holds; if the same book now gives other coordinates, somebody must
know. Compared are the printed coordinates of each standing certificate, to a tenth of their last digit's meaning:
0.01 mm. A changed set of height readings, a struck entry or another PROJ can be the honest cause; the line says so.
"""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import Any

from fieldbook.book.store import Book
from fieldbook.certificate.identity import facts_digest
from fieldbook.clock import SystemClock
from fieldbook.errors import FieldbookError
from fieldbook.model.entry import Entry
from fieldbook.model.reduction import Reduction
from fieldbook.model.state import BookState
from fieldbook.occupy.reductions import reductions_of_mark
from fieldbook.occupy.verifying import Verified
from fieldbook.occupy.whole_mark import whole_mark

TOLERANCE_M = 1e-5
TOLERANCE_DEG = 1e-10  # 0.01 mm on the ground


def verify_certified(path: Path) -> list[Verified]:
    """One line per certificate or draft that stands in the book. Raises nothing for a file that exists."""
    try:
        with Book.open(path, clock=SystemClock()) as book:
            return list(_lines(book))
    except FieldbookError as error:
        return [Verified(False, path.name, error.text)]


def _lines(book: Book) -> Iterator[Verified]:
    state = book.state()
    for entry in _standing(state):
        facts, name = entry.body["facts"], entry.body.get("number") or f"draft of entry {entry.seq}"
        if facts_digest(facts) != entry.body["digest"]:
            yield Verified(False, str(name), "the facts do not fit their digest", entry.seq)
            continue
        try:
            again = _again(book, entry)
        except FieldbookError as error:
            yield Verified(False, str(name), f"it can no longer be reduced: {error.text}", entry.seq)
            continue
        differences = list(_differences(facts, again.to_json()))
        if differences:
            text = f"reduced again, the book gives something else: {'; '.join(differences[:4])}"
            yield Verified(False, str(name), text + ". Was evidence struck or added since?", entry.seq)
        else:
            yield Verified(True, str(name), "reduced again, the book gives the certified coordinates")


def _again(book: Book, entry: Entry) -> Reduction:
    """The occupation reduced again, or the mark combined again."""
    number = entry.body["occupation"]
    if number is None:
        return whole_mark(book, str(entry.body["mark"]), entry.body.get("occupations")).reduction
    return reductions_of_mark(book, int(number))[0].reduction


def _standing(state: BookState) -> list[Entry]:
    """The latest certificate of each mark and occupation, else its latest draft."""
    latest: dict[tuple[str, str], Entry] = {}
    for entry in state.documents:
        key = (str(entry.body["mark"]), str(entry.body["occupation"]))
        known = latest.get(key)
        if known is None or entry.kind == "certificate" or known.kind == "draft":
            latest[key] = entry
    return list(latest.values())


def _differences(facts: dict[str, Any], now: dict[str, Any]) -> Iterator[str]:
    for place in ("receiver", "client"):
        stated, made = _position_facts(facts, place), now.get(place)
        if (stated is None) != (made is None):
            yield f"{place}'s coordinates {'vanished' if made is None else 'appeared'}"
            continue
        if stated is None or made is None:
            continue
        for key in ("lat_deg", "lon_deg", "h_m"):
            tolerance = TOLERANCE_DEG if key.endswith("deg") else TOLERANCE_M
            before, after = stated.get(key), made.get(key)
            if (before is None) != (after is None):
                yield f"{place} {key} {before} / {after}"
            elif before is not None and after is not None and abs(float(before) - float(after)) > tolerance:
                yield f"{place} {key} {before}, now {after}"


def _position_facts(facts: dict[str, Any], place: str) -> dict[str, Any] | None:
    found = facts["position"].get(place)
    return found if isinstance(found, dict) else None
