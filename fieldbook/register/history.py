"""Published coordinates: each with number, date, evidence and successor. Nothing published is ever struck, only succeeded or withdrawn.

A publication is an entry `published` that freezes the coordinate, its covariance in two parts and the SHA-256 of every piece of
evidence. Its number is `<first eight digits of the register's id>-<mark>.<running>`. It is in force from its entry until the
next one of the mark, or a `withdrawn`.

Moved or re-observed? Occupations that are new are held against those of the predecessor, what both share left out: F in plan, t in
height, 5 % for both together (Bonferroni), as repeats within a book are (`check.repeats`). Significant: the mark moved, or one of
them is wrong; not significant: the same point, known better. Without new occupations the figure was only made anew.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import timedelta
from typing import Any

import numpy as np

from fieldbook.clock import utc_ms_of, utc_text
from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree, fixed
from fieldbook.model.entry import Entry
from fieldbook.reduce import frames
from fieldbook.reduce.combine import height_significance, linear_form, plan_significance, weights_of
from fieldbook.reduce.geodesy import enu_difference

from .combining import MarkValue
from .decisions import moment_of
from .evidence import Evidence, Place, evidence_from_tree
from .fold import Mark, RegisterState, prefix_of
from .members import Member, inputs_of, same_epoch
from .results import Row, rows_of
from .store import Register

LEVEL = 0.05 / 2  # two tests
SAME_M = 1e-6
DAY_MS = round(timedelta(days=1).total_seconds() * 1000)
MOVED, REOBSERVED, RECOMPUTED, FIRST, OTHER_FRAME = (
    "moved",
    "re-observed",
    "recomputed",
    "first",
    "other frame or epoch",
)


@dataclass(frozen=True)
class Change:
    """What a publication changed. Metres, new minus old; None where frames differ or there is no predecessor.

    verdict: "first", "re-observed", "moved", "recomputed", "other frame or epoch". Significances: probability of a larger
    difference of the new occupations from the old ones if the mark stood still.
    """

    verdict: str
    difference_enu_m: tuple[float, float, float | None] | None = None
    plan_significance: float | None = None
    height_significance: float | None = None


@dataclass(frozen=True)
class Published:
    """A published coordinate with its successor: the number that followed, or who withdrew it when."""

    entry: Entry
    number: str
    mark: int
    successor: str | None
    until_utc: str | None
    withdrawn: Entry | None

    @property
    def in_force(self) -> bool:
        """Whether it is the value of today."""
        return self.until_utc is None


@dataclass(frozen=True)
class Outcome:
    """What became of the wish to publish a mark: "published", "unchanged" or "refused", with the number or the reason."""

    mark: int
    name: str
    outcome: str
    text: str
    number: str | None = None
    change: Change | None = None


def history(state: RegisterState, mark: int) -> list[Published]:
    """All published coordinates of a mark, in order; of every number that is this mark today."""
    root = state.root_of(mark)
    found: list[Published] = []
    events = [e for e in state.standing("published", "withdrawn") if state.root_of(int(e.body["mark"])) == root]
    for place, entry in enumerate(events):
        if entry.kind != "published":
            continue
        following = events[place + 1] if place + 1 < len(events) else None
        successor = str(following.body["number"]) if following is not None and following.kind == "published" else None
        until = None if following is None else following.utc
        withdrawn = following if following is not None and following.kind == "withdrawn" else None
        found.append(Published(entry, str(entry.body["number"]), root, successor, until, withdrawn))
    return found


def in_force(state: RegisterState, mark: int, on: str | None = None) -> Published | None:
    """The value in force at the end of a day, or at a moment; now if None. None if there was none.

    Raises:
        UsageError: no date.
    """
    moment = None if on is None else end_of(on)
    for item in reversed(history(state, mark)):
        begun = moment is None or item.entry.utc < moment
        if begun:
            ended = item.until_utc is not None and (moment is None or item.until_utc < moment)
            return None if ended else item
    return None


def end_of(text: str) -> str:
    """The first moment after a day, or just after a full time: what an entry must come before.

    Raises:
        UsageError: no date.
    """
    ms = utc_ms_of(moment_of(text))
    return utc_text(ms + (DAY_MS if len(text) == 10 else 1))


def publish(register: Register, only: Sequence[int] | None, *, by: str, reason: str) -> list[Outcome]:
    """Publish marks, or all that have a coordinate; each an entry of its own, all in one transaction.

    A mark whose findings stop it is refused, one whose coordinate and evidence are those in force is left as it is.

    Raises:
        UsageError: nobody named, or no reason.
    """
    if not by.strip() or not reason.strip():
        raise UsageError("Who publishes, and why, must be said.", "Give --by and --reason.", code="no_reason")
    found = []
    with register.transaction():
        for row in rows_of(register, only=only):
            if row.value.place is None and only is None:
                continue
            found.append(_publish(register, row, by=by, reason=reason))
    return found


def _publish(register: Register, row: Row, *, by: str, reason: str) -> Outcome:
    value, mark, state = row.value, row.value.mark, register.state()
    if value.place is None or value.datum is None:
        return Outcome(mark.number, mark.name, "refused", "No occupation of it can be used.")
    stops = [item for item in value.findings if item.severity == "stop"]
    if stops:
        return Outcome(mark.number, mark.name, "refused", f"{stops[0].text}")
    known = history(state, mark.number)
    before = in_force(state, mark.number)
    body = body_of(state, row, len(known) + 1, reason)
    if before is not None and _same(before.entry.body, body):
        return Outcome(mark.number, mark.name, "unchanged", "in force with the same evidence", before.number)
    change = _change(register, value, before)
    body |= {"supersedes": None if before is None else before.number, "change": _change_tree(change)}
    register.append("published", body, by)
    return Outcome(mark.number, mark.name, "published", change_words(change), body["number"], change)


def withdraw(register: Register, mark: Mark, *, by: str, reason: str) -> Entry:
    """From now on no value of a mark is in force; why is told to whoever asks.

    Raises:
        UsageError: none is in force.
    """
    before = in_force(register.state(), mark.number)
    if before is None:
        raise UsageError(f"No value of {mark.name} (mark {mark.number}) is in force.", "There is nothing to withdraw.")
    return register.append("withdrawn", {"mark": mark.number, "number": before.number, "reason": reason}, by)


def body_of(state: RegisterState, row: Row, running: int | None, reason: str) -> Tree:
    """The frozen facts of a publication; without `running` they bear no number."""
    value, place = row.value, row.value.place
    assert place is not None  # noqa: S101 - the caller has looked
    assert value.datum is not None  # noqa: S101
    datum, height, local = value.datum, value.height, row.local
    return {
        "number": "" if running is None else f"{prefix_of(state.id)}-{value.mark.number}.{running}",
        "mark": value.mark.number,
        "name": value.mark.name,
        "place": {
            "frame": place.frame,
            "frame_name": place.frame_name,
            "epoch": fixed(place.epoch, 4),
            "lat_deg": fixed(place.lat_deg, 12),
            "lon_deg": fixed(place.lon_deg, 12),
            "h_m": fixed(place.h_m, 6),
            "xyz_m": None if place.xyz_m is None else [fixed(v, 6) for v in place.xyz_m],
        },
        "height": None
        if height is None
        else {
            "model": height.model,
            "model_sha256": height.model_sha256,
            "datum": height.datum,
            "undulation_m": fixed(height.undulation_m, 6),
            "orthometric_m": fixed(height.orthometric_m, 6),
            "vertical95_m": fixed(height.vertical95_m, 6),
        },
        "datum_accuracy": {
            "u_enu_m": [fixed(u, 7) for u in datum.u_enu_m],
            "horizontal95_m": fixed(datum.horizontal95_m, 6),
            "vertical95_m": fixed(datum.vertical95_m, 6),
            "ellipse95": [
                fixed(datum.ellipse95.major_m, 6),
                fixed(datum.ellipse95.minor_m, 6),
                fixed(datum.ellipse95.azimuth_deg, 2),
            ],
            "class": list(row.datum_class),
        },
        "between_accuracy": {
            "horizontal95_worst_m": fixed(local.horizontal_worst_m, 6),
            "vertical95_worst_m": fixed(local.vertical_worst_m, 6),
            "neighbours": sorted({n for line in local.lines for n in (line.first, line.second)} - {value.mark.number}),
            "class": list(row.between_class),
        },
        "cov_own_m2": _matrix(value.cov_own_m2),
        "cov_common_m2": _matrix(value.cov_common_m2),
        "method": value.method,
        "independence": value.independence,
        "evidence": [[m.held.book, m.held.occupation, m.held.evidence] for m in value.members],
        "reason": reason,
    }


def _matrix(rows: list[list[float]] | None) -> list[list[str | None]] | None:
    return None if rows is None else [[fixed(value, 18) for value in row] for row in rows]


def _same(old: Tree, new: Tree) -> bool:
    """The same evidence and the same figures to a micrometre; neighbours may have changed."""
    if old["evidence"] != new["evidence"] or old["name"] != new["name"]:
        return False
    one, two = old["place"], new["place"]
    if any(one[key] != two[key] for key in ("frame", "epoch")):
        return False
    moved = _apart(one, two)
    return moved is not None and max(abs(value or 0.0) for value in moved) <= SAME_M


def _apart(one: Tree, two: Tree) -> tuple[float, float, float | None] | None:
    """Second minus first, east north up; None in two frames or epochs."""
    epochs = [None if place["epoch"] is None else float(place["epoch"]) for place in (one, two)]
    if one["frame"] != two["frame"] or not same_epoch(*epochs):
        return None
    ellipsoid = frames.frame_info(str(one["frame"])).ellipsoid
    both = one["h_m"] is not None and two["h_m"] is not None
    ends = [(float(p["lat_deg"]), float(p["lon_deg"]), float(p["h_m"]) if both else 0.0) for p in (one, two)]
    east, north, up = (float(value) for value in enu_difference(ends[0], ends[1], ellipsoid))
    return east, north, up if both else None


def apart_m(stated: Tree, place: Place) -> tuple[float, float, float | None] | None:
    """A place minus a published one, east north up in metres; None in two frames or epochs, up None without heights."""
    now: Tree = {
        "frame": place.frame,
        "epoch": fixed(place.epoch, 4),
        "lat_deg": fixed(place.lat_deg, 12),
        "lon_deg": fixed(place.lon_deg, 12),
        "h_m": fixed(place.h_m, 6),
    }
    return _apart(stated, now)


def _change(register: Register, value: MarkValue, before: Published | None) -> Change:
    if before is None:
        return Change(FIRST)
    old = before.entry.body
    assert value.place is not None  # noqa: S101 - the caller has looked
    difference = apart_m(old["place"], value.place)
    if difference is None:
        return Change(OTHER_FRAME)
    known = {(book, occupation) for book, occupation, _ in old["evidence"]}
    fresh = [member for member in value.members if member.held.key not in known]
    earlier = _earlier(register, value, old)
    if not fresh or not earlier:
        return Change(RECOMPUTED, difference)
    plan_p, height_p = _significances(earlier, fresh)
    moved = plan_p < LEVEL or (height_p is not None and height_p < LEVEL)
    return Change(MOVED if moved else REOBSERVED, difference, plan_p, height_p)


def _earlier(register: Register, value: MarkValue, old: Tree) -> list[Member]:
    """The predecessor's occupations, from the evidence it froze, as far as they are given in the frame of today."""
    current = {member.held.key: member for member in value.members}
    some, place = value.members[0], value.place
    assert place is not None  # noqa: S101 - the caller has looked
    found = []
    for book, occupation, sha256 in old["evidence"]:
        one = current.get((book, occupation))
        if one is not None:
            found.append(one)
            continue
        evidence: Evidence = evidence_from_tree(register.kept_tree(sha256))
        there = evidence.place
        if there is not None and there.frame == place.frame and same_epoch(there.epoch, place.epoch):
            found.append(Member(some.held, evidence, there, evidence.budget))
    return found


