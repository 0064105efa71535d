"""The lost POSIX lock: one file handle closed on the book in the recorder's process, and the locks of SQLite are gone.

`tests/book/test_posix_lock.py` tells why. Here a recorder commits; in its own process everything is done that the program
ever does with a book besides; other processes open and close the book; the recorder is killed and its commits are counted.
Beside it, as a measure of what is at stake: the same with one `open(book).close()`, which no code of ours contains.
"""

from __future__ import annotations

import sys
import tempfile
from pathlib import Path

from faults_rig import ROOT, Row

sys.path.insert(0, str(ROOT / "tests" / "book"))


def lost_lock(times: int) -> Row:
    """Our own ways to look at a book, in the recorder's process."""
    from test_posix_lock import FORBIDDEN, OURS, _acknowledged_and_kept

    from fieldbook.occupy.verifying import verify_stored

    row, forbidden = Row("POSIX lock: all our looks at a book in its recorder's process"), 0
    while row.times < times:
        with tempfile.TemporaryDirectory(prefix="faults-") as folder:
            book = Path(folder) / "job.book"
            acknowledged, kept = _acknowledged_and_kept(book, OURS)
            row.acknowledged += acknowledged
            row.lost += acknowledged - kept
            row.damaged += any(
                "chain" in item.where or item.where == "file" for item in verify_stored(book) if not item.holds
            )
            acknowledged, kept = _acknowledged_and_kept(Path(folder) / "forbidden.book", FORBIDDEN)
            forbidden += acknowledged - kept
        row.times += 1
    row.expect(forbidden > 0, "the forbidden way loses nothing any more: the rule may be relaxed")
    row.note = f"commits, not epochs; with one `open(book).close()` instead {forbidden} are lost"
    return row
