"""Which mark is which: pairs of marks that a person should look at, with everything that speaks for and against.

A pair is looked at when the two bear one name within a kilometre, when one lies where the other does, or when they bear the
same id, or one inscription within a kilometre. Nothing here decides: `decisions` writes what the operator says. Farther apart
than a kilometre an equal name is no evidence: every second job has a BM1.

    same name, near       distance within what both positions can be wrong by            same?
    same name, apart      beyond that: re-set, another mark of that name, or a mistake   reset? different?
    other name, near      one mark with two names, or a mark and its eccentric point
    same id, same inscription    whatever names and places say
    one mark, two places  occupations of ONE mark that fall apart in time                reset?

Positions in different frames or epochs are not compared: their distance is told as not comparable.
"""

from __future__ import annotations

import math
import re
import unicodedata
from collections import defaultdict
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from itertools import combinations

from fieldbook.reduce.geodesy import enu_difference, geocentric

from .fold import Held, Mark, RegisterState

SAME_NAME_WITHIN_M = 1000.0
NEAR_M = 0.5  # marks nearer than this are looked at whatever their names
FARTHEST_NEAR_M = 10.0  # of positions that are themselves known to metres
LEAST_TOGETHER_M = 0.05  # figures of long sessions are narrow; a mark is not re-set by two centimetres
CELL_M = 20.0
_WORD = re.compile(r"[^\W_]+")

SAME_NEAR = "same name, near"
SAME_APART = "same name, apart"
OTHER_NEAR = "other name, near"
SAME_ID = "same id"
SAME_INSCRIPTION = "same inscription"
TWO_PLACES = "one mark, two places"


@dataclass(frozen=True)
class Seen:
    """What a pair looks like. Metres; None where it cannot be said. second minus first for the height.

    together: the distance lies within what the positions can be wrong by (95 %, both), at least 5 cm.
    """

    distance_m: float | None
    height_difference_m: float | None
    joint_u95_m: float | None
    comparable: bool
    together: bool
    supports: tuple[str, ...]
    against: tuple[str, ...]


@dataclass(frozen=True)
class Proposal:
    """A question to the operator. marks: one number or two. from_utc: of a suggested reset."""

    case: str
    marks: tuple[int, ...]
    names: tuple[str, ...]
    suggested: tuple[str, ...]
    seen: Seen
    from_utc: str | None = None

    @property
    def text(self) -> str:
        """One sentence."""
        who = " and ".join(f"{name} (mark {n})" for name, n in zip(self.names, self.marks, strict=True))
        far = "at an unknown distance" if self.seen.distance_m is None else metres(self.seen.distance_m)
        if self.case == TWO_PLACES:
            return f"{who}: occupations before and from {self.from_utc} lie {far} apart"
        far += "" if self.seen.comparable else ", not comparable: other frames or epochs"
        return f"{who}: {self.case}, {far}"


def metres(value_m: float) -> str:
    """A distance for people: millimetres below ten metres."""
    return f"{value_m:.3f} m" if value_m < 10 else f"{value_m:.1f} m"


def key_of(text: str | None) -> str:
    """Names, ids and inscriptions as they are compared: case, spaces, hyphens and dots do not count."""
    if not text:
        return ""
    folded = unicodedata.normalize("NFKC", text).casefold()
    return "".join(_WORD.findall(folded))


def proposals(state: RegisterState, only: Iterable[int] | None = None) -> list[Proposal]:
    """All open questions, in order of the marks' numbers.

    Args:
        only: marks (numbers) of which at least one must take part.
    """
    marks = state.marks()
    wanted = None if only is None else set(only)
    settled = state.different()
    best = {number: _best(mark, state) for number, mark in marks.items()}
    found = []
    for first, second in sorted(_candidates(marks, best)):
        if wanted is not None and not wanted & {first, second}:
            continue
        if frozenset((first, second)) not in settled:
            one = _of_pair(marks[first], marks[second], state)
            if one is not None:
                found.append(one)
    for number, mark in marks.items():
        if wanted is None or number in wanted:
            split = _two_places(mark, state)
            if split is not None:
                found.append(split)
    return sorted(found, key=lambda item: item.marks)


def seen_of(one: Mark, two: Mark, state: RegisterState) -> Seen:
    """Distance and evidence of any two marks."""
    pair = _nearest_comparable(one, two, state)
    supports, against = _words(one, two)
    if pair is None:
        return Seen(None, None, None, False, False, supports, against)
    first, second, comparable = pair
    distance, up = _apart(first, second)
    joint, joint_up = _joint_m(first, second)
    together = comparable and distance <= _together_m(joint)
    if up is not None and comparable:
        limit = 0.10 + joint_up
        if abs(up) > limit:
            against = (*against, f"heights differ by {abs(up):.3f} m")
    return Seen(distance, up, joint, comparable, together, supports, against)


