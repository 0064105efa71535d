"""The route between two frames at a mark: equalities, the direct search, then by way of an ITRF.

Order of choice: recorded steps when they are among the sound ones; else smallest sum of stated accuracies, fewest
steps, newest ITRF. A sound operation that would be better and lacks only its grid stops the search: going round
it silently leaves out what the grid holds (up to 8 cm of uplift in Canada).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import chain

from fieldbook.errors import ReductionError
from fieldbook.model.reduction import OperationStep
from fieldbook.model.session import TakenAs
from fieldbook.reduce.constants import ACCURACY_LIMIT_M
from fieldbook.reduce.frames.candidates import Candidate, Offer, offer, step_code
from fieldbook.reduce.frames.registry import FrameInfo, frame_info, same_frame

# ITRF2020, 2014, 2008, 2005, 2000: what a route may pass when PROJ knows no direct one.
PIVOTS = ("EPSG:9989", "EPSG:7912", "EPSG:7911", "EPSG:7910", "EPSG:7909")

# IGS realisations that are an ITRF by all-zero parameters (EPSG v11.022). PROJ cannot run these time-specific
# operations, so they are recorded and not called. 9037 joins IGS08 and IGb08.
_EQUAL = {
    "EPSG:10177": ("EPSG:9989", (("10179", "ITRF2020 to IGS20 (1)"),)),
    "EPSG:9379": ("EPSG:7912", (("9381", "ITRF2014 to IGb14 (1)"),)),
    "EPSG:9018": ("EPSG:7912", (("9032", "ITRF2014 to IGS14 (1)"),)),
    "EPSG:9013": ("EPSG:7911", (("9031", "ITRF2008 to IGS08 (1)"),)),
    "EPSG:9016": ("EPSG:7911", (("9031", "ITRF2008 to IGS08 (1)"), ("9037", "IGS08 to IGb08 (1)"))),
}

_REASONS_SHOWN = 3
_ROUNDING_M = 1e-9  # decimal accuracies added in binary


@dataclass(frozen=True)
class Mark:
    """Where and when a route is wanted, and what a recorded decision allows."""

    lat_deg: float
    lon_deg: float
    epoch: float | None
    anywhere: bool = False
    over_limit: bool = False

    @property
    def rounded(self) -> tuple[float, float]:
        """To 0.001 degree: a mark that wobbles by millimetres keeps its route from the cache."""
        return round(self.lat_deg, 3), round(self.lon_deg, 3)


@dataclass(frozen=True)
class Leg:
    """One PROJ operation with the ellipsoids' frames at its ends, or an equality (`candidate` is None)."""

    source: FrameInfo
    target: FrameInfo
    steps: tuple[OperationStep, ...]
    candidate: Candidate | None


@dataclass(frozen=True)
class Route:
    """Legs in order, from the receiver's frame to the client's."""

    legs: tuple[Leg, ...]

    @property
    def steps(self) -> list[OperationStep]:
        """All recorded steps in order."""
        return list(chain.from_iterable(leg.steps for leg in self.legs))

    @property
    def codes(self) -> list[str]:
        """'EPSG:9991 inverse', 'EPSG:8049' ..."""
        return [step_code(step) for step in self.steps]

    @property
    def total_m(self) -> float:
        """Linear sum of the stated accuracies in metres."""
        return sum(step.accuracy_m or 0.0 for step in self.steps)


@dataclass(frozen=True)
class _Found:
    """What a search saw: routes that run, routes that lack a grid (both best first), all offers."""

    routes: list[Route]
    waiting: list[Route]
    offers: list[Offer]


class OperationChanged(ReductionError):
    """The recorded steps are no longer among the sound ones. `would_use`: what a search chooses now."""

    default_code = "operation_changed"

    def __init__(self, recorded: list[str], would_use: list[str]) -> None:
        super().__init__(
            f"The recorded frame operation {' + '.join(recorded)} is not offered by this version of PROJ and EPSG.",
            f"The search now chooses {' + '.join(would_use)}: strike the recorded operation, or use the old version.",
        )
        self.would_use = would_use


