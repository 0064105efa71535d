"""The occupations of one mark, made ready to be combined: one frame and epoch, none counted twice, and what they share.

A place in another frame or epoch than the mark's is transformed through the gateway, when the register's frame was decided; the
operation then stands in its budget as a common line. Where it cannot be, or nothing was decided, the occupation is set apart
with the reason. Never are two frames averaged.
"""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass, replace

from fieldbook.check.repeats import Circumstance
from fieldbook.errors import FieldbookError
from fieldbook.model.entry import Entry
from fieldbook.model.reduction import BudgetLine, Finding
from fieldbook.model.session import Antenna, Corrections, FrameChoice, Receiver, Requirement
from fieldbook.reduce import frames
from fieldbook.reduce.budget import Term, Triple
from fieldbook.reduce.combine import Input, Shared
from fieldbook.reduce.constants import SAME_EPOCH_YEARS
from fieldbook.reduce.geodesy import enu_difference
from fieldbook.reduce.shared import UNKNOWN, Equipment, equipment_of, split_terms
from fieldbook.reduce.terms import mean_term, operation_terms

from .evidence import Evidence, Place
from .fold import Held

FRAME_OPERATION = "frame operation"
MOTION = "motion of the ground"
MARK_SCOPE = "mark: "


@dataclass(frozen=True)
class Member:
    """One occupation that takes part: its place in the mark's frame, and its budget there. transformed: operation codes."""

    held: Held
    evidence: Evidence
    place: Place
    budget: tuple[BudgetLine, ...]
    transformed: tuple[str, ...] = ()


@dataclass(frozen=True)
class Apart:
    """An occupation that takes no part. code: why, for programs; text: why, and what to do."""

    label: str
    code: str
    text: str


@dataclass(frozen=True)
class Chosen:
    """What takes part and what does not; findings about occupations that look like one and the same."""

    members: tuple[Member, ...]
    apart: tuple[Apart, ...]
    findings: tuple[Finding, ...]


def chosen_members(
    found: Sequence[tuple[Held, Evidence]],
    frame: tuple[str, str | None] | None,
    excluded: dict[tuple[str, int], Entry],
) -> Chosen:
    """The members of a mark.

    Args:
        found: its occupations with their evidence, in order of time.
        frame: the register's frame and epoch, if decided.
        excluded: occupations set apart by decision.
    """
    apart: list[Apart] = []
    findings: list[Finding] = []
    ready: list[tuple[Held, Evidence, Place]] = []
    seen: dict[str, str] = {}
    for held, evidence in found:
        reason = _left_out(held, evidence, excluded, seen)
        if reason is not None:
            apart.append(reason)
        elif evidence.place is not None:
            ready.append((held, evidence, evidence.place))
            if held.received_sha256:
                seen[held.received_sha256] = held.label
    findings += _overlaps([(held, evidence) for held, evidence, _ in ready])
    members: list[Member] = []
    target = frame or _most_frequent([place for _, _, place in ready])
    for held, evidence, place in ready:
        one = _brought(held, evidence, place, target, decided=frame is not None)
        if isinstance(one, Member):
            members.append(one)
        else:
            apart.append(one)
    return Chosen(tuple(members), tuple(apart), tuple(findings))


def _left_out(
    held: Held, evidence: Evidence, excluded: dict[tuple[str, int], Entry], seen: dict[str, str]
) -> Apart | None:
    if held.key in excluded:
        entry = excluded[held.key]
        return Apart(
            held.label, "excluded", f"Set apart by {entry.observer}, entry {entry.seq}: {entry.body['reason']}"
        )
    if evidence.simulated:
        text = "It comes from a simulated receiver: it takes no part in a coordinate."
        return Apart(held.label, "simulated", text)
    if evidence.open:
        text = "It is still open: end it in its book and add the book again."
        return Apart(held.label, "open", text)
    if evidence.place is None:
        text = "It has no coordinates in the client's frame: its ellipsoidal height is not known."
        return Apart(held.label, "no_client_position", text)
    if held.received_sha256 is not None and held.received_sha256 in seen:
        other = seen[held.received_sha256]
        text = f"It holds the same received bytes as {other}: one occupation, recorded twice, is counted once."
        return Apart(held.label, "same_bytes", text)
    return None


def _overlaps(found: Sequence[tuple[Held, Evidence]]) -> list[Finding]:
    """Two occupations of one mark at once, or one receiver at once: one of them is not what it says."""
    findings = []
    for place, (held, evidence) in enumerate(found):
        for other, second in found[place + 1 :]:
            if not (evidence.started and evidence.ended and second.started and second.ended):
                continue
            if evidence.stated is not None or second.stated is not None:
                continue
            if evidence.started <= second.ended and second.started <= evidence.ended:
                text = (
                    f"Occupations {held.label} and {other.label} overlap in time on one mark: the same occupation in two "
                    "books, or another mark. Separate or exclude one of them."
                )
                findings.append(Finding("overlap", "stop", text, {"occupations": [held.label, other.label]}))
    return findings


