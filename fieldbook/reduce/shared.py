"""Which lines of an occupation's budget another occupation shares, and with whom.

Strategy: the budget says which lines are `common`; this module says WITH WHOM, as a scope. Two occupations with the same
scope carry the same error, so it never averages away; with different scopes the errors are independent.

    station            coordinates of the station that corrects; one half of the common half of the floor
    antenna            phase centre (by type); the other half of the common half of the floor (by type and serial)
    receiver           resolution of the geoid separation it prints
    mark               plumb line, frame operation, and every common line this table does not know

The common half of the floor (the least uncertainty claimed for a kind of fix) goes by station AND antenna: with both the
same it is wholly common, with one of them the same half of it, with neither nothing. What is not stated cannot be shown
to differ: one occupation without a station makes all of that mark share one, the same for a serial number within its
type. Different kinds of fix share what the smaller floor is (`combine`).
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

from fieldbook.model.reduction import BudgetLine
from fieldbook.model.session import Antenna, Corrections, Receiver
from fieldbook.reduce.budget import Term, Triple
from fieldbook.reduce.combine import Shared
from fieldbook.reduce.fix_classes import FLOOR_DOF

FLOOR_PREFIX = "least uncertainty claimed"
MEAN_SOURCE = "mean of the kept epochs"
SEPARATION_PREFIX = "resolution of the received geoid separation"
PHASE_CENTRE_PREFIX = "phase centre of the antenna"
STATION_PREFIX = "coordinates of station"
UNKNOWN = "not stated"


@dataclass(frozen=True)
class Equipment:
    """Scope names of one occupation, after `equipment_of` has looked at all of the mark."""

    station: str
    antenna: str
    antenna_type: str
    receiver: str


def equipment_of(stated: Sequence[tuple[Corrections, Antenna, Receiver]]) -> list[Equipment]:
    """What each occupation of a mark shares with which other, from what all of them state."""
    stations = _closed([_station(corrections) for corrections, _, _ in stated])
    receivers = _closed([receiver.serial or None for _, _, receiver in stated])
    serials: dict[str, list[str | None]] = {}
    for _, antenna, _ in stated:
        serials.setdefault(antenna.model, []).append(antenna.serial or None)
    single = {model: None in known for model, known in serials.items()}
    return [
        Equipment(
            station=station,
            antenna=antenna.model if single[antenna.model] else f"{antenna.model} {antenna.serial}",
            antenna_type=antenna.model,
            receiver=receiver,
        )
        for (_, antenna, _), station, receiver in zip(stated, stations, receivers, strict=True)
    ]


def _station(corrections: Corrections) -> str | None:
    """None = cannot be told. Without corrections all share the satellites' own errors."""
    if corrections.kind in ("none", "satellite"):
        return corrections.kind
    return corrections.station or None


def _closed(names: Sequence[str | None]) -> list[str]:
    return [UNKNOWN] * len(names) if None in names else [str(name) for name in names]


def split_terms(
    lines: Sequence[BudgetLine], mean: Term, equipment: Equipment
) -> tuple[Term, tuple[Term, ...], tuple[Shared, ...]]:
    """(mean, own lines, shared lines) of one occupation's printed budget.

    Args:
        lines: budget of the reduction, in the receiver's or the client's frame.
        mean: its Type A line with the dof of each axis and the correlation, which the printed line does not carry.
        equipment: what the occupation shares.

    Raises:
        ValueError: the budget has no Type A mean.
    """
    if not any(line.type == "A" and line.source == MEAN_SOURCE for line in lines):
        raise ValueError(f"the budget has no line '{MEAN_SOURCE}'")
    own: list[Term] = []
    shared: list[Shared] = []
    for line in lines:
        if line.type == "A" and line.source == MEAN_SOURCE:
            continue
        term = _term(line)
        if not line.common:
            own.append(term)
        elif line.source.startswith(FLOOR_PREFIX):
            half = _divided(term, math.sqrt(2))
            shared.append(Shared(half, f"floor of station {equipment.station}"))
            shared.append(Shared(half, f"floor of antenna {equipment.antenna}"))
        else:
            shared.append(Shared(term, _scope(line.source, equipment)))
    return mean, tuple(own), tuple(shared)


def _scope(source: str, equipment: Equipment) -> str:
    if source.startswith(SEPARATION_PREFIX):
        return f"separation of receiver {equipment.receiver}"
    if source.startswith(PHASE_CENTRE_PREFIX):
        return f"phase centre of {equipment.antenna_type}{source.removeprefix(PHASE_CENTRE_PREFIX)}"
    if source.startswith(STATION_PREFIX):
        return f"coordinates of station {equipment.station}"
    return f"mark: {source}"


def _term(line: BudgetLine) -> Term:
    east, north, up = line.u_enu_m
    floor = line.source.startswith(FLOOR_PREFIX)
    dof = FLOOR_DOF if floor else line.dof
    return Term(
        line.source,
        line.type,
        line.distribution,
        (east, north, up),
        (dof, dof, dof),
        common=line.common,
        group="floor" if floor else None,
        note=line.note,
    )


def _divided(term: Term, divisor: float) -> Term:
    parts = [None if value is None else value / divisor for value in term.u_enu_m]
    u: Triple = (parts[0], parts[1], parts[2])
    return replace(term, u_enu_m=u)
