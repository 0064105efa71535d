"""Certificates in a book against what the book gives when it is reduced again, as it stood then and as it stands today.

What was issued is a statement about what the book held. Of every certificate and draft, superseded ones too: the facts
fit their digest, the chain leads through the entry they were issued on, and every fact is made again from the book as it
stood then (`facts_again`). Of those that stand, the coordinates are compared with today's as well, to a tenth of their
last digit's meaning (0.01 mm): a changed set of height readings, a struck entry or another PROJ can be the honest cause
of a difference; the line says so.
"""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import Any

from fieldbook.book.store import Book
from fieldbook.certificate.identity import certificate_number, facts_digest
from fieldbook.clock import SystemClock
from fieldbook.commands.facts_again import head_problem, unlike_parts
from fieldbook.errors import FieldbookError
from fieldbook.model.entry import Entry
from fieldbook.model.reduction import Reduction
from fieldbook.model.state import BookState
from fieldbook.occupy.reductions import reductions_of_mark
from fieldbook.occupy.verifying import Verified
from fieldbook.occupy.whole_mark import whole_mark

_NO_FACTS = (LookupError, TypeError, ValueError, AttributeError, ArithmeticError)  # of facts that nobody sealed
TOLERANCE_M = 1e-5
TOLERANCE_DEG = 1e-10  # 0.01 mm on the ground


def verify_certified(path: Path) -> list[Verified]:
    """One line per certificate or draft that stands in the book. Raises nothing for a file that exists."""
    try:
        with Book.open(path, clock=SystemClock()) as book:
            return list(_lines(book))
    except FieldbookError as error:
        return [Verified(False, path.name, error.text)]
    except _NO_FACTS as error:
        return [Verified(False, path.name, f"holds certificates that are none ({type(error).__name__})")]


def _lines(book: Book) -> Iterator[Verified]:
    state = book.state()
    standing = {entry.seq for entry in _standing(state)}
    yield from _register(state)
    for entry in state.documents:
        name = str(entry.body.get("number") or f"draft of entry {entry.seq}")
        try:
            yield from _as_issued(book, entry, name)
            if entry.seq in standing:
                yield _today(book, entry, name)
        except _NO_FACTS as error:
            yield Verified(False, name, f"its facts are no certificate's ({type(error).__name__})", entry.seq)


def _register(state: BookState) -> Iterator[Verified]:
    """Numbers are given once and in order, entries say what their facts say, and what was written is of one of them."""
    running = 0
    for entry in state.documents:
        name = f"entry {entry.seq}"
        number, document = entry.body.get("number"), entry.body["facts"].get("document") or {}
        if entry.kind == "certificate":
            running += 1
            if number != certificate_number(state.id, running):
                yield Verified(False, name, f"certificate {running} of this book bears the number {number}", entry.seq)
        said = {key: entry.body.get(key) for key in ("number", "supersedes", "reason", "issued_utc")}
        unlike = [key for key, value in said.items() if document.get(key) != value]
        if entry.body.get("mark") != (entry.body["facts"].get("mark") or {}).get("name"):
            unlike.append("mark")
        if unlike:
            yield Verified(False, name, f"it states another {', '.join(unlike)} than its own facts", entry.seq)
    digests = {entry.body["digest"] for entry in state.documents}
    for entry in state.rendered:
        if entry.body.get("digest") not in digests:
            yield Verified(
                False, f"entry {entry.seq}", "the file it lists is of no certificate of this book", entry.seq
            )


def _as_issued(book: Book, entry: Entry, name: str) -> Iterator[Verified]:
    facts = entry.body["facts"]
    if facts_digest(facts) != entry.body["digest"]:
        yield Verified(False, name, "the facts do not fit their digest", entry.seq)
        return
    if wrong := head_problem(book, entry):
        yield Verified(False, name, wrong, entry.seq)
        return
    try:
        unlike = unlike_parts(book, entry)
    except FieldbookError as error:
        yield Verified(False, name, f"it can no longer be made again: {error.text}", entry.seq)
        return
    if unlike:
        text = f"made again from the book as it stood then, it says something else: {', '.join(unlike)}"
        yield Verified(False, name, text, entry.seq)
    elif unlike is not None:
        yield Verified(True, name, "made again from the book as it stood then, every fact is the same")


def _today(book: Book, entry: Entry, name: str) -> Verified:
    try:
        again = _again(book, entry)
    except FieldbookError as error:
        return Verified(False, name, f"it can no longer be reduced: {error.text}", entry.seq)
    differences = list(_differences(entry.body["facts"], again.to_json()))
    if differences:
        text = f"reduced again, the book gives something else: {'; '.join(differences[:4])}"
        return Verified(False, name, text + ". Was evidence struck or added since?", entry.seq)
    return Verified(True, name, "reduced again, the book gives the certified coordinates")


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
