"""What the signatures of a book show, and what no verification can prove."""

from __future__ import annotations

from pathlib import Path

from fieldbook.book.sound import sound_entries
from fieldbook.errors import FieldbookError
from fieldbook.occupy.verifying import Verified
from fieldbook.signing.judge import judge
from fieldbook.signing.keyring import Trust

# Printed under a book that was verified. The first holds for all, the others depend on the signatures.
_ALWAYS = (
    "that what was received came from the sky over this mark: a false stream, recorded, verifies like a true one",
    "when anything was written: times are those of the computer's clock, and a signature carries no trusted time",
)
_UNSIGNED = (
    "who wrote it: the names are typed, and no entry is signed",
    "that it was not made anew as a whole, or cut off at the end: an unsigned chain can be computed by anybody",
)
_SIGNED = (
    "whose a key is: a key only calls itself by a name; the fingerprint, heard from that person, says more",
    "that nothing was cut off at the end together with its signature, or that the book was not made anew without its keys: "
    "compare the number and hash of an entry that you noted, or a certificate",
)


def verify_signatures(path: Path, trust: Trust) -> list[Verified]:
    """Lines on the signatures of a book. Raises nothing for a file that exists."""
    try:
        entries, total = sound_entries(path)
    except FieldbookError:
        return []  # said already
    lines = judge(entries, trust, total)
    return [Verified(item.holds, "signatures", item.text, item.since_seq) for item in lines]


def not_proven(lines: list[Verified]) -> list[str]:
    """What a verified book does not prove."""
    said = [item.text for item in lines if item.where == "signatures"]
    signed = bool(said) and not any(text.startswith("unsigned") for text in said)
    return [*_ALWAYS, *(_SIGNED if signed else _UNSIGNED)]
