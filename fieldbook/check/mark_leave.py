"""The mark's own verdict: what all its occupations together have reached, and what is still owed.

Lines of scope 'mark' only, on the combined figures; the set-up's own lines stay with each occupation. An occupation that
alone misses the required accuracy does not count as one of the occupations asked for. Verdicts as in the leave check:
'good to leave' = nothing is owed to this mark, 'not yet' = something is.
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import combinations

from fieldbook.check.leave import HOUR_MS, NOT_BLOCKING
from fieldbook.clock import utc_ms_of
from fieldbook.model.reduction import Leave, LeaveLine, MarkResult, Reduction, Uncertainty
from fieldbook.model.session import Requirement


def mark_leave(requirement: Requirement, result: MarkResult, used: Sequence[Reduction]) -> Leave:
    """All lines and the verdict of a mark.

    Args:
        requirement: the strictest of the mark's occupations.
        result: combined, with repeats and findings.
        used: reductions of the occupations that were combined.
    """
    client = requirement.in_frame == "client frame"
    judged = result.uncertainty_client if client else result.uncertainty
    lines = [
        _accuracy("horizontal_95_m", requirement.horizontal_95_m, None if judged is None else judged.horizontal95_m),
        _accuracy("vertical_95_m", requirement.vertical_95_m, None if judged is None else judged.vertical95_m),
    ]
    counted = [item for item in used if reaches_accuracy(requirement, item)]
    lines.append(_occupations(requirement, counted, used))
    if requirement.hours_between is not None and requirement.occupations > 1:
        lines.append(_hours(requirement.hours_between, counted))
    if result.repeats:
        bad = [item for item in result.repeats if not item.agrees]
        text = bad[0].text if bad else "they agree"
        have = f"{len(result.repeats) - len(bad)} of {len(result.repeats)} pairs"
        lines.append(LeaveLine("repeats", "mark", "all pairs agree", have, "", not bad, None if bad else 0.0, text))
    stops = [
        item
        for item in result.findings
        if item.severity == "stop" and item.code not in NOT_BLOCKING and item.code != "occupations_disagree"
    ]
    if stops:
        lines.append(
            LeaveLine("findings", "mark", "none that stop", f"{len(stops)} open", "", False, None, stops[0].text)
        )
    return Leave("good to leave" if all(item.met for item in lines) else "not yet", lines)


def _accuracy(line: str, wanted_m: float, have_m: float | None) -> LeaveLine:
    if have_m is None:
        return LeaveLine(line, "mark", wanted_m, None, "m", False, None, "not known")
    met = have_m <= wanted_m
    text = "reached" if met else "another occupation, hours apart and with the tripod set up anew, helps most"
    return LeaveLine(line, "mark", wanted_m, have_m, "m", met, 0.0 if met else None, text)


def reaches_accuracy(requirement: Requirement, reduction: Reduction) -> bool:
    """Does the occupation alone reach the required accuracy, in the frame the requirement speaks of?"""
    own: Uncertainty | None = reduction.uncertainty
    if requirement.in_frame == "client frame":
        own = reduction.uncertainty_client
    return (
        own is not None
        and own.horizontal95_m <= requirement.horizontal_95_m
        and own.vertical95_m is not None
        and own.vertical95_m <= requirement.vertical_95_m
    )


def _occupations(requirement: Requirement, counted: Sequence[Reduction], used: Sequence[Reduction]) -> LeaveLine:
    met = len(counted) >= requirement.occupations
    text = "done" if met else "another occupation is owed, with the tripod set up anew"
    poor = [str(item.occupation) for item in used if item not in counted]
    if poor:
        text += f"; occupation {', '.join(poor)} misses the accuracy lines and does not count"
    return LeaveLine("occupations", "mark", requirement.occupations, len(counted), "", met, 0.0 if met else None, text)


def _hours(wanted_h: float, counted: Sequence[Reduction]) -> LeaveLine:
    spans = [(utc_ms_of(i.started), utc_ms_of(i.ended)) for i in counted if i.started and i.ended]
    gaps = [max(two[0] - one[1], one[0] - two[1]) / HOUR_MS for one, two in combinations(spans, 2)]
    have = max(gaps, default=None)
    met = have is not None and have >= wanted_h
    text = "far enough apart" if met else "come back later"
    return LeaveLine("hours_between", "mark", wanted_h, have, "h", met, 0.0 if met else None, text)