def _most_frequent(places: Sequence[Place]) -> tuple[str, str | None] | None:
    """Frame and epoch of most occupations, of equal ones of the first."""
    if not places:
        return None
    counted = Counter((place.frame, None if place.epoch is None else f"{place.epoch:.4f}") for place in places)
    return counted.most_common(1)[0][0]


def _brought(
    held: Held, evidence: Evidence, place: Place, target: tuple[str, str | None] | None, *, decided: bool
) -> Member | Apart:
    assert target is not None  # noqa: S101 - there is a place, so there is a target
    epoch = None if target[1] is None else float(target[1])
    if place.frame == target[0] and same_epoch(place.epoch, epoch):
        return Member(held, evidence, place, evidence.budget)
    at = "" if place.epoch is None else f" at {place.epoch:.2f}"
    if not decided:
        text = (
            f"It is given in {place.frame_name} ({place.frame}){at}, others in {target[0]}. "
            "Decide the register's frame (`register decide REG frame`): then it is transformed."
        )
        return Apart(held.label, "frame_differs", text)
    choice = FrameChoice(receiver=place.frame, client=target[0], receiver_epoch=place.epoch, client_epoch=epoch)
    when = evidence.epoch_of_observation
    try:
        client, operation = frames.transform_to_client(
            choice, place.lat_deg, place.lon_deg, place.h_m, when if when is not None else math.nan
        )
    except FieldbookError as error:
        text = f"Its place in {place.frame_name} ({place.frame}){at} cannot be brought to {target[0]}: {error}"
        return Apart(held.label, error.code, text)
    if client is None or client.x_m is None:
        text = f"Without a height its place in {place.frame} cannot be brought to {target[0]}."
        return Apart(held.label, "no_height", text)
    moved = Place(
        client.frame, client.frame_name, client.epoch, client.lat_deg, client.lon_deg, client.h_m,
        (client.x_m, client.y_m or 0.0, client.z_m or 0.0),
    )  # fmt: skip
    lines = tuple(term.line() for term in operation_terms(operation))
    return Member(held, evidence, moved, (*evidence.budget, *lines), tuple(frames.operation_codes(operation)))


def same_epoch(one: float | None, two: float | None) -> bool:
    """Whether two decimal years, or two static frames (None), are the same."""
    return (one is None and two is None) or (one is not None and two is not None and abs(one - two) <= SAME_EPOCH_YEARS)


# -- as the combination sees them ------------------------------------------------------------------------------


def requirement_of(members: Sequence[Member]) -> Requirement:
    """The strictest that was asked of the mark (smallest circle), the latest of equal ones; without limits if nothing was."""
    wanted = [item.evidence.asked for item in members if item.evidence.asked is not None]
    if not wanted:
        return Requirement(math.inf, math.inf, (), 1)
    asked = wanted[0]
    for one in wanted[1:]:
        if one.horizontal_95_m <= asked.horizontal_95_m:
            asked = one
    return Requirement(
        horizontal_95_m=asked.horizontal_95_m,
        vertical_95_m=asked.vertical_95_m,
        accept_quality=(),
        occupations=asked.occupations,
        in_frame=asked.in_frame,
        hours_between=asked.hours_between,
    )


def meets(evidence: Evidence, requirement: Requirement) -> bool:
    """Does the occupation alone reach the required accuracy, in the frame the requirement speaks of?"""
    plan, up = evidence.measured_u95_m
    if requirement.in_frame == "client frame":
        plan, up = evidence.plan_u95_m, evidence.height_u95_m
    return plan <= requirement.horizontal_95_m and up is not None and up <= requirement.vertical_95_m


def equipment(members: Sequence[Member]) -> list[Equipment]:
    """What the occupations among them share with each other: `reduce.shared`, with the figures of every party."""
    stated = []
    for item in members:
        if item.evidence.stated is not None:
            continue
        shares = item.evidence.shares
        stated.append(
            (
                Corrections(shares.corrections, shares.station),
                Antenna(shares.antenna, shares.antenna_serial),
                Receiver("", serial=shares.receiver_serial),
            )
        )
    return equipment_of(stated)


def offsets(members: Sequence[Member]) -> list[Triple]:
    """East, north, up of each from the first, metres; up None without height."""
    first = members[0].place
    ellipsoid = frames.frame_info(first.frame).ellipsoid
    level = next((item.place.h_m for item in members if item.place.h_m is not None), 0.0)
    origin = (first.lat_deg, first.lon_deg, level)
    found: list[Triple] = []
    for item in members:
        place = item.place
        end = (place.lat_deg, place.lon_deg, level if place.h_m is None else place.h_m)
        east, north, up = (float(value) for value in enu_difference(origin, end, ellipsoid))
        found.append((east, north, None if place.h_m is None else up))
    return found


