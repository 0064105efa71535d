"""`fieldbook observe`: record one occupation without the screen, or end the open one."""

from __future__ import annotations

import re
import threading
from pathlib import Path
from typing import TYPE_CHECKING

import click

from fieldbook.clock import SystemClock, utc_text
from fieldbook.commands.output import Progress, line, note, write_json
from fieldbook.commands.signing import chosen, key_option, signed_tree
from fieldbook.commands.words import quality_words
from fieldbook.errors import ExitCode, FieldbookError, UsageError
from fieldbook.model.canonical import Tree
from fieldbook.model.recorder import RecorderState
from fieldbook.signing.signer import Signer

if TYPE_CHECKING:
    from fieldbook.occupy.backup_thread import BackupStatus

SECONDS = {"s": 1, "m": 60, "h": 3600}


@click.command(
    "observe",
    help="Record one occupation into BOOK (made if it is not there). An open occupation of the same mark and set-up "
    "is taken up again. The end of a file and --for end the occupation; Ctrl+C and SIGTERM leave it open.",
)
@click.argument("book", type=click.Path(path_type=Path))
@click.option("--session", "session_path", type=click.Path(path_type=Path), help="Session file (TOML).")
@click.option("--link", "link_text", help="Link, instead of the one in the session file.")
@click.option("--for", "duration", help="End the occupation after this time: 90s, 15m, 2h.")
@click.option("--new", is_flag=True, help="End the open occupation, if any, and begin another one.")
@click.option("--end", "end", is_flag=True, help="End the open occupation and record nothing.")
@click.option(
    "--backup", type=click.Path(path_type=Path), help="Copies of the book while recording: a file or folder on a stick."
)
@key_option
@click.option("--json", "as_json", is_flag=True, help="The result as JSON on stdout.")
def command(
    book: Path,
    session_path: Path | None,
    link_text: str | None,
    duration: str | None,
    backup: Path | None,
    key_path: Path | None,
    *,
    new: bool,
    end: bool,
    as_json: bool,
) -> int:
    """Parse, call, tell."""
    limit_s = None if duration is None else _seconds(duration)
    if end:
        if new or duration or backup:
            raise UsageError("--end goes with neither --new, --for nor --backup.", "End first, then record.")
        return _end(book, session_path, key_path, as_json=as_json)
    if session_path is None:
        raise UsageError("A session file is needed.", "Name it with --session SESSION.toml.")
    tree, interrupted = _observe(book, session_path, link_text, limit_s, backup, key_path, new=new)
    if as_json:
        write_json(tree)
    else:
        _tell(tree)
    if interrupted:
        note("Stopped. Everything received is committed; the same command takes the occupation up again.")
        return int(ExitCode.INTERRUPTED)
    return int(ExitCode.OK)


def _observe(
    book: Path,
    session_path: Path,
    link_text: str | None,
    limit_s: float | None,
    backup: Path | None,
    key_path: Path | None,
    *,
    new: bool,
) -> tuple[Tree, bool]:
    from fieldbook.book.place import warnings_of_place
    from fieldbook.links.address import parse_link
    from fieldbook.occupy.foreground import Wish, observe
    from fieldbook.occupy.frame_check import check_session_frames
    from fieldbook.occupy.recorder import StopSignals
    from fieldbook.settings.session import load_session

    session = load_session(session_path)
    check_session_frames(session, session_path.resolve().parent)
    if link_text is not None:
        address = parse_link(link_text, Path.cwd())
    else:
        address = parse_link(session.receiver.link, session_path.absolute().parent)
    backup = _backup(backup, book)
    for warning in warnings_of_place(book):
        note(f"warning: {warning.text}")
    choice = chosen(session.job.observer, key_path)
    stop, progress = threading.Event(), Progress()
    try:
        with StopSignals(stop):
            result = observe(
                book,
                Wish(session, address, limit_s, new, backup, choice.signer),
                SystemClock(),
                stop,
                on_start=choice.say,
                on_state=lambda state: progress.show(_words(state)),
            )
    finally:
        progress.close()
    signer = _signed(book, choice.signer)
    if signer is not None and result.backup is not None:
        _copy_again(book, Path(result.backup.path))
    findings = list(result.findings)
    tree: Tree = {
        "schema": "fieldbook.observe/1",
        "book": str(book),
        "occupation": result.occupation,
        "mark": session.mark.name,
        "resumed": result.resumed,
        "ended_by": result.ended_by,
        "open": result.ended_by is None,
        "link": address.text,
        "epochs": {"heard": result.epochs, "with_fix": result.fixes},
        "received_bytes": result.received_bytes,
        "dropped_bytes": result.dropped_bytes,
        "counters": result.counters,
        "sentences": result.sentences,
        "findings": findings,
        "backup": _backup_tree(result.backup),
        "signed": signed_tree(signer),
    }
    return tree, result.ended_by is None and stop.is_set()


