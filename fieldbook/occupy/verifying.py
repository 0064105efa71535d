"""Does a book still say what it said? The audit of what is stored, then everything that can be made again is made again.

    stored values     chain, raw hashes, schema (`book.audit`)
    epochs            decoded again from the received bytes and compared, every column
    positions         every used position read once more by the independent second reader (pynmea2)

A file that exists and does not hold is a finding, never an exception.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass
from decimal import ROUND_HALF_EVEN, Decimal
from pathlib import Path

from fieldbook.book.audit import audit_book
from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.errors import FieldbookError
from fieldbook.model.canonical import Tree
from fieldbook.model.epoch import EpochFlag
from fieldbook.model.state import Occupation
from fieldbook.nmea.second_reader import second_readings
from fieldbook.occupy.rebuild import compare

MOST_NAMED = 20  # a wrecked table need not print a line per epoch


@dataclass(frozen=True)
class Verified:
    """One sentence: holds or not, where, and since which entry if that can be said."""

    holds: bool
    where: str
    text: str
    since_seq: int | None = None


def verify_stored(path: Path) -> list[Verified]:
    """Audit, rebuild and second reading of a book. Raises nothing for a file that exists."""
    found = [Verified(False, item.where, item.text, item.since_seq) for item in audit_book(path)]
    if not found:
        found.append(Verified(True, "entries and received bytes", "the chain and every hash hold"))
    try:
        with Book.open(path, clock=SystemClock()) as book:
            if book.copied_without_wal:
                found.append(
                    Verified(False, path.name, "was copied without its -wal: what was recorded last is missing")
                )
            state = book.state()
            if state.rescued is not None:
                found.append(Verified(True, "rescued", rescued_words(state.rescued.body), state.rescued.seq))
            for occupation in state.occupations.values():
                found += _occupation(book, occupation)
    except FieldbookError as error:
        found.append(Verified(False, path.name, error.text))
    return found


def rescued_words(body: Tree) -> str:
    """What a rescued book says of itself, and what nobody can say of it."""
    old, carried = body["from"], sum(run["last"] - run["first"] + 1 for run in body["carried"])
    said = [f"salvaged from the damaged book {old['id'] or 'of unknown id'}, file SHA-256 {old['sha256']}"]
    missing = body["lost"] + body["damaged"]
    if missing:
        numbers = ", ".join(str(first) if first == last else f"{first} to {last}" for first, last in missing)
        said.append(f"lost: entries {numbers}")
    for item in body["occupations"]:
        short = (item["stated_bytes"] or 0) - item["received_bytes"]
        if not item["whole"]:
            lost = f"{short} bytes lost" if short > 0 else "made anew"
            said.append(f"occupation {item['occupation']}: {lost}, {item['unproven_bytes']} bytes unproven")
    said.append(f"{carried} old entries give the hashes stated, the last {old['head_hash']}")
    if not old["end_known"]:
        said.append("entries after that may be missing")
    said.append("that the old book was true is proven by nothing in this one")
    return "; ".join(said)


def _occupation(book: Book, occupation: Occupation) -> Iterator[Verified]:
    where = f"occupation {occupation.number}"
    try:
        differences = compare(book, occupation.number)
        for text in differences[:MOST_NAMED]:
            yield Verified(False, where, text)
        if len(differences) > MOST_NAMED:
            yield Verified(False, where, f"and {len(differences) - MOST_NAMED} more differences")
        if differences:
            return
        yield Verified(True, where, "decoded again from the received bytes, the epochs are identical")
        wrong, read = _second_reading(book, occupation)
        for text in wrong[:MOST_NAMED]:
            yield Verified(False, where, text)
        if not wrong:
            yield Verified(True, where, f"an independent reader finds the same {read} positions")
    except FieldbookError as error:
        yield Verified(False, where, error.text)


def _second_reading(book: Book, occupation: Occupation) -> tuple[list[str], int]:
    """Differences between the used epochs and the second reader's positions; number of positions compared."""
    heard = Counter(
        (_time_ms(item.time_text), *item[1:6], item.source)
        for item in second_readings(book.received(occupation.number))
    )
    wrong, compared = [], 0
    for epoch in book.epochs(occupation.number):
        if epoch.code is not None or epoch.source == "RMC" or epoch.flags & EpochFlag.NO_CHECKSUM:
            continue  # RMC and sentences without checksum are not read a second time
        compared += 1
        key = (
            epoch.time_ms,
            epoch.latitude_e8min,
            epoch.longitude_e8min,
            epoch.altitude_e5m,
            epoch.separation_e5m,
            epoch.quality,
            epoch.source,
        )
        if heard[key] < 1:
            wrong.append(f"epoch {epoch.number}: the independent reader finds no such position in the received bytes")
    return wrong, compared


def _time_ms(text: str) -> int | None:
    """hhmmss.sss in ms, by decimal arithmetic of its own."""
    if len(text) < 6 or not text[:6].isdigit():
        return None
    seconds = int(text[:2]) * 3600 + int(text[2:4]) * 60
    return int(((Decimal(text[4:]) + seconds) * 1000).quantize(Decimal(1), rounding=ROUND_HALF_EVEN))