def inputs_of(members: Sequence[Member], *, first_number: int = 1, mark: int | None = None) -> list[Input]:
    """The members as `reduce.combine` takes them, numbered from `first_number`.

    Args:
        mark: name the scopes so that they can be compared with those of other marks: what was not stated is the same within
            a mark (that cannot make its figure too small) and another one in other marks (that cannot make a difference
            too small). The frame operation is the same everywhere, the plumb line and what is not known of are the mark's.
    """
    found = []
    gears = iter(equipment(members))
    for number, (item, place) in enumerate(zip(members, offsets(members), strict=True)):
        evidence = item.evidence
        line = evidence.mean
        if evidence.stated is not None:
            found.append(_stated_input(item, place, first_number + number))
            continue
        gear = next(gears)
        mean = mean_term(line.u_enu_m, line.dof_enu, line.rho_en)
        mean, own, shared = split_terms(list(item.budget), mean, gear)
        if evidence.governed_by != "data":
            mean = replace(mean, group=f"mean, {evidence.fix_class}")
        if mark is not None:
            shared = tuple(_across(one, gear, mark) for one in shared)
        found.append(Input(first_number + number, place, mean, own, shared, evidence.prior_u_enu_m))
    return found


def _stated_input(item: Member, place: Triple, number: int) -> Input:
    """A coordinate from elsewhere: its own part, what all of its source share, and the operation that brought it here."""
    evidence, stated = item.evidence, item.evidence.stated
    assert stated is not None  # noqa: S101 - the caller has looked
    line, name = evidence.mean, f"{stated.kind}, {stated.source}"
    mean = Term(f"stated: {name}", "B", "as stated", line.u_enu_m, (None, None, None), rho_en=line.rho_en)
    common = Term(f"common to the source: {name}", "B", "as stated", stated.common_u_enu_m, common=True)
    shared = [Shared(common, f"source {stated.source}")]
    for extra in item.budget[len(evidence.budget) :]:
        east, north, up = extra.u_enu_m
        term = Term(extra.source, extra.type, extra.distribution, (east, north, up), common=True, note=extra.note)
        shared.append(Shared(term, MARK_SCOPE + extra.source))
    return Input(number, place, mean, (), tuple(shared), evidence.prior_u_enu_m)


def _across(shared: Shared, gear: Equipment, mark: int) -> Shared:
    scope = shared.scope
    no_serial = gear.antenna == gear.antenna_type and scope == f"floor of antenna {gear.antenna}"
    unknown = no_serial or scope.endswith((f"station {UNKNOWN}", f"receiver {UNKNOWN}"))
    common = scope.startswith((MARK_SCOPE + FRAME_OPERATION, MARK_SCOPE + MOTION))
    alone = scope.startswith(MARK_SCOPE) and not common
    return replace(shared, scope=f"{scope}, mark {mark}") if unknown or alone else shared


def circumstances(members: Sequence[Member]) -> list[Circumstance]:
    """What independence and fixed tolerances are judged by; numbered from 1 as the inputs are."""
    found, requirement = [], requirement_of(members)
    for number, item in enumerate(members, 1):
        evidence, shares = item.evidence, item.evidence.shares
        found.append(
            Circumstance(
                occupation=number,
                started=evidence.started,
                ended=evidence.ended,
                sigma_plan_m=evidence.sigma_plan_m,
                sigma_height_m=evidence.sigma_height_m,
                meets=meets(evidence, requirement),
                arp_height_m=evidence.antenna_height_m,
                tribrach=evidence.tribrach,
                antenna=_antenna(evidence),
                observer=evidence.observer,
                station=shares.station,
                receiver=shares.receiver_serial,
            )
        )
    return found


def _antenna(evidence: Evidence) -> str | None:
    """What stood on the mark; a coordinate from elsewhere came by other means than any tripod of ours."""
    if evidence.stated is not None:
        return f"{evidence.stated.kind}, {evidence.stated.source}"
    shares = evidence.shares
    return f"{shares.antenna} {shares.antenna_serial}" if shares.antenna_serial else None


def parties_of(members: Sequence[Member]) -> dict[str, list[str]]:
    """Books, parties, observers and receivers behind a mark: sorted texts."""
    return {
        "books": sorted({item.held.book for item in members}),
        "parties": sorted({item.evidence.party for item in members if item.evidence.party}),
        "observers": sorted({item.evidence.observer for item in members if item.evidence.observer}),
        "receivers": sorted(
            {item.evidence.shares.receiver_serial for item in members if item.evidence.shares.receiver_serial}
        ),
    }
