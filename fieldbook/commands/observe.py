"""`fieldbook observe`: record one occupation without the screen, or end the open one."""

from __future__ import annotations

import re
import threading
from pathlib import Path

import click

from fieldbook.clock import SystemClock
from fieldbook.commands.output import Progress, line, note, write_json
from fieldbook.commands.signing import chosen, key_option, signed_tree
from fieldbook.commands.words import quality_words
from fieldbook.errors import ExitCode, FieldbookError, UsageError
from fieldbook.model.canonical import Tree
from fieldbook.model.recorder import RecorderState
from fieldbook.signing.signer import Signer

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
@key_option
@click.option("--json", "as_json", is_flag=True, help="The result as JSON on stdout.")
def command(
    book: Path,
    session_path: Path | None,
    link_text: str | None,
    duration: str | None,
    key_path: Path | None,
    *,
    new: bool,
    end: bool,
    as_json: bool,
) -> int:
    """Parse, call, tell."""
    limit_s = None if duration is None else _seconds(duration)
    if end:
        if new or duration:
            raise UsageError("--end goes with neither --new nor --for.", "End first, then record.")
        return _end(book, session_path, key_path, as_json=as_json)
    if session_path is None:
        raise UsageError("A session file is needed.", "Name it with --session SESSION.toml.")
    tree, interrupted = _observe(book, session_path, link_text, limit_s, key_path, new=new)
    if as_json:
        write_json(tree)
    else:
        _tell(tree)
    if interrupted:
        note("Stopped. Everything received is committed; the same command takes the occupation up again.")
        return int(ExitCode.INTERRUPTED)
    return int(ExitCode.OK)


def _observe(
    book: Path, session_path: Path, link_text: str | None, limit_s: float | None, key_path: Path | None, *, new: bool
) -> tuple[Tree, bool]:
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
    choice = chosen(session.job.observer, key_path)
    stop, progress = threading.Event(), Progress()
    try:
        with StopSignals(stop):
            result = observe(
                book,
                Wish(session, address, limit_s, new, choice.signer),
                SystemClock(),
                stop,
                on_start=choice.say,
                on_state=lambda state: progress.show(_words(state)),
            )
    finally:
        progress.close()
    signer = _signed(book, choice.signer)
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
        "signed": signed_tree(signer),
    }
    return tree, result.ended_by is None and stop.is_set()


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
    for finding in tree["findings"]:
        line(f"finding {finding['code']} ({finding['severity']}): {finding['text']}")


def _words(state: RecorderState) -> str:
    fix = quality_words(state.quality) if state.epochs else "no epoch yet"
    return f"{state.mark}  {state.epochs} epochs  {fix}  {state.fix_utc or ''}  link {state.link_state}"