def _significances(old: Sequence[Member], new: Sequence[Member]) -> tuple[float, float | None]:
    inputs = inputs_of([*old, *new])
    before, after = inputs[: len(old)], inputs[len(old) :]
    coefficients = np.vstack([-weights_of(before), weights_of(after)])
    if not (coefficients[: len(old), 2].any() and coefficients[len(old) :, 2].any()):
        coefficients[:, 2] = 0.0
    form = linear_form(inputs, coefficients)
    return plan_significance(form), height_significance(form)


def _change_tree(change: Change) -> Tree:
    d = change.difference_enu_m
    return {
        "verdict": change.verdict,
        "difference_enu_m": None if d is None else [fixed(value, 6) for value in d],
        "plan_significance": fixed(change.plan_significance, 6),
        "height_significance": fixed(change.height_significance, 6),
    }


def change_words(change: Change) -> str:
    """A change in one sentence."""
    if change.verdict == FIRST:
        return "first published value"
    if change.difference_enu_m is None:
        return "given in another frame or epoch than before"
    east, north, up = change.difference_enu_m
    by = f"east {1000 * east:+.1f}, north {1000 * north:+.1f}, up {'not known' if up is None else f'{1000 * up:+.1f}'} mm"
    why = {
        MOVED: "the new occupations differ significantly from the old: the mark moved, or one of them is wrong",
        REOBSERVED: "re-observed, no significant movement",
        RECOMPUTED: "no new occupation: evidence was corrected, set apart or made anew",
    }[change.verdict]
    return f"{by}; {why}"


