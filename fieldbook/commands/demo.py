"""`fieldbook demo`: the whole job on the samples, from received bytes to verified certificates and to the office's register.

The samples are copied into the folder first and recorded from there, so that everything the books name stands beside
them. Nothing is overwritten: the folder must be new or empty.
"""

from __future__ import annotations

import shutil
import threading
from pathlib import Path
from typing import TYPE_CHECKING

import click

from fieldbook.clock import SystemClock
from fieldbook.commands.output import line, note
from fieldbook.errors import UsageError
from fieldbook.model.visible import file_stem

if TYPE_CHECKING:
    from fieldbook.reduce.occupation import Reduced

# book -> its occupations, in the order in which the party brought them home
BOOKS = {
    "kestrel-ridge": ("kestrel-ridge-1", "kestrel-ridge-2"),
    "saltpan": ("saltpan-1", "saltpan-2"),
}
# of another party, for the office: not certified, because it holds what an office has to find
SECOND_PARTY = {"northgate": ("northgate-1", "northgate-2", "northgate-3", "northgate-4")}
OFFICE = "O. Desk (sample)"
SIGN_OFF = "I. Nobody (sample); no licence, not for use"
FORMATS = ("pdf", "html", "json")
LIVE_LINK = "sim:two-inits?seed=7"


@click.command()
@click.option("--out", type=click.Path(path_type=Path), default=Path("fieldbook-demo"), help="Folder, new or empty.")
@click.option("--live", is_flag=True, help="Open the screen on a simulated receiver instead.")
def command(out: Path, live: bool) -> int | None:
    """Do the whole job on the samples: books, reductions, certificates, verify them, and the register of both parties."""
    _make_folder(out)
    samples = out / "sample_sessions"
    shutil.copytree(samples_folder(), samples, ignore=shutil.ignore_patterns("*.py", "__pycache__"))
    if live:
        return _live(out, samples)
    written: list[Path] = []
    for name, sessions in BOOKS.items():
        written += _one_book(out / f"{name}.book", [samples / session for session in sessions])
    line("Certificates of the sample marks, each verified with its book:")
    for path in written:
        line(f"  {path}")
    _office(out, samples)
    line(f"Look at one, or open a book: fieldbook open {out / 'kestrel-ridge.book'}")
    return None


def _office(out: Path, samples: Path) -> None:
    """Both parties' books into one register; what it asks is shown, and nothing is decided for anybody."""
    from fieldbook.commands.register_proposals import lines_of
    from fieldbook.commands.verify import book_findings
    from fieldbook.register.adding import add_book
    from fieldbook.register.checks import check_register
    from fieldbook.register.identity import proposals
    from fieldbook.register.store import Register
    from fieldbook.signing.keyring import trust

    for name, sessions in SECOND_PARTY.items():
        for session in sessions:
            _record(out / f"{name}.book", samples / session)
    known, path, clock = trust(), out / "office.register", SystemClock()
    with Register.create(path, clock=clock, by=OFFICE) as register:
        for name in (*BOOKS, *SECOND_PARTY):
            outcome = add_book(
                register, out / f"{name}.book", by=OFFICE, clock=clock, verify=lambda one: book_findings(one, known)
            )
            if outcome.refused:
                raise UsageError(f"{outcome.path}: {outcome.text}", "Report this: it is a fault of the program.")
        line()
        line(f"The office's register of both parties, {path}. What it asks:")
        for item in proposals(register.state()):
            for text in lines_of(item):
                line(f"  {text}")
        line("What is not in order:")
        for trouble in check_register(register):
            if trouble.code not in ("open_question", "one_occupation"):
                line(f"  {trouble.severity} {trouble.name}: {trouble.text}")
        line()


def samples_folder() -> Path:
    """The samples as installed with the package, or those of the repository this runs from.

    Raises:
        UsageError: neither is there.
    """
    import fieldbook

    package = Path(fieldbook.__file__).resolve().parent
    for folder in (package / "sample_sessions", package.parent / "sample_sessions"):
        if (folder / "kestrel-ridge-1" / "session.toml").is_file():
            return folder
    raise UsageError("The samples are not installed.", "Install Fieldbook again from its repository.")


def _make_folder(out: Path) -> None:
    if out.exists() and (not out.is_dir() or any(out.iterdir())):
        raise UsageError(f"{out} exists and is not empty.", "Name another folder with --out; nothing is overwritten.")
    out.mkdir(parents=True, exist_ok=True)


def _one_book(path: Path, sessions: list[Path]) -> list[Path]:
    from fieldbook.book.store import Book
    from fieldbook.commands.reduction_text import reduction_lines
    from fieldbook.occupy.reductions import reduce_book

    for session in sessions:
        _record(path, session)
    with Book.open(path, clock=SystemClock()) as book:
        reduced, failed = reduce_book(book)
    for item in reduced:
        for text in reduction_lines(item.reduction):
            line(text)
        line()
    for failure in failed:
        note(f"{failure.mark}, occupation {failure.occupation}: {failure.error}")
    written: list[Path] = []
    for mark in dict.fromkeys(item.reduction.mark for item in reduced):
        written += _certify(path, mark, _chosen(path, mark, reduced))
    return written


def _chosen(path: Path, mark: str, reduced: list[Reduced]) -> int | None:
    """None = all occupations of the mark together, where they combine; else the one with the smallest 95 % circle."""
    from fieldbook.book.store import Book
    from fieldbook.occupy.whole_mark import whole_mark

    try:
        with Book.open(path, clock=SystemClock()) as book:
            whole_mark(book, mark)
    except UsageError as why:
        note(f"{mark}: certified from one occupation. {why.text}")
    else:
        return None
    own = [item.reduction for item in reduced if item.reduction.mark == mark]
    return min(own, key=lambda item: item.uncertainty.horizontal95_m).occupation


def _record(path: Path, folder: Path) -> None:
    from fieldbook.links.address import parse_link
    from fieldbook.occupy.foreground import Wish, observe
    from fieldbook.settings.session import load_session

    session = load_session(folder / "session.toml")
    address = parse_link(session.receiver.link, folder)
    result = observe(path, Wish(session, address), SystemClock(), threading.Event())
    note(f"{path.name}: {session.mark.name} recorded from {folder.name}, occupation {result.occupation}")


def _certify(path: Path, mark: str, number: int | None) -> list[Path]:
    from fieldbook.book.store import Book
    from fieldbook.certificate.verify_file import verify_certificate
    from fieldbook.issuing import issue

    written: list[Path] = []
    with Book.open(path, clock=SystemClock(), write=True) as book:
        for ending in FORMATS:
            out = path.parent / f"{file_stem(mark)}.{ending}"
            issued = issue(book, mark, out, occupation=number, sign_off=SIGN_OFF)
            if not all(holds for holds, _ in verify_certificate(out, book)):
                raise UsageError(f"{out} does not verify.", "Report this: it is a fault of the program.")
            written.append(issued.path)
    return written


def _live(out: Path, samples: Path) -> int:
    from fieldbook.book.store import Book
    from fieldbook.model.canonical import Tree
    from fieldbook.screens.app import run
    from fieldbook.settings.session import load_session, session_from_tree

    session = load_session(samples / "kestrel-ridge-1" / "session.toml")
    tree: Tree = {**session.tree, "receiver": {**session.tree["receiver"], "link": LIVE_LINK}}
    tree["setup"] = {key: value for key, value in session.tree["setup"].items() if key != "height"}
    checked = session_from_tree(tree)
    path = out / "live.book"
    Book.create(path, clock=SystemClock(), observer=checked.job.observer, session_tree=checked.tree).close()
    return run(path)