def find_route(
    receiver: FrameInfo,
    client: FrameInfo,
    mark: Mark,
    *,
    taken_as: tuple[TakenAs, ...] = (),
    keep_codes: list[str] | None = None,
) -> Route:
    """The route by the rules. `keep_codes` are the recorded codes of PROJ and equality steps of this route.

    Raises:
        ReductionError: not reachable, with the reasons and the remedies (`code` frame_unreachable, grid_missing,
            accuracy_over_limit); OperationChanged when recorded steps are not to be had.
    """
    before, source = _equalities(receiver, taken_as)
    after, target = _equalities(client, taken_as)
    after = [_reversed(leg) for leg in reversed(after)]
    strict = _found(source, target, mark, limit_m=ACCURACY_LIMIT_M)
    # Over the limit only where nothing under it is to be had: a decision widens the choice, it does not worsen it.
    wide = strict if strict.routes or strict.waiting else _found(source, target, mark, limit_m=math.inf)
    found = wide if mark.over_limit else strict
    routes = [Route((*before, *route.legs, *after)) for route in found.routes]
    allowed = [route for route in routes if mark.over_limit or route.total_m <= ACCURACY_LIMIT_M + _ROUNDING_M]
    kept = next((route for route in allowed if route.codes == keep_codes), None)
    if kept is None and keep_codes is not None:
        # A decision may have chosen the way round a missing grid, which the search itself does not offer.
        round_about = _by_pivots(source, target, mark, limit_m=math.inf if mark.over_limit else ACCURACY_LIMIT_M)
        others = [Route((*before, *route.legs, *after)) for route in round_about.routes]
        kept = next((route for route in others if route.codes == keep_codes), None)
    if kept is not None:
        return kept
    blocked = found.waiting and (not found.routes or _rank(found.waiting[0]) < _rank(found.routes[0]))
    if blocked:
        raise _grid_missing(receiver, client, found.waiting[0])
    if not allowed:
        over = routes or [Route((*before, *route.legs, *after)) for route in wide.routes]
        raise _refused(receiver, client, over, found.offers)
    if keep_codes is not None:
        raise OperationChanged(keep_codes, allowed[0].codes)
    return allowed[0]


def _found(source: FrameInfo, target: FrameInfo, mark: Mark, *, limit_m: float) -> _Found:
    """The direct search; by way of an ITRF only where it finds nothing sound."""
    if same_frame(source, target):
        return _Found([Route(())], [], [])
    most = limit_m + _ROUNDING_M
    direct = _offer(source.code, target.code, mark)
    routes = [Route((_leg(source, target, c),)) for c in direct.sound if c.total_m <= most]
    waiting = [Route((_leg(source, target, c),)) for c in direct.waiting if c.total_m <= most]
    if routes or waiting:
        return _Found(routes, waiting, [direct])
    by_pivots = _by_pivots(source, target, mark, limit_m=limit_m)
    return _Found(by_pivots.routes, by_pivots.waiting, [direct, *by_pivots.offers])


def _by_pivots(source: FrameInfo, target: FrameInfo, mark: Mark, *, limit_m: float) -> _Found:
    """Source to an ITRF to target, the best sound candidate of each leg."""
    routes: list[Route] = []
    waiting: list[Route] = []
    offers: list[Offer] = []
    for code in PIVOTS:
        pivot = frame_info(code)
        if same_frame(source, target) or same_frame(pivot, source) or same_frame(pivot, target):
            continue
        first, second = _offer(source.code, code, mark), _offer(code, target.code, mark)
        one, two = _best(first), _best(second)
        # Only the leg that fails says why there is no route.
        offers += [leg for leg, best in ((second, two), (first, one)) if best is None]
        if one is None or two is None:
            continue
        route = Route((_leg(source, pivot, one), _leg(pivot, target, two)))
        if route.total_m <= limit_m + _ROUNDING_M:
            (waiting if one.missing or two.missing else routes).append(route)
    return _Found(sorted(routes, key=_rank), sorted(waiting, key=_rank), offers)


def _best(found: Offer) -> Candidate | None:
    """The best sound candidate of a leg, whether it can run or lacks its grid."""
    both = sorted([*found.sound, *found.waiting], key=lambda c: c.rank)
    return both[0] if both else None