def _backup(wanted: Path | None, book: Path) -> Path | None:
    """Where copies go: as asked, else as the user's settings say; refused where something else stands there."""
    from fieldbook.book.backup import refuse_other, target_of
    from fieldbook.settings.user import user_backup

    place = wanted or user_backup()
    if place is not None:
        target = target_of(place, book)
        if book.exists():
            refuse_other(target, book)
        elif target.exists():
            raise UsageError(f"{target} exists already.", "Name another place for the copy.", code="backup_other")
    return place


def _copy_again(book: Path, target: Path) -> None:
    """The signature came after the recorder's last copy."""
    from fieldbook.book.backup import write_copy

    try:
        write_copy(book, target, pause_s=0.0)
    except FieldbookError as error:
        note(f"the copy lacks the last signature: {error.text}")


def _backup_tree(status: BackupStatus | None) -> Tree | None:
    if status is None:
        return None
    made = None if status.last_utc_ms is None else utc_text(status.last_utc_ms)
    return {"path": status.path, "made_utc": made, "problem": status.problem or None}


def _signed(book_path: Path, signer: Signer | None) -> Signer | None:
    """Sign what was recorded, now that the recorder is done; None where that did not come about."""
    from fieldbook.commands.open_book import writing
    from fieldbook.signing.in_book import sign_head

    if signer is None:
        return None
    try:
        with writing(book_path) as book:
            sign_head(book, signer)
    except FieldbookError as error:  # all is recorded, and can be signed later
        note(f"unsigned: {error.text} Sign it with `fieldbook key sign`.")
        return None
    return signer


def _end(book_path: Path, session_path: Path | None, key_path: Path | None, *, as_json: bool) -> int:
    from fieldbook.commands.open_book import reading
    from fieldbook.occupy.ending import request_end
    from fieldbook.settings.session import load_session

    session = load_session(session_path) if session_path is not None else None
    with reading(book_path) as book:
        opened = book.state().open_occupation
    if opened is None:
        raise UsageError(f"No occupation of {book_path} is open.", "Nothing is left to end.", code="none_open")
    if session is not None and session.mark.name != opened.mark:
        raise UsageError(
            f"The open occupation {opened.number} is of {opened.mark}, the session of {session.mark.name}.",
            "Leave --session out to end whatever is open.",
        )
    observer = session.job.observer if session else opened.observer
    choice = chosen(observer, key_path)
    request_end(book_path, opened.number, observer)
    choice.say()
    signer = _signed(book_path, choice.signer)
    with reading(book_path) as book:
        ended = book.state().occupations[opened.number]
        heard = next(
            entry.body["epochs"]
            for entry in book.entries()
            if entry.kind == "end" and entry.body["occupation"] == opened.number
        )
    tree: Tree = {
        "schema": "fieldbook.observe/1",
        "book": str(book_path),
        "occupation": ended.number,
        "mark": ended.mark,
        "resumed": False,
        "ended_by": ended.ended_by,
        "open": False,
        "link": ended.link,
        "epochs": {"heard": heard},
        "received_bytes": ended.received_bytes,
        "findings": [entry.body for entry in ended.findings],
        "signed": signed_tree(signer),
    }
    if as_json:
        write_json(tree)
    else:
        _tell(tree)
    return int(ExitCode.OK)


def _seconds(text: str) -> float:
    found = re.fullmatch(r"([0-9]{1,7})([smh])", text)
    if found is None or int(found.group(1)) == 0:
        raise UsageError(
            f"--for {text} is no time.", "Write a whole number with s, m or h, for example 15m.", code="duration"
        )
    return float(int(found.group(1)) * SECONDS[found.group(2)])


def _tell(tree: Tree) -> None:
    ended = f"ended by {tree['ended_by']}" if tree["ended_by"] else "open"
    line(
        f"occupation {tree['occupation']} of {tree['mark']}: {tree['epochs']['heard']} epochs,"
        f" {tree['received_bytes']} bytes, {ended}"
    )
    if tree.get("backup"):
        line(f"copy: {tree['backup']['path']}, {tree['backup']['problem'] or 'complete'}")
    for finding in tree["findings"]:
        line(f"finding {finding['code']} ({finding['severity']}): {finding['text']}")


def _words(state: RecorderState) -> str:
    fix = quality_words(state.quality) if state.epochs else "no epoch yet"
    return f"{state.mark}  {state.epochs} epochs  {fix}  {state.fix_utc or ''}  link {state.link_state}"
