"""The operator's decisions: checked against what holds, written with the evidence that was seen, struck when they were wrong.

`same` and `different` can contradict each other only through a chain of other decisions; such a pair is refused and the entries in
the way are named. A rule accepts by itself what is left of doubt-free pairs: one name, within its distance, in one frame, and
nothing at all that speaks against it. Each acceptance is an entry of its own that names the rule, and can be struck alone.
"""

from __future__ import annotations

from collections import defaultdict

from fieldbook.clock import utc_ms_of, utc_text
from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree, fixed
from fieldbook.model.entry import Entry
from fieldbook.reduce import frames

from .fold import Held, Mark, RegisterState
from .identity import SAME_APART, SAME_NEAR, Proposal, Seen, proposals, seen_of
from .store import Register

SAME_NAME_RULE = "same name"
LARGEST_RULE_M = 1.0


def find_mark(state: RegisterState, text: str) -> Mark:
    """A mark by its number, or by a name that only one bears; `name:TEXT` is always a name.

    Raises:
        UsageError: none, or several.
    """
    marks = state.marks()
    if text.isdecimal() and int(text) <= 10**9 and not text.startswith("0"):
        root = state.root_of(int(text))
        if root in marks:
            return marks[root]
    name = text.removeprefix("name:")
    found = [mark for mark in marks.values() if name in (mark.name, *mark.names)]
    if len(found) == 1:
        return found[0]
    if found:
        listed = ", ".join(str(mark.number) for mark in found)
        raise UsageError(
            f"{len(found)} marks bear the name {name}: {listed}.", "Name one by its number.", code="which_mark"
        )
    raise UsageError(
        f'There is no mark "{text}" in this register.', "`fieldbook register list` names them.", code="unknown_mark"
    )


def find_occupation(state: RegisterState, text: str) -> Held:
    """An occupation by its label, `3f2a91c0/2`.

    Raises:
        UsageError: there is none.
    """
    for held in state.occupations():
        if held.label == text:
            return held
    raise UsageError(
        f'There is no occupation "{text}" in this register.',
        "Write it as in `fieldbook register list`: 3f2a91c0/2.",
        code="unknown_occupation",
    )


def decide_same(register: Register, first: str, second: str, *, by: str, reason: str) -> Entry:
    """Two marks are one.

    Raises:
        UsageError: unknown marks, the same one already, or settled as different.
    """
    state = register.state()
    one, two = find_mark(state, first), find_mark(state, second)
    _not_one_already(state, one, two)
    _check_not_different(state, one, two)
    body = {"marks": [one.number, two.number], "reason": reason, "seen": seen_tree(seen_of(one, two, state))}
    return register.append("same", body, by)


def decide_different(register: Register, first: str, second: str, *, by: str, reason: str) -> Entry:
    """Two marks are two, whatever names and places say.

    Raises:
        UsageError: unknown marks, or joined by decisions that must be struck first.
    """
    state = register.state()
    one, two = find_mark(state, first), find_mark(state, second)
    _not_one_already(state, one, two)
    body = {"marks": [one.number, two.number], "reason": reason, "seen": seen_tree(seen_of(one, two, state))}
    return register.append("different", body, by)


def decide_reset(
    register: Register, mark: str, from_utc: str, known_as: str | None = None, *, by: str, reason: str
) -> Entry:
    """From a moment on the mark is a new point, under a new number, or the mark `known_as`.

    Raises:
        UsageError: unknown mark, no such moment, or a reset of that moment stands.
    """
    state = register.state()
    found, moment = find_mark(state, mark), moment_of(from_utc)
    root, number = found.number, state.next_number
    if known_as is not None:
        new = find_mark(state, known_as)
        if new.number == root:
            raise UsageError(f"Both are mark {root}.", "Name the other mark, or leave it out for a new number.")
        early = [held.label for held in new.occupations if (held.started or moment) < moment]
        if early:
            raise UsageError(
                f"Mark {new.number} was occupied before {moment[:10]}: {', '.join(early)}.",
                "It cannot be the point that was set then; look at the date.",
                code="before_reset",
            )
        number = new.number
    for entry in state.standing("reset"):
        if state.root_of(int(entry.body["mark"])) == root and entry.body["from_utc"] == moment:
            raise UsageError(
                f"Entry {entry.seq} resets mark {root} from {moment} already.", "Strike it if it is wrong."
            )
    body = {"mark": found.number, "from_utc": moment, "number": number, "reason": reason}
    return register.append("reset", body, by)


