"""The lines of the leave check that the gates stand for: quality, HDOP, PDOP, age of corrections, satellites.

An epoch beyond a limit is set aside, so what is kept meets the limit wherever the receiver reports the value. A line is
open when the value was not reported: then nothing shows that the requirement was met, and what the receiver does not
send must not pass for good. A few epochs without a report are no reason to stay (5 %, common practice, no source).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

from fieldbook.model.epoch import QUALITY_WORDS
from fieldbook.model.reduction import LeaveLine, Reduction
from fieldbook.model.session import Requirement
from fieldbook.reduce.gate_reports import GateTally

MOST_NOT_SHOWN = 0.05


@dataclass(frozen=True)
class _Gate:
    key: str
    unit: str
    per_unit: int  # the columns' integers in one unit of the requirement
    code: str  # of the epochs set aside
    remedy: str  # what makes the receiver report it


GATES = (
    _Gate("max_hdop", "", 1000, "dop", "have the receiver send HDOP (GGA or GNS field 8)"),
    _Gate("max_pdop", "", 1000, "dop", "switch on the receiver's GSA sentences"),
    _Gate("max_correction_age_s", "s", 1000, "age", "have the receiver send the age of corrections (GGA field 13)"),
    _Gate("min_satellites", "", 1, "satellites", "have the receiver send the satellites used (GGA or GNS field 7)"),
)


def gate_lines(requirement: Requirement, reduction: Reduction, gates: Mapping[str, GateTally]) -> Iterator[LeaveLine]:
    """One line for each gate that the requirement states, all of scope 'set-up'.

    Args:
        gates: what was reported for the epochs that passed, see `reduce.gate_reports`.
    """
    yield _quality(requirement, reduction)
    for gate in GATES:
        wanted = getattr(requirement, gate.key)
        if wanted is not None:
            yield _line(gate, float(wanted), gates.get(gate.key, GateTally()), reduction.set_aside)


def mostly_shown(tally: GateTally) -> bool:
    """Whether what was reported speaks for nearly all of the epochs that the gate concerns."""
    return tally.not_shown <= MOST_NOT_SHOWN * (tally.shown + tally.not_shown)


def _quality(requirement: Requirement, reduction: Reduction) -> LeaveLine:
    aside = reduction.set_aside.get("quality", 0) + reduction.set_aside.get("no_fix", 0)
    wanted = " or ".join(f"{item} {QUALITY_WORDS.get(item, 'unknown')}" for item in requirement.accept_quality)
    text = "all epochs kept have it" + (f"; {aside} without it set aside" if aside else "")
    have = f"{reduction.kept} of {reduction.heard} epochs"
    return LeaveLine("accept_quality", "set-up", wanted, have, "", True, 0.0, text)


def _line(gate: _Gate, wanted: float, tally: GateTally, set_aside: Mapping[str, int]) -> LeaveLine:
    heard = tally.shown + tally.not_shown
    have = None if tally.worst is None else tally.worst / gate.per_unit
    met = mostly_shown(tally)
    if heard == 0:
        text = "no epoch that it concerns"  # an age of corrections where nothing corrects the receiver
    elif met:
        aside = set_aside.get(gate.code, 0)
        text = "worst of the epochs kept" + (f"; {aside} set aside" if aside else "")
    else:
        never = "not reported" if tally.worst is None else f"not reported for {tally.not_shown} of {heard} epochs"
        text = f"{never}, so nothing shows it: {gate.remedy}"
    return LeaveLine(gate.key, "set-up", wanted, have, gate.unit, met, 0.0 if met else None, text)