def _candidates(marks: dict[int, Mark], best: dict[int, Held | None]) -> set[tuple[int, int]]:
    groups: dict[tuple[str, str], list[int]] = defaultdict(list)
    for number, mark in marks.items():
        for name in {key_of(name) for name in (*mark.names, mark.name)}:
            groups["name", name].append(number)
        for what in ("id", "inscription"):
            for text in {key_of(tree.get(what)) for _, _, tree in mark.described} - {""}:
                groups[what, text].append(number)
    pairs: set[tuple[int, int]] = set()
    for (what, text), numbers in groups.items():
        if text:
            pairs |= {pair for pair in combinations(sorted(numbers), 2) if what == "id" or _within(best, *pair)}
    return pairs | set(_near(best))


def _within(best: dict[int, Held | None], first: int, second: int) -> bool:
    """Within a kilometre, or one of them has no place yet."""
    one, two = best[first], best[second]
    if one is None or two is None:
        return True
    return _apart(one, two)[0] <= SAME_NAME_WITHIN_M


def _near(best: dict[int, Held | None]) -> Iterator[tuple[int, int]]:
    cells: dict[tuple[int, int, int], list[int]] = defaultdict(list)
    for number, held in best.items():
        if held is not None and held.place is not None:
            cells[_cell(held)].append(number)
    for (x, y, z), numbers in cells.items():
        around = [
            other
            for dx in (-1, 0, 1)
            for dy in (-1, 0, 1)
            for dz in (-1, 0, 1)
            for other in cells.get((x + dx, y + dy, z + dz), ())
        ]
        for number in numbers:
            for other in around:
                one, two = best[number], best[other]
                if number < other and one is not None and two is not None:
                    limit = min(max(NEAR_M, _joint_m(one, two)[0]), FARTHEST_NEAR_M)
                    if _apart(one, two)[0] <= limit or (_frame(one) != _frame(two) and _apart(one, two)[0] <= 5.0):
                        yield number, other


def _cell(held: Held) -> tuple[int, int, int]:
    assert held.place is not None  # noqa: S101 - the caller has looked
    x, y, z = (math.floor(value / CELL_M) for value in geocentric(held.place[0], held.place[1], 0.0))
    return x, y, z


def _frame(held: Held) -> tuple[str | None, str | None]:
    return held.frame, held.epoch


def _members(mark: Mark, state: RegisterState) -> list[Held]:
    excluded = state.excluded()
    return [held for held in mark.occupations if held.place is not None and held.key not in excluded]


def _best(mark: Mark, state: RegisterState) -> Held | None:
    """The occupation whose place is known best."""
    return min(_members(mark, state), key=lambda held: held.plan_u95_m, default=None)


def _nearest_comparable(one: Mark, two: Mark, state: RegisterState) -> tuple[Held, Held, bool] | None:
    """The best known places of both in one frame and epoch; else the best known of each, not comparable."""
    firsts, seconds = _members(one, state), _members(two, state)
    if not firsts or not seconds:
        return None
    pairs = [(a, b) for a in firsts for b in seconds if _frame(a) == _frame(b)]
    comparable = bool(pairs)
    pairs = pairs or [(a, b) for a in firsts for b in seconds]
    best = min(pairs, key=lambda pair: pair[0].plan_u95_m ** 2 + pair[1].plan_u95_m ** 2)
    return best[0], best[1], comparable


def _apart(one: Held, two: Held) -> tuple[float, float | None]:
    """(horizontal distance, height of the second above the first), metres."""
    assert one.place is not None  # noqa: S101 - only those with a place are compared
    assert two.place is not None  # noqa: S101
    level = one.place[2] if one.place[2] is not None else (two.place[2] or 0.0)
    start = (one.place[0], one.place[1], level)
    end = (two.place[0], two.place[1], level if two.place[2] is None else two.place[2])
    east, north, up = (float(value) for value in enu_difference(start, end))
    both = one.place[2] is not None and two.place[2] is not None
    return math.hypot(east, north), up if both else None


def _joint_m(one: Held, two: Held) -> tuple[float, float]:
    """95 % of the difference of two places, plan and height: the frame operation drops out where it is the same."""
    if one.operation == two.operation and _frame(one) == _frame(two):
        (plan_1, up_1), (plan_2, up_2) = one.measured_u95_m, two.measured_u95_m
    else:
        (plan_1, up_1), (plan_2, up_2) = (one.plan_u95_m, one.height_u95_m), (two.plan_u95_m, two.height_u95_m)
    return math.hypot(plan_1, plan_2), math.hypot(up_1 or 0.0, up_2 or 0.0)


def _together_m(joint_u95_m: float) -> float:
    return min(max(LEAST_TOGETHER_M, joint_u95_m), FARTHEST_NEAR_M)


