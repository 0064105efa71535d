"""Occupations of one mark against each other: do they agree, which is the odd one, how far are they independent?

Two tests per pair, and both must be passed:

    statistical   the difference against its own uncertainty: F in plan, t in height, on effective degrees of freedom.
                  What both share has dropped out of difference and uncertainty. Level 5 % for all tests of the mark
                  together (Bonferroni), so that ten pairs do not raise ten times the alarms.
    fixed         the difference against a tolerance that does not grow with the stated uncertainty. Honest figures of
                  short sessions are wide: a height read wrongly by 30 mm would pass the statistical test.

The fixed tolerance is 2.5 sigma (plan) and 2 sigma (height) of the worse kind of fix of the two: 20 mm and 30 mm for
RTK fixed, what the trade asks of two fixed positions (common practice, no source); where both occupations meet the
accuracy that is required, never more than the requirement itself. It follows the KIND of fix, not the session.

Independence is graded from what the book can show: hours, the repeat of the GPS sky (247 s less than a day: D. C. Agnew,
K. M. Larson, GPS Solutions 11 (2007) 71-76), and a set-up made anew. Taking the tripod down leaves a trace only if the
antenna height changes; the same height to 2 mm does not count as a new set-up. The word 'independent' is refused
otherwise. A second occupation is to find a wrong point, a set-up error and a wrong height (2 CSR 90-62.050(3)).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations

from fieldbook.clock import utc_ms_of
from fieldbook.model.reduction import Finding, Independence, Repeat
from fieldbook.model.session import Requirement
from fieldbook.reduce.combine import (
    Input,
    LinearForm,
    against_the_others,
    difference,
    height_significance,
    plan_significance,
)

LEVEL = 0.05
PLAN_SIGMAS, HEIGHT_SIGMAS = 2.5, 2.0
SKY_REPEAT_S = 86_400.0 - 247.0
HEIGHT_CHANGED_M = 0.002
# NOAA/NGS, User Guidelines for Single Base Real Time GNSS Positioning, v2.1 (2011): about 4 h apart (from memory, medium);
# used where the requirement states no hours_between
HOURS_WANTED = 4.0
HOUR_MS = 3_600_000.0


@dataclass(frozen=True)
class Circumstance:
    """What a grade of independence looks at. Texts and numbers None = not stated.

    sigma_plan_m, sigma_height_m: of the kind of fix, for the fixed tolerance. meets: meets the required accuracy alone.
    """

    occupation: int
    started: str | None
    ended: str | None
    sigma_plan_m: float
    sigma_height_m: float
    meets: bool
    arp_height_m: float | None = None
    tribrach: str | None = None
    antenna: str | None = None
    observer: str | None = None
    station: str | None = None
    receiver: str | None = None
    entry_seq: int | None = None


@dataclass(frozen=True)
class Judged:
    """All pairs, and the number of the occupation that disagrees with all others, if one can be named."""

    repeats: list[Repeat]
    odd_one: int | None


def compare(inputs: Sequence[Input], circumstances: Sequence[Circumstance], requirement: Requirement) -> Judged:
    """Every pair of the occupations of a mark, in the order given (both sequences in the same order)."""
    pairs = list(combinations(range(len(inputs)), 2))
    level = LEVEL / max(2 * len(pairs), 1)
    repeats = {
        (i, j): _repeat(difference(inputs, i, j), circumstances[i], circumstances[j], requirement, level)
        for i, j in pairs
    }
    return Judged(list(repeats.values()), _odd_one(inputs, repeats))


def tolerances_m(first: Circumstance, second: Circumstance, requirement: Requirement) -> tuple[float, float]:
    """Fixed tolerances of a difference, plan and height."""
    plan = PLAN_SIGMAS * max(first.sigma_plan_m, second.sigma_plan_m)
    height = HEIGHT_SIGMAS * max(first.sigma_height_m, second.sigma_height_m)
    if first.meets and second.meets:
        return min(plan, requirement.horizontal_95_m), min(height, requirement.vertical_95_m)
    return plan, height


def _repeat(form: LinearForm, one: Circumstance, two: Circumstance, requirement: Requirement, level: float) -> Repeat:
    plan_p, height_p = plan_significance(form), height_significance(form)
    plan_most, height_most = tolerances_m(one, two, requirement)
    up = form.enu_m[2]
    over = []
    if plan_p < level:
        over.append(f"plan {_mm(form.plan_m)} is more than their uncertainties allow")
    if form.plan_m > plan_most:
        over.append(f"plan {_mm(form.plan_m)} is over the tolerance of {_mm(plan_most)}")
    if up is not None and height_p is not None and height_p < level:
        over.append(f"height {_mm(up)} is more than their uncertainties allow")
    if up is not None and abs(up) > height_most:
        over.append(f"height {_mm(up)} is over the tolerance of {_mm(height_most)}")
    return Repeat(
        first=one.occupation,
        second=two.occupation,
        difference_enu_m=list(form.enu_m),
        plan_m=form.plan_m,
        u_enu_m=list(form.combined.u_enu_m),
        dof_enu=list(form.combined.dof_enu),
        plan_significance=plan_p,
        height_significance=height_p,
        level=level,
        plan_tolerance_m=plan_most,
        height_tolerance_m=height_most,
        agrees=not over,
        text="; ".join(over) if over else "they agree",
        independence=grade(one, two, _hours_wanted(requirement)),
    )


def _hours_wanted(requirement: Requirement) -> float:
    return HOURS_WANTED if requirement.hours_between is None else requirement.hours_between


def _mm(value_m: float) -> str:
    return f"{1000 * value_m:.0f} mm"


def _odd_one(inputs: Sequence[Input], repeats: dict[tuple[int, int], Repeat]) -> int | None:
    """The one without which all others agree; of several such the one farthest from the rest by significance.

    Two occupations cannot tell which of them is wrong.
    """
    if len(inputs) < 3 or all(item.agrees for item in repeats.values()):
        return None
    candidates = [
        number
        for number in range(len(inputs))
        if all(item.agrees for pair, item in repeats.items() if number not in pair)
    ]
    if not candidates:
        return None
    apart = {number: _significance(against_the_others(inputs, number)) for number in candidates}
    best = min(candidates, key=lambda number: apart[number])
    ties = [number for number in candidates if number != best and apart[number] < 10 * apart[best]]
    return None if ties else inputs[best].occupation


def _significance(form: LinearForm) -> float:
    height = height_significance(form)
    return min(plan_significance(form), 1.0 if height is None else height)


def grade(one: Circumstance, two: Circumstance, hours_wanted: float) -> Independence:
    """How far two occupations are independent, with what speaks for it and against it."""
    hours, sky = hours_apart(one, two), sky_apart_h(one, two)
    changed, same, unknown = _what_changed(one, two)
    in_time = hours is not None and hours >= hours_wanted
    in_sky = sky is not None and sky >= min(hours_wanted, HOURS_WANTED)
    new_setup = any(item in changed for item in ("antenna height", "tribrach", "antenna"))
    if in_time and in_sky and new_setup:
        result = "independent"
    elif (in_time and in_sky) or new_setup:
        result = "partly independent"
    else:
        result = "not independent"
    against = []
    if not in_time:
        against.append("the time apart is not known" if hours is None else f"only {hours:.1f} h apart")
    elif not in_sky:
        against.append(f"the GPS sky repeats (247 s less a day): {sky or 0:.1f} h apart on it, same multipath")
    if not new_setup:
        against.append("no change of height, tribrach or antenna shows that the tripod was set up anew")
    text = f"{result}: {'; '.join(against)}" if against else f"{result}: {hours:.1f} h apart, set up anew"
    return Independence(result, hours, sky, hours_wanted, changed, same, unknown, text)


def _what_changed(one: Circumstance, two: Circumstance) -> tuple[list[str], list[str], list[str]]:
    changed: list[str] = []
    same: list[str] = []
    unknown: list[str] = []
    if one.arp_height_m is None or two.arp_height_m is None:
        unknown.append("antenna height")
    else:
        moved = abs(one.arp_height_m - two.arp_height_m) > HEIGHT_CHANGED_M
        (changed if moved else same).append("antenna height")
    for name in ("tribrach", "antenna", "observer", "station", "receiver"):
        first, second = getattr(one, name), getattr(two, name)
        if first is None or second is None:
            unknown.append(name)
        else:
            (same if first == second else changed).append(name)
    return changed, same, unknown


def hours_apart(one: Circumstance, two: Circumstance) -> float | None:
    """End of the earlier to start of the later occupation; negative when they overlap; None without times."""
    spans = _spans(one, two)
    if spans is None:
        return None
    (start_1, end_1), (start_2, end_2) = spans
    return max(start_2 - end_1, start_1 - end_2) / HOUR_MS


def sky_apart_h(one: Circumstance, two: Circumstance) -> float | None:
    """Hours between the two on a dial of one repeat of the GPS sky; 0 when they overlap there."""
    spans = _spans(one, two)
    if spans is None:
        return None
    turn = SKY_REPEAT_S * 1000
    (start_1, end_1), (start_2, end_2) = spans
    ahead = math.fmod(start_2 - start_1, turn) % turn
    gaps = (ahead - (end_1 - start_1), turn - ahead - (end_2 - start_2))
    return max(min(gaps), 0.0) / HOUR_MS


def _spans(one: Circumstance, two: Circumstance) -> tuple[tuple[int, int], tuple[int, int]] | None:
    if one.started is None or one.ended is None or two.started is None or two.ended is None:
        return None
    return (utc_ms_of(one.started), utc_ms_of(one.ended)), (utc_ms_of(two.started), utc_ms_of(two.ended))


def repeat_findings(judged: Judged, circumstances: Sequence[Circumstance]) -> list[Finding]:
    """What the operator must know of the pairs: disagreement (stop), lack of independence (caution)."""
    found = [*_disagreement(judged, circumstances)]
    if judged.repeats and not any(item.independence.grade == "independent" for item in judged.repeats):
        best = min(judged.repeats, key=lambda item: GRADES.index(item.independence.grade))
        text = (
            f"No two occupations are shown to be independent (best: {best.first} and {best.second}, "
            f"{best.independence.text}). Occupy again at another hour of the sky, with the tripod set up anew."
        )
        found.append(Finding("occupations_not_independent", "caution", text, {"grade": best.independence.grade}))
    return found


GRADES = ("independent", "partly independent", "not independent")


def _disagreement(judged: Judged, circumstances: Sequence[Circumstance]) -> list[Finding]:
    bad = [item for item in judged.repeats if not item.agrees]
    if not bad:
        return []
    pairs = "; ".join(f"{item.first} and {item.second}: {item.text}" for item in bad)
    if judged.odd_one is not None:
        seq = next(item.entry_seq for item in circumstances if item.occupation == judged.odd_one)
        what = (
            f"Occupation {judged.odd_one} is the odd one: the others agree. Look at its height, its set-up and its mark; "
            f"if it is wrong, strike it{'' if seq is None else f' (entry {seq})'} with the reason."
        )
    elif len(circumstances) == 2:
        what = "Two cannot tell which one is wrong: check heights and mark, then occupy a third time."
    else:
        what = "No single one explains it: check heights and mark of each, then occupy again."
    figures = {
        "odd_one": judged.odd_one,
        "pairs": [
            {"first": item.first, "second": item.second, "difference_enu_m": item.difference_enu_m} for item in bad
        ],
    }
    return [Finding("occupations_disagree", "stop", f"Occupations disagree ({pairs}). {what}", figures)]
