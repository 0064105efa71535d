"""Which occupation a session belongs to: the open one taken up again, a new one, or a refusal.

Everything is judged before anything is written. `plan_occupation` only reads; `enter` writes what was planned;
`begin_occupation` does both. The rules are those of the contract, section 1, 'Occupations':

    an occupation is open, same mark and set-up         it is taken up again
    an occupation is open, other mark or set-up         refused, unless `new`: then the open one is ended first
    a file already recorded (SHA-256 of its bytes)      refused
    a file whose fix times overlap another occupation   refused; a live link is recorded with a finding `overlap`
    a file taken up again that is not the same file     refused
"""

from __future__ import annotations

import hashlib
from dataclasses import dataclass
from pathlib import Path

from fieldbook.book.lock import held
from fieldbook.book.store import Book
from fieldbook.clock import Clock, SystemClock
from fieldbook.errors import BookError, UsageError
from fieldbook.links.address import LinkAddress, parse_link
from fieldbook.model.canonical import Tree
from fieldbook.model.session import Session
from fieldbook.model.state import BookState, Occupation
from fieldbook.nmea.decoder import DecoderOptions
from fieldbook.occupy.ending import end_directly
from fieldbook.occupy.file_scan import FileScan, scan_file
from fieldbook.occupy.rebuild import session_decoder_options
from fieldbook.occupy.spans import Claimed, claimed_times
from fieldbook.settings.session import session_from_tree
from fieldbook.settings.user import with_user_class
from fieldbook.signing.in_book import signed_by
from fieldbook.signing.signer import Signer

# What may differ between the session of an open occupation and the one it is taken up with: a port changes its
# name when it is plugged in again, and a moved file is still recognised by its bytes. What was read from the metal is an
# observation, not a set-up: who takes the occupation up need not type it as the first did. A geoid file exchanged since
# changes nothing of an occupation that began with the other one.
FREE_KEYS = frozenset({"receiver.link", "setup.inscription_read", "frame.geoid_sha256"})


@dataclass(frozen=True)
class Plan:
    """What will be written, once everything has been judged."""

    session: Session
    address: LinkAddress
    resume: int | None  # number of the open occupation to go on with
    end_first: int | None  # number of the open occupation that `new` ends


def plan_occupation(book: Book | None, session: Session, address: LinkAddress, *, new: bool = False) -> Plan:
    """Judge whether and how this session may be recorded into this book (None: a book that is not there yet).

    Raises:
        UsageError: another mark or set-up is open, the same file twice, an overlap, a changed file.
        LinkError: a link file that is missing, empty, or holds no valid sentence.
    """
    state = book.state() if book is not None else None
    opened = state.open_occupation if state is not None else None
    resume = None
    if book is not None and opened is not None and not new:
        _must_match(book, opened, session, address)
        resume = opened
    else:
        # a new occupation takes the user's own figures of this receiver along; a settings file that is wrong refuses here
        session = session_from_tree(with_user_class(session.tree))
    if not address.live:
        _judge_file(book, state, session, address, resume)
    return Plan(
        session=session,
        address=address,
        resume=None if resume is None else resume.number,
        end_first=opened.number if opened is not None and new else None,
    )


def enter(book: Book, plan: Plan, clock: Clock, signer: Signer | None = None) -> int:
    """Write what was planned, signed if there is a key; returns the number of the occupation."""
    if plan.resume is not None:
        return plan.resume
    if plan.end_first is not None:
        end_directly(book, plan.end_first, clock, by="new occupation")
    session = plan.session
    observer, mark = session.job.observer, session.tree["mark"]
    new_mark = book.state().marks.get(session.mark.name) != mark
    number = _next_number(book)
    body: Tree = {
        "occupation": number,
        "mark": session.mark.name,
        "session": session.tree,
        "link": plan.address.text,
        "simulated": plan.address.kind == "sim",
    }
    with signed_by(book, signer):
        if new_mark:
            book.append("mark", mark, observer)
        book.append("occupation", body, observer)
    return number


def begin_occupation(
    book: Book,
    session: Session,
    link_text: str,
    *,
    new: bool = False,
    base_dir: Path | None = None,
    signer: Signer | None = None,
) -> tuple[int, bool]:
    """The occupation to record into, and whether it is one that is taken up again.

    Args:
        book: open for writing; nobody records into it.
        session: what is known before the first byte.
        link_text: address of the link, relative to `base_dir` (the current folder if None).
        new: end the open occupation first, if there is one.
        signer: key of the observer.

    Raises:
        UsageError, LinkError: as `plan_occupation`; nothing is written then.
        BookError: the occupation that `new` would end is being recorded.
    """
    address = parse_link(link_text, base_dir or Path.cwd())
    plan = plan_occupation(book, session, address, new=new)
    if plan.end_first is not None and held(book.path):
        raise BookError(
            f"A recorder is recording occupation {plan.end_first}.", "End that occupation first.", code="locked"
        )
    return enter(book, plan, SystemClock(), signer), plan.resume is not None