def _words(one: Mark, two: Mark) -> tuple[tuple[str, ...], tuple[str, ...]]:
    """What names, ids, inscriptions, descriptions and dates say for and against one mark."""
    supports: list[str] = []
    against: list[str] = []
    both = {key_of(name) for name in one.names} & {key_of(name) for name in two.names}
    (supports if both else against).append(f"names {' / '.join(one.names)} and {' / '.join(two.names)}")
    for what in ("id", "inscription"):
        first, second = _texts(one, what), _texts(two, what)
        if first and second:
            same = {key_of(text) for text in first} & {key_of(text) for text in second}
            (supports if same else against).append(f"{what} '{first[0]}' and '{second[0]}'")
    first, second = _texts(one, "description"), _texts(two, "description")
    if first and second:
        shared = _content_words(first) & _content_words(second)
        (supports if shared else against).append(f"described '{first[0]}' and '{second[0]}'")
    if _at_once(one, two):
        against.append("both were occupied at the same time")
    for mark, other in ((one, two), (two, one)):
        if mark.until_utc is not None and any((held.started or "") >= mark.until_utc for held in other.occupations):
            against.append(f"mark {mark.number} was reset on {mark.until_utc[:10]}, mark {other.number} occupied after")
    return tuple(supports), tuple(against)


def _texts(mark: Mark, what: str) -> list[str]:
    return list(dict.fromkeys(str(tree[what]) for _, _, tree in mark.described if tree.get(what)))


def _content_words(texts: list[str]) -> set[str]:
    return {word for text in texts for word in _WORD.findall(text.casefold()) if len(word) > 2}


def _at_once(one: Mark, two: Mark) -> bool:
    spans = [[(h.started, h.ended) for h in mark.occupations if h.started and h.ended] for mark in (one, two)]
    return any(a[0] < b[1] and b[0] < a[1] for a in spans[0] for b in spans[1])


def _of_pair(one: Mark, two: Mark, state: RegisterState) -> Proposal | None:
    seen = seen_of(one, two, state)
    numbers, names = (one.number, two.number), (one.name, two.name)
    same_name = bool({key_of(name) for name in one.names} & {key_of(name) for name in two.names})
    if same_name:
        if seen.together or seen.distance_m is None:
            return Proposal(SAME_NEAR if seen.together else SAME_APART, numbers, names, ("same", "different"), seen)
        earlier_first, since = _later_one(one, two)
        suggested = ("reset", "different") if since else ("different", "exclude")
        if since and not earlier_first:
            numbers, names = (two.number, one.number), (two.name, one.name)
        return Proposal(SAME_APART, numbers, names, suggested if seen.comparable else ("frame",), seen, since)
    shares = {what for what in ("id", "inscription") if any(text.startswith(f"{what} '") for text in seen.supports)}
    if "id" in shares:
        return Proposal(SAME_ID, numbers, names, ("same", "different"), seen)
    if seen.distance_m is not None and seen.distance_m <= FARTHEST_NEAR_M and not shares:
        suggested = ("same", "different") if seen.together else ("different", "same")
        return Proposal(OTHER_NEAR, numbers, names, suggested if seen.comparable else ("frame",), seen)
    if "inscription" in shares:
        return Proposal(SAME_INSCRIPTION, numbers, names, ("same", "different"), seen)
    return None


def _later_one(one: Mark, two: Mark) -> tuple[bool, str | None]:
    """(the first is the earlier, from when), if all occupations of one mark come before all of the other."""
    spans = [[h.started for h in mark.occupations if h.started] for mark in (one, two)]
    if not all(spans):
        return True, None
    for before, after in (spans, spans[::-1]):
        if max(before) < min(after):
            return before is spans[0], min(after)
    return True, None


def _two_places(mark: Mark, state: RegisterState) -> Proposal | None:
    """Occupations of one mark before and from a date at two places, each side agreeing in itself."""
    members = [held for held in _members(mark, state) if held.started is not None]
    if len(members) < 2 or len({_frame(held) for held in members}) > 1:
        return None
    far = {
        (i, j): _apart(members[i], members[j])[0] > _together_m(_joint_m(members[i], members[j])[0])
        for i, j in combinations(range(len(members)), 2)
    }
    for cut in range(1, len(members)):
        if all(apart == (i < cut <= j) for (i, j), apart in far.items()):
            sides = members[:cut], members[cut:]
            one, two = (min(side, key=lambda held: held.plan_u95_m) for side in sides)
            distance, up = _apart(one, two)
            joint = _joint_m(one, two)[0]
            what = f"{', '.join(h.label for h in sides[0])} against {', '.join(h.label for h in sides[1])}"
            seen = Seen(distance, up, joint, True, False, (), (what,))
            return Proposal(
                TWO_PLACES, (mark.number,), (mark.name,), ("reset", "separate", "exclude"), seen, sides[1][0].started
            )
    return None