def decide_separate(register: Register, occupation: str, *, by: str, reason: str) -> Entry:
    """An occupation is of another mark than its book says: it gets a number of its own, which `same` may join to another.

    Raises:
        UsageError: unknown, or separated already.
    """
    state = register.state()
    held = find_occupation(state, occupation)
    for entry in state.standing("separate"):
        if (entry.body["book"], entry.body["occupation"]) == held.key:
            raise UsageError(f"Entry {entry.seq} separates {held.label} already.", "Strike it if it is wrong.")
    body = {"book": held.book, "occupation": held.occupation, "number": state.next_number, "reason": reason}
    return register.append("separate", body, by)


def decide_exclude(register: Register, occupation: str, *, by: str, reason: str) -> Entry:
    """An occupation takes no part in any combination.

    Raises:
        UsageError: unknown, or set apart already.
    """
    state = register.state()
    held = find_occupation(state, occupation)
    if held.key in state.excluded():
        raise UsageError(
            f"Entry {state.excluded()[held.key].seq} sets {held.label} apart already.", "Strike it if it is wrong."
        )
    return register.append("exclude", {"book": held.book, "occupation": held.occupation, "reason": reason}, by)


def decide_name(register: Register, mark: str, name: str, *, by: str, reason: str) -> Entry:
    """The name under which the register knows a mark.

    Raises:
        UsageError: unknown mark, or an empty name.
    """
    if not name.strip():
        raise UsageError("A mark needs a name.", "Write it.")
    found = find_mark(register.state(), mark)
    return register.append("name", {"mark": found.number, "name": name.strip(), "reason": reason}, by)


def decide_frame(register: Register, frame: str, epoch: str | None, *, by: str, reason: str) -> Entry:
    """The frame and epoch of the register: occupations given in others are transformed into it.

    Raises:
        UsageError: no geographic 3-D frame, an ensemble, or an epoch missing or too many.
    """
    info = frames.frame_info(frame)
    if info.ensemble:
        raise UsageError(
            f"{info.code} {info.name} is an ensemble of realisations decimetres apart.", "Name one realisation.",
            code="frame_ensemble",
        )  # fmt: skip
    if info.dynamic and epoch is None:
        raise UsageError(
            f"{info.name} moves: its coordinates need an epoch.", "Add --epoch YEAR.", code="epoch_missing"
        )
    if epoch is not None:
        try:
            usable = 1980.0 <= float(epoch) <= 2100.0
        except ValueError:
            usable = False
        if not usable:
            raise UsageError(f'"{epoch}" is no decimal year.', "Write one such as 2020.0.", code="epoch_bad")
        if not info.dynamic:
            raise UsageError(f"{info.name} is static: its coordinates have no epoch.", "Leave --epoch out.")
    return register.append("frame", {"frame": info.code, "epoch": epoch, "reason": reason}, by)


def decide_rule(register: Register, within_m: float, *, by: str, reason: str) -> list[Entry]:
    """Switch the same-name rule on, and accept at once what it covers; the last rule that stands counts.

    Raises:
        UsageError: a distance that is none, or over a metre.
    """
    if not 0.0 < within_m <= LARGEST_RULE_M:
        raise UsageError(
            f"{within_m} m is no distance for this rule.",
            f"Name one up to {LARGEST_RULE_M:.0f} m.",
            code="rule_distance",
        )
    with register.transaction():
        body = {"rule": SAME_NAME_RULE, "within_m": fixed(within_m, 4), "reason": reason}
        entry = register.append("rule", body, by)
        return [entry, *apply_rule(register, by=by)]


