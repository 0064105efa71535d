"""The facts of a certificate made again, from the book as it stood when the certificate was issued.

A certificate states far more than coordinates: uncertainty, readings, instruments, findings, what was not used. All of
it follows from the book up to the entry that the facts name as its head, so all of it can be made again and compared.
What cannot: another program or PROJ may print other figures; an occupation of the same mark that was still open at
that moment has grown since; epochs were decoded anew where a later entry changed the talker. Then nothing is said here.
"""

from __future__ import annotations

from fieldbook.book.as_of import book_as_of
from fieldbook.book.store import Book
from fieldbook.certificate.combined import WholeMarkEvidence, build_combined_facts
from fieldbook.certificate.facts import build_facts
from fieldbook.certificate.identity import changed_parts, comparable
from fieldbook.certificate.issue import program_versions
from fieldbook.certificate.repeats import repeats_of
from fieldbook.model.canonical import Tree
from fieldbook.model.entry import Entry
from fieldbook.occupy.reductions import reductions_of_mark
from fieldbook.occupy.whole_mark import whole_mark
from fieldbook.reduce.frames import versions


def head_problem(book: Book, entry: Entry) -> str:
    """Whether the chain still leads through the entry that a certificate was issued on; empty if it does."""
    stated = entry.body["facts"]["book"]
    seq, known = stated["head_seq"], stated["head_hash"]
    found = next((one.hash for one in book.entries() if one.seq == seq), None)
    if type(seq) is not int or seq >= entry.seq or found is None:
        return f"it says it was issued on entry {seq}, which does not come before it"
    return "" if found == known else f"it was issued on another chain: entry {seq} had the hash {str(known)[:12]}…"


def unlike_parts(book: Book, entry: Entry) -> list[str] | None:
    """Parts of a certificate's facts that come out otherwise; None if that cannot be judged.

    Raises:
        FieldbookError: it cannot be reduced, or the book of then not be folded.
    """
    facts = entry.body["facts"]
    made_by = _made_by()
    if any(facts["versions"].get(key) != value for key, value in made_by.items()):
        return None
    earlier = book_as_of(book, int(facts["book"]["head_seq"]))
    if _grown_since(book, earlier, str(entry.body["mark"])):
        return None
    again = _facts(earlier, entry, made_by)
    return changed_parts(comparable(facts), comparable(again), limit=6)


def _made_by() -> dict[str, str]:
    used = versions()
    return {"proj": used.proj, "epsg": used.epsg, "pyproj": used.pyproj, **program_versions()}


def _grown_since(book: Book, earlier: Book, mark: str) -> bool:
    """An occupation of the mark was open then, or its epochs were decoded anew since."""
    then = earlier.state()
    numbers = {occupation.number for occupation in then.of_mark(mark)}
    if any(then.occupations[number].open for number in numbers):
        return True
    entries = {entry.seq: entry for entry in book.entries()}
    since = [entry for seq, entry in entries.items() if seq > then.head_seq]
    struck = [entries[entry.body["seq"]] for entry in since if entry.kind == "strike"]
    return any(_redecodes(entry) for entry in [*since, *struck])


def _redecodes(entry: Entry) -> bool:
    """Whether an entry may change an option of the decoder: the talker, or that checksums may be missing."""
    return (entry.kind == "decision" and "talker" in entry.body) or (entry.kind == "setup" and "receiver" in entry.body)


def _facts(book: Book, entry: Entry, made_by: dict[str, str]) -> Tree:
    signed = entry.body["facts"]["sign_off"]
    sign_off = None if signed is None else f"{signed['name']}; {signed['licence']}"
    state = book.state()
    if entry.body["occupation"] is None:
        whole = whole_mark(book, str(entry.body["mark"]))
        members = [(one, reduced.reduction) for one, reduced in whole.members]
        evidence = WholeMarkEvidence(whole.result, whole.principal, whole.reduction, whole.trace, members)
        return build_combined_facts(state, evidence, sign_off=sign_off, versions=made_by)
    number = int(entry.body["occupation"])
    own, others = reductions_of_mark(book, number)
    repeats = repeats_of(own.reduction, [item.reduction for item in others])
    occupation = state.occupations[number]
    return build_facts(
        state, occupation, own.reduction, own.trace, sign_off=sign_off, repeats=repeats, versions=made_by
    )
