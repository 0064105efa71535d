"""Everything the register holds behind one number, in one piece, for whoever has to judge a dispute years later.

Of a certificate's number: its revisions and who signed, the states of its book and who added them, and of every occupation the digest
of the received bytes, instruments, readings, findings, the rules met and not met, as its book had them. Of a published number:
the same of all its evidence. Of both: what was decided about these occupations and marks, and what was published from them.
"""

from __future__ import annotations

from typing import Any

from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree
from fieldbook.model.entry import Entry

from .fold import HeldBook, RegisterState, label_of
from .history import history, published_tree
from .store import Register

SCHEMA = "fieldbook.register.dispute/1"
NOT_IN_IT = (
    "the received bytes themselves: they are in the book, whose id and hash stand here; `fieldbook verify` makes every fact "
    "again from them",
    "who wrote what: names of entries in a register are typed",
)


def dispute_pack(register: Register, number: str) -> dict[str, Any]:
    """The pack of a certificate's or a published value's number, as JSON.

    Raises:
        UsageError: no such number.
        BookError: evidence is missing or damaged.
    """
    state = register.state()
    certificates = _revisions(state, number)
    if certificates is not None:
        book, chain = certificates
        wanted = next(item for item in chain if item["number"] == number)
        numbers = [wanted["occupation"]] if wanted["occupation"] is not None else list(wanted["occupations"] or [])
        keys = [(book.id, int(one)) for one in numbers]
        marks = {state.root_of(book.numbers[wanted["mark"]])}
    else:
        published = _published(state, number)
        chain = []
        keys = [(book_id, int(one)) for book_id, one, _ in published.body["evidence"]]
        marks = {state.root_of(int(published.body["mark"]))}
    return {
        "schema": SCHEMA,
        "number": number,
        "register": {"id": state.id, "head_seq": state.head_seq, "head": state.head_hash},
        "certificates": chain,
        "books": [_book(state, name) for name in dict.fromkeys(key[0] for key in keys)],
        "occupations": [_occupation(register, state, *key) for key in keys],
        "published": [published_tree(item) for mark in sorted(marks) for item in history(state, mark)],
        "decisions": [_decision(state, entry) for entry in state.entries if _concerns(state, entry, keys, marks)],
        "not_in_it": list(NOT_IN_IT),
    }


def _revisions(state: RegisterState, number: str) -> tuple[HeldBook, list[Tree]] | None:
    """The book of a certificate and all its revisions: same mark, same occupations' certificate chain, in order."""
    for book in state.books.values():
        found = next((item for item in book.certificates if item["number"] == number), None)
        if found is not None:
            own = [
                item
                for item in book.certificates
                if (item["mark"], item["occupation"]) == (found["mark"], found["occupation"])
            ]
            superseded = {item["supersedes"]: item["number"] for item in own if item["supersedes"]}
            return book, [{**item, "superseded_by": superseded.get(item["number"])} for item in own]
    return None


def _published(state: RegisterState, number: str) -> Entry:
    for entry in state.standing("published"):
        if entry.body["number"] == number:
            return entry
    raise UsageError(
        f'Neither a certificate nor a published value of this register bears the number "{number}".',
        "`fieldbook register list --json` and `register in-force --all` name them.",
        code="unknown_number",
    )


def _book(state: RegisterState, book: str) -> dict[str, Any]:
    """Every state of a book that was added, by whom and when."""
    states = [entry for entry in state.entries if entry.kind in ("added", "elsewhere") and entry.body["book"] == book]
    return {
        "id": book,
        "states": [
            {
                "entry": entry.seq,
                "added_utc": entry.utc,
                "by": entry.observer,
                "path": entry.body["path"],
                "head_seq": entry.body["head_seq"],
                "head": entry.body["head_hash"],
                "versions": entry.body["versions"],
                "changes": entry.body["changes"],
            }
            for entry in states
        ],
    }


def _occupation(register: Register, state: RegisterState, book: str, number: int) -> dict[str, Any]:
    """As the latest state holds it; where it is gone, as the last state that held it did."""
    held, entry = None, None
    for one in state.entries:
        if one.kind in ("added", "elsewhere") and one.body["book"] == book:
            found = next((item for item in one.body["occupations"] if int(item["occupation"]) == number), None)
            held, entry = (found, one) if found is not None else (held, entry)
    if held is None or entry is None:
        return {"occupation": label_of(book, number), "held": False}
    evidence, whole = register.kept_tree(held["evidence"]), register.kept_tree(held["reduction"])
    still = any(item.key == (book, number) for item in state.occupations())
    leave = whole.get("leave") or {}
    lines = leave.get("lines") or []
    return {
        "occupation": label_of(book, number),
        "held": still,
        "as_of_entry": entry.seq,
        "mark": held["mark"],
        "started": held["started"],
        "ended": held["ended"],
        "received_sha256": held["received_sha256"],
        "evidence_sha256": held["evidence"],
        "reduction_sha256": held["reduction"],
        "observer": evidence["observer"],
        "party": evidence["party"],
        "instruments": evidence["shares"],
        "stated": evidence.get("stated"),
        "place": evidence["place"],
        "antenna": whole.get("antenna"),
        "operation": whole.get("operation"),
        "epochs": whole.get("epochs"),
        "initialisations": whole.get("initialisations"),
        "uncertainty": whole.get("uncertainty"),
        "findings": whole.get("findings") or [],
        "rules_met": [line for line in lines if line["met"]],
        "rules_not_met": [line for line in lines if not line["met"]],
    }


def _concerns(state: RegisterState, entry: Entry, keys: list[tuple[str, int]], marks: set[int]) -> bool:
    body = entry.body
    if entry.kind in ("same", "different"):
        return bool({state.root_of(int(number)) for number in body["marks"]} & marks)
    if entry.kind in ("separate", "exclude"):
        return (body["book"], int(body["occupation"])) in keys
    if entry.kind in ("reset", "name"):
        return state.root_of(int(body["mark"])) in marks
    if entry.kind == "strike":
        struck = state.entries[int(body["seq"]) - 1]
        return _concerns(state, struck, keys, marks)
    return entry.kind == "frame"


def _decision(state: RegisterState, entry: Entry) -> dict[str, Any]:
    return {
        "entry": entry.seq,
        "utc": entry.utc,
        "by": entry.observer,
        "kind": entry.kind,
        "body": entry.body,
        "struck": entry.seq in state.struck,
    }