@dataclass(frozen=True)
class Since:
    """A mark whose value in force is not the one of a date. difference: now minus then."""

    mark: int
    name: str
    then: str | None
    now: str | None
    difference_enu_m: tuple[float, float, float | None] | None
    steps: tuple[Entry, ...]


def changes_since(state: RegisterState, date: str) -> list[Since]:
    """What is not in force as it was at the end of a day, by how much, and the entries that changed it.

    Raises:
        UsageError: no date.
    """
    moment, found = end_of(date), []
    touched = {state.root_of(int(e.body["mark"])) for e in state.standing("published", "withdrawn") if e.utc >= moment}
    for number in sorted(touched):
        then, now = in_force(state, number, date), in_force(state, number)
        if then is not None and now is not None and then.number == now.number:
            continue
        steps = tuple(
            e
            for e in state.standing("published", "withdrawn")
            if e.utc >= moment and state.root_of(int(e.body["mark"])) == number
        )
        both = then is not None and now is not None
        difference = _apart(then.entry.body["place"], now.entry.body["place"]) if both else None  # type: ignore[union-attr]
        mark = state.marks().get(number)
        name = mark.name if mark is not None else str(steps[-1].body.get("name", number))
        found.append(Since(number, name, then.number if then else None, now.number if now else None, difference, steps))
    return found


def published_tree(item: Published) -> dict[str, Any]:
    """A published value as JSON."""
    return {
        **item.entry.body,
        "published_utc": item.entry.utc,
        "by": item.entry.observer,
        "entry": item.entry.seq,
        "hash": item.entry.hash,
        "in_force": item.in_force,
        "until_utc": item.until_utc,
        "successor": item.successor,
        "withdrawn": None if item.withdrawn is None else item.withdrawn.body["reason"],
    }