def _offer(source: str, target: str, mark: Mark) -> Offer:
    # 0.001 year is nine hours: a session under way keeps its route, and rule d works to 0.01 year.
    epoch = None if mark.epoch is None else round(mark.epoch, 3)
    return offer(source, target, *mark.rounded, epoch, anywhere=mark.anywhere)


def _rank(route: Route) -> tuple[float, int, int, list[str]]:
    newest = max((leg.candidate.newest_itrf for leg in route.legs if leg.candidate is not None), default=0)
    return round(route.total_m, 6), len(route.steps), -newest, route.codes


def _leg(source: FrameInfo, target: FrameInfo, candidate: Candidate) -> Leg:
    return Leg(source, target, candidate.steps, candidate)


def _equalities(frame: FrameInfo, taken_as: tuple[TakenAs, ...]) -> tuple[list[Leg], FrameInfo]:
    """Legs from a frame to the one it equals, by declaration and then by the IGS table, and that frame."""
    legs: list[Leg] = []
    here = frame
    for item in taken_as:
        if same_frame(frame_info(item.code), here):
            there = frame_info(item.as_code)
            step = OperationStep(
                "declared", f"{here.code}={there.code}", f"{here.name} taken as {there.name}", item.sigma_m,
                remark=item.source,
            )  # fmt: skip
            legs.append(Leg(here, there, (step,), None))
            here = there
            break
    if here.code in _EQUAL:
        code, operations = _EQUAL[here.code]
        there = frame_info(code)
        # The table's operations lead from the ITRF to the IGS frame: leaving it, they run backwards.
        steps = tuple(
            OperationStep("EPSG", number, f"Inverse of {name}", 0.0, inverse=True, remark="all parameters zero")
            for number, name in reversed(operations)
        )
        legs.append(Leg(here, there, steps, None))
        here = there
    return legs, here


def _reversed(leg: Leg) -> Leg:
    steps = tuple(_reversed_step(step) for step in reversed(leg.steps))
    return Leg(leg.target, leg.source, steps, None)


def _reversed_step(step: OperationStep) -> OperationStep:
    name = step.name.removeprefix("Inverse of ")
    if step.authority == "declared":
        return OperationStep(step.authority, step.code, step.name, step.accuracy_m, True, step.remark)
    return OperationStep(step.authority, step.code, name, step.accuracy_m, not step.inverse, step.remark)


def _grid_missing(receiver: FrameInfo, client: FrameInfo, route: Route) -> ReductionError:
    names = sorted({name for leg in route.legs if leg.candidate for name in leg.candidate.missing})
    return ReductionError(
        f"{receiver.name} to {client.name} needs {', '.join(names)}, which is not installed.",
        f"Install {', '.join(names)}, or record a decision for another operation, or give the certificate in the "
        "receiver's own frame.",
        code="grid_missing",
    )


def _refused(receiver: FrameInfo, client: FrameInfo, complete: list[Route], offers: list[Offer]) -> ReductionError:
    if complete:
        best = complete[0]
        return ReductionError(
            f"{receiver.name} to {client.name} at best states {best.total_m:.3f} m ({' + '.join(best.codes)}), "
            f"over the limit of {ACCURACY_LIMIT_M} m.",
            "Record a decision that accepts it, or give the certificate in the receiver's own frame.",
            code="accuracy_over_limit",
        )
    reasons = ["only a time-specific operation is known, which PROJ cannot run"] if any(o.stuck for o in offers) else []
    reasons += dict.fromkeys(_said(c) for found in offers for c in found.candidates if c.reason)
    said = "; ".join(reasons[:_REASONS_SHOWN]) or "PROJ has no operation between them here"
    return ReductionError(
        f"{receiver.name} to {client.name} cannot be reached at this mark: {said}.",
        "Let the receiver be corrected in the client's frame, declare an equality in [[frame.taken_as]], or give the "
        "certificate in the receiver's own frame.",
        code="frame_unreachable",
    )


def _said(candidate: Candidate) -> str:
    lacks = f", and lacks {', '.join(candidate.missing)}" if candidate.missing else ""
    return candidate.reason + lacks
