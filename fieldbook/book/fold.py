"""Entries -> the state of the job (model/state.py). There is no second truth.

Two passes. The first finds which entries are struck: a strike counts unless it is itself struck by a later strike
that counts, so strikes are looked at from the last to the first. The second applies what is left, in order.
Sessions are built by `settings` from the stored tree, once per tree (they are frozen), so folding ten thousand
entries takes a fraction of a second.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Callable, Iterable, Sequence
from datetime import date
from decimal import Decimal, InvalidOperation
from functools import lru_cache
from typing import Any

from fieldbook.errors import BookError, FieldbookError
from fieldbook.model.canonical import Tree, canonical_json
from fieldbook.model.entry import GENESIS, Entry
from fieldbook.model.session import METRES_PER_UNIT, HeightReading, Session
from fieldbook.model.state import BookState, Occupation

from .chain import damaged_entry
from .kinds import STRIKABLE


def session_from_tree(tree: Tree) -> Session:
    """The session of a stored tree, by the checks of `settings`."""
    from fieldbook.settings.session import session_from_tree as build

    return build(tree)


def merged(tree: Tree, changes: Tree) -> Tree:
    """A session tree with the changes of a `setup` entry, by the rules of `settings`."""
    from fieldbook.settings.session import merged as merge

    return merge(tree, changes)


def struck_by(entries: Iterable[Entry]) -> dict[int, Entry]:
    """{struck seq: the strike that counts}."""
    strikes = [entry for entry in entries if entry.kind == "strike"]
    found: dict[int, Entry] = {}
    for strike in reversed(strikes):
        target = strike.body.get("seq")
        if strike.seq not in found and isinstance(target, int) and 0 < target < strike.seq:
            found.setdefault(target, strike)
    return found


def fold(entries: Sequence[Entry]) -> BookState:
    """The state of the book.

    Raises:
        BookError: no first entry `book`, or an entry that does not make sense (damaged; named by its seq).
    """
    if not entries or entries[0].kind != "book":
        raise BookError("The book has no first entry.", "`fieldbook verify` says what still holds.", code="damaged")
    first, last = entries[0], entries[-1]
    state = BookState(str(first.body.get("id", "")), last.seq, last.hash or GENESIS, first.utc, None)
    folder = _Folder(state, struck_by(entries))
    for entry in entries:
        folder.feed(entry)
    folder.finish()
    return state


class _Folder:
    """Applies entries to a state. `trees` are the session trees with their `setup` entries merged in."""

    def __init__(self, state: BookState, struck: dict[int, Entry]) -> None:
        self.state = state
        self.kinds: dict[int, str] = {}
        self.struck = struck
        self.trees: dict[int, Tree] = {}
        self.decided: dict[int, Entry] = {}  # occupation -> decision on its date
        self.changed: dict[int, Entry] = {}  # occupation -> the last entry that changed its tree
        self.late: dict[int, list[HeightReading]] = {}

    def feed(self, entry: Entry) -> None:
        """Apply one entry, or file it as struck."""
        strike = self.struck.get(entry.seq)
        if strike is not None and entry.kind in STRIKABLE:
            self.state.strikes[entry.seq] = strike
            occupation = self.state.occupations.get(_number(entry.body.get("occupation")))
            if occupation is not None:
                occupation.struck.append(entry)
            return
        action = _ACTIONS.get(entry.kind)
        if action is None:
            return  # kinds without effect on the state, and kinds of a later version
        try:
            action(self, entry)
        except (KeyError, TypeError, ValueError, InvalidOperation) as error:
            raise damaged_entry(entry.seq, f"'{entry.kind}' does not make sense ({error})") from error

    def occupation(self, entry: Entry) -> Occupation | None:
        """The occupation an entry belongs to; None if that occupation was struck or never begun."""
        return self.state.occupations.get(_number(entry.body["occupation"]))

    def finish(self) -> None:
        """Build the sessions of changed set-ups and put the heights in order."""
        for number, occupation in self.state.occupations.items():
            if number in self.changed:
                occupation.session = _session(self.changed[number], self.trees[number])
            session = occupation.session
            occupation.heights = [*session.setup.heights, *self.late.get(number, [])]
            occupation.session = dataclasses.replace(session, setup=dataclasses.replace(session.setup, heights=()))
            if occupation.datum_confirmed is None:
                occupation.datum_confirmed = session.receiver.datum_confirmed
            if occupation.talker is None:
                occupation.talker = session.receiver.talker


def _number(value: Any) -> int:
    return value if type(value) is int else -1


def _session(entry: Entry, tree: Tree) -> Session:
    try:
        return _built(canonical_json(tree), session_from_tree)
    except FieldbookError as error:
        raise damaged_entry(entry.seq, f"its session does not pass the checks ({error.text})") from error


@lru_cache(maxsize=256)
def _built(text: str, build: Callable[[Tree], Session]) -> Session:
    import json

    return build(json.loads(text))


def _begin(folder: _Folder, entry: Entry) -> None:
    body = entry.body
    number = _number(body["occupation"])
    session = _session(entry, body["session"])
    folder.trees[number] = body["session"]
    folder.state.occupations[number] = Occupation(
        number=number,
        mark=str(body["mark"]),
        session=session,
        entry_seq=entry.seq,
        started_utc=entry.utc,
        observer=entry.observer,
        link=str(body["link"]),
        simulated=bool(body["simulated"]),
    )
    folder.state.marks.setdefault(str(body["mark"]), body["session"].get("mark") or {"name": body["mark"]})


def _end(folder: _Folder, entry: Entry) -> None:
    occupation = folder.occupation(entry)
    if occupation is not None:
        occupation.ended_by = str(entry.body["by"])
        occupation.ended_utc = entry.utc
        occupation.received_bytes = int(entry.body["received_bytes"])
        occupation.received_sha256 = str(entry.body["received_sha256"])


def _origin(folder: _Folder, entry: Entry) -> None:
    occupation = folder.occupation(entry)
    if occupation is not None:
        occupation.origin_e8min = int(entry.body["latitude_e8min"]), int(entry.body["longitude_e8min"])


def _date(folder: _Folder, entry: Entry) -> None:
    occupation = folder.occupation(entry)
    if occupation is not None and occupation.number not in folder.decided:
        occupation.day0 = date.fromisoformat(entry.body["date"])
        occupation.day0_source = str(entry.body["source"])


def _height(folder: _Folder, entry: Entry) -> None:
    occupation = folder.occupation(entry)
    if occupation is None:
        return
    body = entry.body
    sigma = body.get("sigma_m")
    if body["unit"] not in METRES_PER_UNIT:
        raise ValueError(f"unit '{body['unit']}' is not known")
    folder.late.setdefault(occupation.number, []).append(
        HeightReading(
            method=body["method"],
            value=Decimal(body["value"]),
            unit=body["unit"],
            when=body["when"],
            at=body.get("at"),
            reader=body.get("reader"),
            time=body.get("time"),
            sigma_m=None if sigma is None else float(sigma),
            seq=entry.seq,
            tape_offset_m=None if body.get("tape_offset_m") is None else float(body["tape_offset_m"]),
        )
    )


def _setup(folder: _Folder, entry: Entry) -> None:
    occupation = folder.occupation(entry)
    if occupation is not None:
        changes = {key: value for key, value in entry.body.items() if key != "occupation"}
        folder.trees[occupation.number] = merged(folder.trees[occupation.number], changes)
        folder.changed[occupation.number] = entry


def _decision(folder: _Folder, entry: Entry) -> None:
    occupation = folder.occupation(entry)
    if occupation is None:
        return
    occupation.decisions.append(entry)
    body = entry.body
    if "date" in body:
        folder.decided[occupation.number] = entry
        occupation.day0 = date.fromisoformat(body["date"])
        occupation.day0_source = "decision"
    if "rollover_weeks" in body:
        occupation.rollover_weeks = int(body["rollover_weeks"])
    if "datum" in body:
        occupation.datum_confirmed = str(body["datum"])
    if "talker" in body:
        occupation.talker = str(body["talker"])
    if "initialisation" in body:
        occupation.initialisation_decisions[int(body["initialisation"])] = (
            bool(body["used"]),
            str(body["reason"]),
        )
    if "operation" in body:
        occupation.operation = _steps(body["operation"])
    if "accuracy_over_limit" in body:
        occupation.accuracy_over_limit = bool(body["accuracy_over_limit"])
    if "outside_area" in body:
        occupation.outside_area_accepted = bool(body["outside_area"])
    if "grid_file" in body:
        occupation.accepted_grid_files.append(str(body["grid_file"]))
    if "outside_hull" in body:
        occupation.outside_hull_accepted = bool(body["outside_hull"])


def _steps(value: Any) -> list[str]:
    """Steps of an operation: a list, or one text with commas (as `entry --set` gives it)."""
    if isinstance(value, str):
        return [step.strip() for step in value.split(",") if step.strip()]
    return [str(step) for step in value]


def _operation(folder: _Folder, entry: Entry) -> None:
    occupation = folder.occupation(entry)
    if occupation is not None:
        occupation.operation = _steps(entry.body["steps"]) or occupation.operation
        files = entry.body.get("files", {})
        occupation.grid_hashes |= {str(name): str(sha256) for name, sha256 in files.items()}


def _remark(folder: _Folder, entry: Entry) -> None:
    if entry.body.get("occupation") is None:
        folder.state.remarks.append(entry)
        return
    occupation = folder.occupation(entry)
    if occupation is not None:
        occupation.remarks.append(entry)


def _gap(folder: _Folder, entry: Entry) -> None:
    occupation = folder.occupation(entry)
    if occupation is not None:
        occupation.gaps.append(entry)


def _finding(folder: _Folder, entry: Entry) -> None:
    occupation = folder.occupation(entry)
    if occupation is not None:
        occupation.findings.append(entry)


def _mark(folder: _Folder, entry: Entry) -> None:
    folder.state.marks[str(entry.body["name"])] = entry.body


def _local_grid(folder: _Folder, entry: Entry) -> None:
    folder.state.local_grids[str(entry.body["name"])] = entry


def _offered(folder: _Folder, entry: Entry) -> None:
    tree = entry.body["tree"]
    folder.state.session = _session(entry, tree)
    mark = tree.get("mark")
    if isinstance(mark, dict) and mark.get("name"):
        folder.state.marks.setdefault(str(mark["name"]), mark)


def _document(folder: _Folder, entry: Entry) -> None:
    folder.state.documents.append(entry)


def _rendered(folder: _Folder, entry: Entry) -> None:
    folder.state.rendered.append(entry)


def _rescued(folder: _Folder, entry: Entry) -> None:
    body = entry.body
    spans = [*body["lost"], *body["damaged"], *([run["first"], run["last"]] for run in body["carried"])]
    numbers = [item[key] for item in body["occupations"] for key in ("occupation", "received_bytes", "unproven_bytes")]
    stated = [item["stated_bytes"] for item in body["occupations"] if item["stated_bytes"] is not None]
    if any(type(number) is not int for span in [*spans, numbers, stated] for number in span):
        raise ValueError("a number is none")
    if any(len(span) != 2 for span in spans) or not all(isinstance(item, dict) for item in body["certificates"]):
        raise ValueError("a list is not what it should be")
    if not all(key in body["from"] for key in ("id", "sha256", "head_hash", "end_known")):
        raise ValueError("it does not say what was rescued")
    if not all("whole" in item for item in body["occupations"]):
        raise ValueError("it does not say what is whole")
    folder.state.rescued = entry


_ACTIONS: dict[str, Callable[[_Folder, Entry], None]] = {
    "session": _offered,
    "mark": _mark,
    "local_grid": _local_grid,
    "occupation": _begin,
    "origin": _origin,
    "date": _date,
    "gap": _gap,
    "resumed": _gap,
    "end": _end,
    "height": _height,
    "setup": _setup,
    "remark": _remark,
    "decision": _decision,
    "finding": _finding,
    "operation": _operation,
    "certificate": _document,
    "draft": _document,
    "rendered": _rendered,
    "rescued": _rescued,
}
