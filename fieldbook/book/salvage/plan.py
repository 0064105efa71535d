"""What becomes of each entry of a damaged book: carried over under its number, or a placeholder in its place.

The new book keeps the numbers. A carried entry has the time, kind, text and observer of the old one bit for bit, so its
old hash can be computed again from the new book: `rescued` names the hash before and the last hash of every unbroken run
of the old chain, and placeholders (`withdrawn`) hold the old entries that cannot stand in the new book. Entry 1 differs:
a rescued book is a book of its own, because nothing proves that the old one's last entries were found.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

from fieldbook.book.kinds import KINDS, checked_body
from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree, canonical_json
from fieldbook.model.entry import GENESIS, entry_hash

from .gather import Found, OldEntry
from .streams import Stream

LOST = "lost"
DAMAGED = "damaged: its hash does not hold"
REMADE = "the received bytes it speaks of are not whole as they were stored"
OLD_FILE = "belongs to the tables of the old file"
ISSUED = "issued from the old book: it does not stand in this one"
NO_FORM = "not in the form of its kind"
MOST_EMBEDDED = 2_000_000  # characters of a text kept in a placeholder
SIGNED_CHAIN = "signs the old chain, whose hashes are not those of this book"
DOCUMENTS = ("certificate", "draft", "rendered")


@dataclass(frozen=True)
class Line:
    """One number of the new book. `reason` is empty for an entry that is carried."""

    seq: int
    entry: OldEntry | None
    reason: str = ""


def plan_lines(found: Found, streams: dict[int, Stream]) -> list[Line]:
    """A line for every number from 2 to that of the last sound entry."""
    begun = {entry.tree().get("occupation") for entry in found.entries.values() if entry.kind == "occupation"}
    lines = []
    for seq in range(2, found.last_seq + 1):
        entry = found.entries.get(seq)
        if entry is None:
            damaged = found.damaged.get(seq)
            lines.append(Line(seq, damaged, DAMAGED if damaged else LOST))
        else:
            lines.append(Line(seq, entry, _reason(entry, streams, begun)))
    return lines


def _reason(entry: OldEntry, streams: dict[int, Stream], begun: set[object]) -> str:
    if entry.kind in ("book", "migrated"):
        return OLD_FILE
    if entry.kind in DOCUMENTS:
        return ISSUED
    if entry.kind in ("key", "signature"):
        return SIGNED_CHAIN
    if entry.kind in ("raw", "packed", "end"):
        number = entry.tree().get("occupation")
        stream = streams.get(number) if type(number) is int else None
        if stream is None or not stream.whole or number not in begun:
            return REMADE
    return "" if _in_form(entry) else NO_FORM


def _in_form(entry: OldEntry) -> bool:
    tree = entry.tree()
    try:
        if entry.kind in KINDS:  # a later version may know more kinds
            checked_body(entry.kind, tree)
        return bool(tree) and bool(entry.observer.strip()) and canonical_json(tree) == entry.body
    except (UsageError, TypeError, ValueError, RecursionError):
        return False


def withdrawn_body(line: Line) -> Tree:
    """The body of the placeholder."""
    entry = line.entry
    if entry is None or len(entry.body) > MOST_EMBEDDED:
        return {"reason": line.reason, "original": None}
    return {"reason": line.reason, "original": original_of(entry)}


def original_of(entry: OldEntry) -> Tree:
    """An old entry as it is embedded."""
    return {
        "utc": entry.utc,
        "kind": entry.kind,
        "body": entry.body,
        "observer": entry.observer,
        "previous_hash": entry.previous_hash,
        "hash": entry.hash,
    }


def runs(found: Found) -> list[Tree]:
    """Unbroken runs of the old chain: first and last number, the hash before the first, the hash of the last."""
    made: list[Tree] = []
    before: OldEntry | None = None
    for seq in sorted(found.entries):
        entry = found.entries[seq]
        if before is not None and before.seq == seq - 1 and entry.previous_hash == before.hash:
            made[-1]["last"], made[-1]["hash"] = seq, entry.hash
        else:
            made.append({"first": seq, "last": seq, "previous_hash": entry.previous_hash, "hash": entry.hash})
        before = entry
    return made


def numbers_without(lines: Sequence[Line], *reasons: str) -> list[list[int]]:
    """[first, last] of consecutive numbers with one of these reasons."""
    spans: list[list[int]] = []
    for line in lines:
        if line.reason in reasons:
            if spans and spans[-1][1] == line.seq - 1:
                spans[-1][1] = line.seq
            else:
                spans.append([line.seq, line.seq])
    return spans


def run_problems(body: Tree, stored: dict[int, tuple[str, str, str, str]]) -> Iterator[str]:
    """What does not recompute: the runs that a `rescued` entry states, from the entries of the new book.

    Args:
        body: the body of the `rescued` entry.
        stored: seq -> (utc, kind, text of the body, observer) of the old entries, as carried or embedded.
    """
    for run in body["carried"]:
        first, last, previous = run["first"], run["last"], run["previous_hash"]
        if first == 1 and previous != GENESIS:
            yield "the first entry of the old book follows something"
        for seq in range(first, last + 1):
            if seq not in stored:
                yield f"old entry {seq} is not in it, though it is stated as carried"
                break
            utc, kind, text, observer = stored[seq]
            previous = entry_hash(seq, utc, kind, text, observer, previous)
        else:
            if previous != run["hash"]:
                yield f"old entries {first} to {last} do not give the hash that is stated for the last of them"
