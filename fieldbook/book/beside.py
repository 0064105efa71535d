"""Files beside somebody else's book that SQLite would trust: refused before it opens anything.

SQLite writes BOOK-wal, BOOK-shm and BOOK-journal by their names, so a link there leads it to any file of ours. And a
-journal may end with the name of a 'super-journal', which SQLite deletes once it has rolled back: handed over beside a
book it deletes any file of ours, as soon as somebody looks at the book. Books never have one (it needs two databases in
one transaction).
"""

from __future__ import annotations

import os
from pathlib import Path

from fieldbook.errors import BookError

ENDINGS = ("-wal", "-shm", "-journal", ".lock")
_MAGIC = bytes.fromhex("d9d505f920a163d7")  # ends a journal that names a super-journal (sqlite.org/fileformat2.html, 3)


def refuse_hostile(book: Path) -> None:
    """Refuse a book whose neighbours lead elsewhere.

    Raises:
        BookError: code "hostile".
    """
    real = os.path.realpath(book)
    for ending in ENDINGS:
        if Path(real + ending).is_symlink():
            raise BookError(
                f"{Path(real + ending).name} beside the book is a link to another file, which would be written to.",
                "Whoever made that link did so on purpose: take it away, or copy the book alone to another folder.",
                code="hostile",
            )
    if _names_another_file(Path(real + "-journal")):
        raise BookError(
            f"{Path(real).name}-journal beside the book names another file, which would be deleted.",
            "No book has such a journal: take it away, or copy the book alone to another folder.",
            code="hostile",
        )


def _names_another_file(journal: Path) -> bool:
    """Only the -journal is opened, on which SQLite holds no locks."""
    try:
        with journal.open("rb") as file:
            size = file.seek(0, os.SEEK_END)
            file.seek(max(0, size - len(_MAGIC)))
            return size > 2 * len(_MAGIC) and file.read() == _MAGIC
    except OSError:
        return False