def _next_number(book: Book) -> int:
    used = [entry.body["occupation"] for entry in book.entries() if entry.kind == "occupation"]
    return max(used, default=0) + 1


def _must_match(book: Book, opened: Occupation, session: Session, address: LinkAddress) -> None:
    """The open occupation and the session must be the same mark and set-up.

    Raises:
        UsageError: they are not; the keys that differ are named.
    """
    remedy = "End it with `fieldbook entry BOOK end`, or begin another one with --new."
    if opened.mark != session.mark.name:
        raise UsageError(
            f"Occupation {opened.number} of {opened.mark} is open; this session is of {session.mark.name}.",
            remedy,
            code="other_occupation_open",
        )
    as_begun = next(
        entry.body["session"]
        for entry in book.entries()
        if entry.kind == "occupation" and entry.body["occupation"] == opened.number
    )
    differing = min((_differing(tree, session.tree) for tree in (as_begun, opened.session.tree)), key=len)
    if differing:
        raise UsageError(
            f"Occupation {opened.number} of {opened.mark} is open with another set-up: {', '.join(differing)} differ.",
            f"{remedy} A change of an open one is an entry: `fieldbook entry BOOK setup` or `height`.",
            code="other_occupation_open",
        )
    was_live = not opened.link.startswith("file:")
    if was_live != address.live:
        raise UsageError(
            f"Occupation {opened.number} is open on {opened.link} and cannot go on from {address.text}.",
            remedy,
            code="other_occupation_open",
        )


def _differing(stored: Tree, given: Tree) -> list[str]:
    """Dotted keys in which two session trees differ."""
    names = []
    for table in sorted({*stored, *given}):
        left, right = stored.get(table, {}), given.get(table, {})
        names += [
            f"{table}.{key}"
            for key in sorted({*left, *right})
            if left.get(key) != right.get(key)
            and f"{table}.{key}" not in FREE_KEYS
            and not _from_user(table, key, given)
        ]
    return names


def _from_user(table: str, key: str, given: Tree) -> bool:
    """A class of fix that was taken from the user's settings when the occupation began is in no session file."""
    return (table, key) == ("receiver", "class") and "class" not in given.get("receiver", {})


def _judge_file(
    book: Book | None,
    state: BookState | None,
    session: Session,
    address: LinkAddress,
    resume: Occupation | None,
) -> None:
    number = None if resume is None else resume.number
    claimed = claimed_times(book, session, besides=number) if book is not None else []
    recorded_bytes, recorded_hash = _recorded(book, number)
    scan = scan_file(address, _options(session, resume), prefix_bytes=recorded_bytes, with_times=bool(claimed))
    if number is not None and scan.prefix_sha256 != recorded_hash:
        raise UsageError(
            f"{address.text} is not the file that occupation {number} began with: its first {recorded_bytes}"
            " bytes differ.",
            "Name the same file, or begin another occupation with --new.",
            code="file_changed",
        )
    if state is not None:
        _refuse_same_file(state, scan, address)
    _refuse_overlap(claimed, scan, address)


def _options(session: Session, resume: Occupation | None) -> DecoderOptions:
    talker = session.receiver.talker if resume is None else resume.talker
    return session_decoder_options(session, talker)


def _recorded(book: Book | None, number: int | None) -> tuple[int, str]:
    total, whole = 0, hashlib.sha256()
    if book is not None and number is not None:
        for data in book.received(number):
            total += len(data)
            whole.update(data)
    return total, whole.hexdigest()


def _refuse_same_file(state: BookState, scan: FileScan, address: LinkAddress) -> None:
    for other in state.occupations.values():
        if not other.open and other.received_sha256 == scan.sha256:
            raise UsageError(
                f"{address.text} is already in this book: occupation {other.number} of {other.mark} received"
                " the same bytes.",
                "The same file twice is not two occupations; name another file.",
                code="same_file",
            )


def _refuse_overlap(claimed: list[Claimed], scan: FileScan, address: LinkAddress) -> None:
    for other in claimed:
        if scan.times_utc_ms is not None and other.overlaps(scan.times_utc_ms):
            raise UsageError(
                f"The fix times of {address.text} overlap those of {other}.",
                "One receiver cannot be twice at the same time: check which file belongs to which set-up.",
                code="overlap",
            )
