"""A book into the register: only after it was verified, only if it is the same book as before, and never in part.

Order: head -> verified by the caller's audit -> read and reduced -> still the same head? -> is it known? -> one transaction.
Outcomes: added, updated (a later state of a known book), unchanged, older (the register holds a later state), refused.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

from fieldbook.clock import Clock
from fieldbook.errors import BookError, ReductionError, UsageError
from fieldbook.model.canonical import Tree
from fieldbook.occupy.verifying import Verified

from .evidence import Evidence, evidence_from_tree
from .fold import HeldBook, RegisterState, prefix_of
from .from_book import ReadBook, Unreachable, head_of, line_of, read_book
from .store import Register

Verify = Callable[[Path], Sequence[Verified]]
MOST_NAMED = 5
SAME_M = 1e-4  # a coordinate that moved by less did not change


@dataclass(frozen=True)
class Outcome:
    """What became of one book. outcome: "added", "updated", "unchanged", "older", "refused"; the last with a code.

    text: one sentence; details: what changed, or what does not hold; remedy: of a refusal.
    """

    path: str
    outcome: str
    text: str
    code: str = ""
    remedy: str = ""
    book: str | None = None
    head_seq: int | None = None
    entry: int | None = None
    occupations: int = 0
    details: tuple[str, ...] = ()

    @property
    def refused(self) -> bool:
        """Whether the register does not hold what the file says."""
        return self.outcome == "refused"


def add_book(register: Register, path: Path, *, by: str, clock: Clock, verify: Verify) -> Outcome:
    """Add one book, or its later state. Every refusal is an `Outcome` and leaves the register as it was.

    Args:
        verify: every finding of `fieldbook verify` on a book; one that does not hold refuses it.

    Raises:
        BookError: the register itself cannot be written.
        UsageError: nobody is named.
    """
    if not by.strip():
        raise UsageError("Whoever adds books must be named.", "Give --by NAME.", code="no_name")
    name = str(path)
    try:
        before = head_of(path, clock)
        wrong = [item for item in verify(path) if not item.holds]
        if wrong:
            return _does_not_hold(name, wrong, before[0])
        known = _known(register.state(), before)
        if known is not None:
            return _outcome_known(name, known, before)
        read = read_book(path, clock)
    except (BookError, UsageError, ReductionError, Unreachable) as error:
        return Outcome(name, "refused", error.text, error.code, error.remedy)
    if (read.id, read.head_seq, read.head_hash) != before:
        return Outcome(
            name, "refused", "The book was written to while it was verified.", "being_written",
            "Add it again when the occupation has ended.", read.id,
        )  # fmt: skip
    held = register.state().books.get(read.id)
    refusal = _refusal(register, read, held, name)
    if refusal is not None:
        return refusal
    changes = [] if held is None else _changes(register, held, read)
    with register.transaction():
        entry = register.append("added", _body(register, read, held, path, changes), by)
    outcome = "added" if held is None else "updated"
    failed = [f"occupation {item['occupation']} of {item['mark']}: not reduced. {item['text']}" for item in read.failed]
    text = f"{len(read.occupations)} occupations of {len(read.marks)} marks, entry {read.head_seq} of the book"
    return Outcome(
        name, outcome, text, "", "", read.id, read.head_seq, entry.seq, len(read.occupations), (*changes, *failed)
    )


def _known(state: RegisterState, head: tuple[str, int, str]) -> HeldBook | None:
    held = state.books.get(head[0])
    return held if held is not None and held.heads.get(head[1]) == head[2] else None


def _outcome_known(name: str, held: HeldBook, head: tuple[str, int, str]) -> Outcome:
    """A state that was added before: nothing to reduce."""
    count = len(held.occupations)
    if head[1] == held.head_seq:
        text = f"in the register since entry {held.entry.seq}, nothing new"
        return Outcome(name, "unchanged", text, book=held.id, head_seq=head[1], entry=held.entry.seq, occupations=count)
    return _older(name, held, head[1])


def _older(name: str, held: HeldBook, seq: int) -> Outcome:
    text = f"an earlier state (entry {seq}); the register holds entry {held.head_seq} of this book"
    count = len(held.occupations)
    return Outcome(name, "older", text, book=held.id, head_seq=seq, entry=held.entry.seq, occupations=count)


def _does_not_hold(name: str, wrong: Sequence[Verified], book: str) -> Outcome:
    details = tuple(f"{item.where}: {item.text}" for item in wrong[:MOST_NAMED])
    if len(wrong) > MOST_NAMED:
        details = (*details, f"and {len(wrong) - MOST_NAMED} more")
    halved = any("without its -wal" in item.text for item in wrong)
    return Outcome(
        name,
        "refused",
        f"The book does not hold: {wrong[0].text}",
        "copied_without_wal" if halved else "does_not_hold",
        "Ask for the file again, with its -wal or after the recorder has closed."
        if halved
        else "`fieldbook verify` says what does not hold; ask the party for an untouched copy.",
        book,
        details=details,
    )


def _refusal(register: Register, read: ReadBook, held: HeldBook | None, name: str) -> Outcome | None:
    """Another book under the same certificate prefix; or one identity with two contents; or an earlier state."""
    if held is None:
        prefix = prefix_of(read.id)
        other = next((book for book in register.state().books.values() if book.prefix == prefix), None)
        if other is None:
            return None
        return Outcome(
            name,
            "refused",
            f"Certificates of this book would begin with {prefix}, as those of book {other.id} ({other.path}) do.",
            "prefix_held",
            "Two books cannot share certificate numbers in one register: keep this one in another register.",
            read.id,
        )
    ours = next(iter(register.given([held.hashes])))[1]
    common = min(len(ours), len(read.hashes))
    if ours[:common] == read.hashes[:common]:
        return _older(name, held, read.head_seq) if len(read.hashes) <= len(ours) else None
    first = next(n for n in range(common // 32) if ours[32 * n : 32 * n + 32] != read.hashes[32 * n : 32 * n + 32]) + 1
    return Outcome(
        name,
        "refused",
        f"Two books with one identity ({read.id}): from entry {first} on this file says something else than the one added "
        f"from {held.path} by {held.entry.observer} on {held.entry.utc[:10]}.",
        "diverging",
        "A book was copied and both copies were written to. Find out which is the job's; the other is a book of its own "
        "only after a rescue (`fieldbook rescue`).",
        read.id,
        read.head_seq,
    )


def _body(register: Register, read: ReadBook, held: HeldBook | None, path: Path, changes: list[str]) -> Tree:
    known = {} if held is None else held.numbers
    number = register.state().next_number
    new = [name for name in read.marks if name not in known]
    return {
        "book": read.id,
        "path": str(path),
        "head_seq": read.head_seq,
        "head_hash": read.head_hash,
        "hashes": register.keep(read.hashes),
        "versions": read.versions,
        "occupations": [
            line_of(evidence, register.keep(own), register.keep(whole)) for evidence, own, whole in read.occupations
        ],
        "failed": list(read.failed),
        "marks": read.marks,
        "numbers": {name: number + place for place, name in enumerate(new)},
        "certificates": list(read.certificates),
        "changes": changes,
    }


# -- what a later state changed --------------------------------------------------------------------------------


def _changes(register: Register, held: HeldBook, read: ReadBook) -> list[str]:
    """One sentence per occupation, mark and certificate that is not as it was."""
    before = {item.occupation: evidence_from_tree(register.kept_tree(item.evidence)) for item in held.occupations}
    now = {evidence.occupation: evidence for evidence, _, _ in read.occupations}
    found = [f"occupation {n} of {now[n].mark} is new" for n in sorted(now.keys() - before.keys())]
    found += [
        f"occupation {n} of {before[n].mark} is gone: struck, or no longer to be reduced"
        for n in sorted(before.keys() - now.keys())
    ]
    for number in sorted(before.keys() & now.keys()):
        found += _changed(before[number], now[number])
    found += [f"mark {name} is new" for name in read.marks if name not in held.marks]
    found += [
        f"the description of mark {name} changed"
        for name, tree in read.marks.items()
        if name in held.marks and held.marks[name] != tree
    ]
    numbers = {item["number"] for item in held.certificates}
    for item in read.certificates:
        if item["number"] not in numbers:
            over = f", superseding {item['supersedes']}" if item["supersedes"] else ""
            found.append(f"certificate {item['number']} of {item['mark']} was issued{over}")
    return found


def _changed(one: Evidence, two: Evidence) -> list[str]:
    said = f"occupation {two.occupation} of {two.mark}"
    found = []
    if one.mark != two.mark:
        found.append(f"{said} was on {one.mark}")
    if one.open and not two.open:
        found.append(f"{said} has ended")
    if (moved := _moved_m(one, two)) is not None and moved > SAME_M:
        found.append(f"{said} moved by {1000 * moved:.1f} mm")
    elif one.place != two.place and moved is None:
        found.append(f"{said} is given in another frame, or its height came or went")
    if abs(one.plan_u95_m - two.plan_u95_m) > SAME_M:
        found.append(f"{said}: 95 % in plan {1000 * one.plan_u95_m:.1f} mm, now {1000 * two.plan_u95_m:.1f} mm")
    if not found and one != two:
        found.append(f"{said}: particulars changed")
    return found


def _moved_m(one: Evidence, two: Evidence) -> float | None:
    if one.place is None or two.place is None or one.place.xyz_m is None or two.place.xyz_m is None:
        return None
    if (one.place.frame, one.place.epoch) != (two.place.frame, two.place.epoch):
        return None
    squares = [(a - b) ** 2 for a, b in zip(one.place.xyz_m, two.place.xyz_m, strict=True)]
    return float(sum(squares) ** 0.5)
