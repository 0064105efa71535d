"""The leave check: every requirement line with wanted, have, open and time to go.

In: the requirement, the reduction, how long the figures would still take, and the other occupations of the mark. Out:
lines of scope 'set-up' (they decide whether the tripod may come down) and 'mark' (they stay owed after it came down),
and one verdict:

    cannot reach      an accuracy line can never be met at this set-up, however long
    not yet           something of this set-up is open
    good to leave     every line of the set-up is met; what the mark still owes does not block it

A line that the requirement does not state is not judged. Figures are those of this occupation alone.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from fieldbook.check.gate_lines import gate_lines
from fieldbook.clock import utc_ms_of
from fieldbook.model.reduction import Leave, LeaveLine, Reduction, Uncertainty
from fieldbook.model.session import Requirement
from fieldbook.reduce.gate_reports import GateTally
from fieldbook.reduce.prediction import TimeToGo

HOUR_MS = 3_600_000
NOT_BLOCKING = frozenset({"simulated"})  # a simulated receiver keeps the certificate a draft, not the tripod up


@dataclass(frozen=True)
class OtherOccupation:
    """Another occupation of the same mark: first and last kept epoch (`utc_text` form).

    counts: it meets the accuracy lines itself; one that misses them is no second occupation for this requirement.
    """

    number: int
    started: str
    ended: str
    counts: bool


@dataclass(frozen=True)
class Figures:
    """How long the two accuracy lines would still take, and which budget line forbids what cannot be reached."""

    horizontal: TimeToGo
    vertical: TimeToGo
    horizontal_forbidden_by: str = ""
    vertical_forbidden_by: str = ""


def leave_check(
    requirement: Requirement,
    reduction: Reduction,
    figures: Figures,
    others: Sequence[OtherOccupation],
    gates: Mapping[str, GateTally],
) -> Leave:
    """All lines and the verdict for one occupation; gates: what was reported for the epochs that passed."""
    judged: Uncertainty | None = reduction.uncertainty
    if requirement.in_frame == "client frame":
        judged = reduction.uncertainty_client  # none without a height: the receiver's figure must not stand in for it
    lines = [
        _accuracy(
            "horizontal_95_m",
            requirement.horizontal_95_m,
            None if judged is None else judged.horizontal95_m,
            figures.horizontal,
            figures.horizontal_forbidden_by,
        ),
        _accuracy(
            "vertical_95_m",
            requirement.vertical_95_m,
            None if judged is None else judged.vertical95_m,
            figures.vertical,
            figures.vertical_forbidden_by,
        ),
    ]
    lines += _time_and_initialisations(requirement, reduction)
    lines += gate_lines(requirement, reduction, gates)
    lines += _heights(requirement, reduction)
    lines += _stops(reduction)
    lines += _of_the_mark(requirement, reduction, others)
    return Leave(_verdict(lines, figures), lines)


def _accuracy(line: str, wanted_m: float, have_m: float | None, go: TimeToGo, forbidden_by: str) -> LeaveLine:
    if have_m is None:
        text = "no height yet: read the antenna height, or the receiver sends no geoid separation"
        if line == "horizontal_95_m":
            text = f"not known in the client's frame: {text}"
        return LeaveLine(line, "set-up", wanted_m, None, "m", False, None, text)
    met = have_m <= wanted_m
    if met:
        return LeaveLine(line, "set-up", wanted_m, have_m, "m", True, 0.0, "reached")
    if go.state == "predicted" and go.seconds is not None and go.from_s is not None:
        text = f"about {_minutes(go.seconds)} more, at the least {_minutes(go.from_s)}"
        return LeaveLine(line, "set-up", wanted_m, have_m, "m", False, go.seconds, text)
    if go.state == "not safely reachable":
        text = "not safely reachable here: the prediction just meets it and may be missed; a second occupation helps"
        return LeaveLine(line, "set-up", wanted_m, have_m, "m", False, None, text)
    text = f"cannot be reached by staying: '{forbidden_by}' forbids it" if forbidden_by else "cannot be reached"
    return LeaveLine(line, "set-up", wanted_m, have_m, "m", False, None, text)


def _time_and_initialisations(requirement: Requirement, reduction: Reduction) -> list[LeaveLine]:
    lines = []
    if requirement.minimum_time_s is not None:
        left_s = max(requirement.minimum_time_s - reduction.kept_s, 0.0)
        text = "reached" if left_s == 0 else f"{_minutes(left_s)} more"
        lines.append(
            LeaveLine(
                "minimum_time_s",
                "set-up",
                requirement.minimum_time_s,
                reduction.kept_s,
                "s",
                left_s == 0,
                left_s,
                text,
            )
        )
    if requirement.initialisations is not None and 4 in requirement.accept_quality:
        have = sum(item.used and item.independent for item in reduction.initialisations)
        met = have >= requirement.initialisations
        text = "they agree" if met else "break the fix (cover the antenna or restart), let it fix again, and go on"
        lines.append(
            LeaveLine(
                "initialisations", "set-up", requirement.initialisations, have, "", met, 0.0 if met else None, text
            )
        )
    return lines


def _heights(requirement: Requirement, reduction: Reduction) -> list[LeaveLine]:
    rule = requirement.height_readings
    if rule is None:
        return []
    height = reduction.antenna
    have = [when for when in ("before", "during", "after") if getattr(height, f"{when}_m") is not None]
    enough = {"before", "after"} <= set(have) if rule == "before and after" else bool(have)
    disagree = next(
        (
            item
            for item in reduction.findings
            if item.severity == "stop" and item.code.startswith(("heights_differ", "receiver_height_differs"))
        ),
        None,
    )
    if disagree is not None:
        text = disagree.text
    elif enough:
        text = "read, and they agree"
    else:
        missing = [when for when in ("before", "after") if when not in have] if rule == "before and after" else ["once"]
        text = f"read the antenna height now ({', '.join(missing)})"
    met = enough and disagree is None
    return [
        LeaveLine("height_readings", "set-up", rule, " and ".join(have) or "none", "", met, 0.0 if met else None, text)
    ]


def _stops(reduction: Reduction) -> list[LeaveLine]:
    """Findings of severity 'stop' that no other line speaks for."""
    other_lines = ("heights_differ", "receiver_height_differs", "height_reading_missing")
    stops = [
        item
        for item in reduction.findings
        if item.severity == "stop" and item.code not in NOT_BLOCKING and not item.code.startswith(other_lines)
    ]
    if not stops:
        return []
    text = stops[0].text if len(stops) == 1 else "; ".join(item.code for item in stops)
    return [LeaveLine("findings", "set-up", "none that stop", f"{len(stops)} open", "", False, None, text)]


def _of_the_mark(requirement: Requirement, reduction: Reduction, others: Sequence[OtherOccupation]) -> list[LeaveLine]:
    counted = [other for other in others if other.counts]
    apart_h = _hours_apart(reduction, counted)
    lines = []
    if requirement.occupations > 1 or counted:
        have = 1 + len(counted)
        met = have >= requirement.occupations
        text = "done" if met else _come_back(requirement, reduction)
        if len(counted) < len(others):
            poor = ", ".join(str(other.number) for other in others if not other.counts)
            text += f"; occupation {poor} misses the accuracy lines and does not count"
        lines.append(
            LeaveLine("occupations", "mark", requirement.occupations, have, "", met, 0.0 if met else None, text)
        )
    if requirement.hours_between is not None and requirement.occupations > 1:
        met = apart_h is not None and apart_h >= requirement.hours_between
        text = "far enough apart" if met else _come_back(requirement, reduction)
        lines.append(
            LeaveLine("hours_between", "mark", requirement.hours_between, apart_h, "h", met, 0.0 if met else None, text)
        )
    return lines


def _hours_apart(reduction: Reduction, others: Sequence[OtherOccupation]) -> float | None:
    """Longest pause between this occupation and another one, end of the earlier to start of the later."""
    if reduction.started is None or reduction.ended is None or not others:
        return None
    start, end = utc_ms_of(reduction.started), utc_ms_of(reduction.ended)
    pauses = [max(utc_ms_of(other.started) - end, start - utc_ms_of(other.ended)) for other in others]
    return max(pauses) / HOUR_MS


def _come_back(requirement: Requirement, reduction: Reduction) -> str:
    if requirement.hours_between is None or reduction.ended is None:
        return "another occupation is owed, with the tripod set up anew"
    # up to the next full minute: a minute early would not count
    back_ms = utc_ms_of(reduction.ended) + round(requirement.hours_between * HOUR_MS)
    minutes = -(-back_ms // 60_000) % 1440
    return f"come back from {minutes // 60:02d}:{minutes % 60:02d} UTC"


def _verdict(lines: Sequence[LeaveLine], figures: Figures) -> str:
    own = [line for line in lines if line.scope == "set-up"]
    if all(line.met for line in own):
        return "good to leave"
    by_line = {"horizontal_95_m": figures.horizontal, "vertical_95_m": figures.vertical}
    for line in own:
        go = by_line.get(line.line)
        if go is not None and not line.met and line.have is not None and go.state == "cannot reach":
            return "cannot reach"
    return "not yet"


def _minutes(seconds: float) -> str:
    whole = max(int(-(-seconds // 1)), 0)
    if whole < 60:
        return f"{whole} s"
    if whole < 3600:
        return f"{-(-whole // 60)} min"
    return f"{whole // 3600} h {-(-(whole % 3600) // 60):02d} min"
