"""What of this very book cannot be shown from itself, and what to compare it with.

Hashes tie entries together, not to the world. Whoever can write the file can make every hash anew or cut entries off;
what stands against that lies elsewhere: paper, signatures, a copy, a hash that somebody noted.
"""

from __future__ import annotations

from pathlib import Path

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.errors import FieldbookError


def to_compare(path: Path) -> list[str]:
    """Sentences that complete 'cannot prove'; none for a book that cannot be opened."""
    try:
        with Book.open(path, clock=SystemClock()) as book:
            entries, state = book.entries(), book.state()
    except FieldbookError:
        return []
    head = entries[-1]
    papers = ", ".join(str(entry.body.get("number")) for entry in state.documents if entry.kind == "certificate")
    compare = f", or number and digest of {papers} on paper" if papers else ""
    said = [
        f"that entry {head.seq} of {head.utc} was always the last: compare its hash {head.hash} with one noted or "
        f"copied before{compare}"
    ]
    if state.open_occupation is not None:
        said.append(
            f"that what occupation {state.open_occupation.number} received last, not yet sealed into the chain, was not "
            "changed on purpose (damage is found)"
        )
    return said