def apply_rule(register: Register, *, by: str) -> list[Entry]:
    """Accept what the standing rule covers; nothing without a rule. One `same` entry per acceptance.

    Not covered, and left to a person: any pair with something against it, names that a third mark in the neighbourhood bears
    at another place, frames that differ, heights that differ by more than twice the distance of the rule.
    """
    state = register.state()
    rule = state.rule()
    if rule is None:
        return []
    within_m = float(rule.body["within_m"])
    open_ones = proposals(state)
    doubtful: dict[int, int] = defaultdict(int)
    for item in open_ones:
        if item.case == SAME_APART:
            for number in item.marks:
                doubtful[number] += 1
    written, joins = [], state.joins()
    with register.transaction():
        for item in open_ones:
            if not _covered(item, within_m) or any(doubtful[number] for number in item.marks):
                continue
            if not joins.join(*item.marks):
                continue
            body: Tree = {
                "marks": list(item.marks),
                "reason": f"rule of entry {rule.seq}: {SAME_NAME_RULE} within {within_m:g} m, nothing against it",
                "rule": rule.seq,
                "seen": seen_tree(item.seen),
            }
            written.append(register.append("same", body, by))
    return written


def _covered(item: Proposal, within_m: float) -> bool:
    seen = item.seen
    if item.case != SAME_NEAR or not seen.comparable or seen.against or seen.distance_m is None:
        return False
    level = seen.height_difference_m is None or abs(seen.height_difference_m) <= 2 * within_m
    return seen.distance_m <= within_m and level


def strike(register: Register, seq: int, *, by: str, reason: str) -> Entry:
    """Take a decision out again; it stays legible.

    Raises:
        UsageError: no such decision, or struck already.
    """
    return register.append("strike", {"seq": seq, "reason": reason}, by)


def _not_one_already(state: RegisterState, one: Mark, two: Mark) -> None:
    if one.number != two.number:
        return
    joining = [
        str(entry.seq) for entry in state.standing("same") if state.root_of(int(entry.body["marks"][0])) == one.number
    ]
    how = f" (entries {', '.join(joining)})" if joining else ", as its book says"
    raise UsageError(
        f"Both are mark {one.number} already{how}.",
        "Strike the entry that joins them if it is wrong." if joining else "Separate an occupation, or reset the mark.",
        code="one_mark",
    )


def _check_not_different(state: RegisterState, one: Mark, two: Mark) -> None:
    entry = _in_the_way(state, one.number, two.number)
    if entry is not None:
        raise UsageError(
            f"Entry {entry.seq} of {entry.observer} settles marks {one.number} and {two.number} as two ({entry.kind}): "
            f"{entry.body['reason']}",
            f"Strike entry {entry.seq} first if that was wrong.",
            code="settled_as_different",
        )


def _in_the_way(state: RegisterState, one: int, two: int) -> Entry | None:
    return state.different().get(frozenset((one, two)))


def seen_tree(seen: Seen) -> Tree:
    """The evidence of a decision as it is stored: decimal texts."""
    return {
        "distance_m": fixed(seen.distance_m, 4),
        "height_difference_m": fixed(seen.height_difference_m, 4),
        "joint_u95_m": fixed(seen.joint_u95_m, 4),
        "comparable": seen.comparable,
        "supports": list(seen.supports),
        "against": list(seen.against),
    }


def moment_of(text: str) -> str:
    """A date (its first moment, UTC) or a full time as the one form of a time.

    Raises:
        UsageError: neither.
    """
    full = f"{text}T00:00:00.000Z" if len(text) == 10 else text
    try:
        return utc_text(utc_ms_of(full))
    except (ValueError, OverflowError, OSError):
        raise UsageError(
            f'"{text}" is no date.', "Write it as 2027-05-01, or as 2027-05-01T08:00:00.000Z.", code="no_date"
        ) from None
