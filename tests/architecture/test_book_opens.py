"""No code opens, copies or renames BOOK, BOOK-wal or BOOK-shm except through SQLite (tests/book/test_posix_lock.py).

A pragmatic scan of the source: every call that opens, reads, writes or copies a file is listed, and fails where its
argument speaks of a book, or where it stands in the package `book` at all. Exempt are `book.foreign`, which exists
to copy, `book.lock`, whose file is another one, `book.beside` and `book.wal`, which look at its neighbours, the line of
`book.begin` that syncs the folder, and that of `book.as_of` that copies an object.
"""

from __future__ import annotations

import ast
from collections.abc import Iterator
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parents[2] / "fieldbook"
OPENING = {
    "open",
    "read_bytes",
    "read_text",
    "write_bytes",
    "write_text",
    "copy",
    "copy2",
    "copyfile",
    "copyfileobj",
    "copytree",
    "move",
    "mmap",
    "fdopen",
    "sendfile",
    "symlink_to",
    "truncate",
}
ALWAYS_FINE = {"Book.open", "webbrowser.open", "Link.open", "link.open", "self.link.open"}
EXEMPT = {
    "book/foreign.py": "copies a book to which the process has no connection; a rescue reads the bytes of that copy",
    "book/beside.py": "looks at the end of a -journal, on which SQLite holds no locks",
    "book/lock.py": "opens BOOK.lock, which is not the book",
    "book/wal.py": "reads the -wal of a book to which the process has no connection",
}
EXEMPT_CALLS = {
    "book/as_of.py": {"copy.copy(book)"},  # an object
    "book/begin.py": {"os.open(folder, os.O_RDONLY)"},
    "book/place.py": {"mounts.read_text(encoding='utf-8', errors='surrogateescape')"},
    "book/salvage/bits.py": {"before.copy()"},  # of a hash
}
SAYS_BOOK = ("book",)
SQLITE_ELSEWHERE = ("register/connect.py", "register/export_geopackage.py")


def _calls(source: str) -> Iterator[tuple[int, str, str]]:
    """(line, what is called, the whole call) of every call that could open a file."""
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.Call):
            called = ast.unparse(node.func)
            if called.rsplit(".", 1)[-1] in OPENING and called not in ALWAYS_FINE:
                yield node.lineno, called, ast.unparse(node)


def offences(name: str, source: str) -> list[str]:
    """Calls of one module (path below `fieldbook/`) that may open a book."""
    if name in EXEMPT:
        return []
    found = []
    for line, called, text in _calls(source):
        if text in EXEMPT_CALLS.get(name, ()):
            continue
        receiver = called.rsplit(".", 1)[0] if "." in called else ""
        in_book = name.startswith("book/") and not called.startswith(("cls.", "dataclasses."))
        speaks_of_book = any(word in text.lower() for word in SAYS_BOOK) and receiver != "Book"
        if in_book or speaks_of_book:
            found.append(f"fieldbook/{name}:{line}: {text[:100]}")
    return found


def test_no_module_opens_a_book() -> None:
    found = []
    for path in sorted(PACKAGE.rglob("*.py")):
        found += offences(path.relative_to(PACKAGE).as_posix(), path.read_text(encoding="utf-8"))
    assert found == []


def test_only_the_book_and_the_register_file_import_sqlite3() -> None:
    found = []
    for path in sorted(PACKAGE.rglob("*.py")):
        for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
            names = [alias.name for alias in node.names] if isinstance(node, ast.Import) else []
            names += [node.module or ""] if isinstance(node, ast.ImportFrom) else []
            if any(name.split(".")[0] in ("sqlite3", "sqlite_utils") for name in names):
                found.append(path.relative_to(PACKAGE).as_posix())
    assert found
    assert all(name.startswith("book/") or name in SQLITE_ELSEWHERE for name in found), found


@pytest.mark.parametrize(
    ("name", "line", "bad"),
    [
        ("commands/verify.py", "data = book_path.read_bytes()", True),
        ("commands/verify.py", "with open(args.book, 'rb') as handle: pass", True),
        ("screens/app.py", "shutil.copy(self.book.path, target)", True),
        ("occupy/recorder.py", "os.open(str(book) + '-wal', 0)", True),
        ("book/store.py", "self.path.open('rb')", True),
        ("book/store.py", "shutil.copyfile(path, other)", True),
        ("commands/verify.py", "book = Book.open(path, clock=clock)", False),
        ("commands/certify.py", "out.write_bytes(data)", False),
        ("book/foreign.py", "shutil.copyfile(book, other)", False),
    ],
)
def test_the_scan_sees_what_it_should(name: str, line: str, bad: bool) -> None:
    assert bool(offences(name, line)) is bad
