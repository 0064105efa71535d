"""The marks of a book: all occupations of one mark as one coordinate, with its own verdict.

In: the `Reduced` of a book and its folded state. Out: one `MarkResult` per occupied mark, also for those with one
occupation. Two occupations can be combined when both were observed in the same receiver's frame and both were brought to
the same frame and epoch of the client: positions of a moving frame at two dates are two different things. What cannot be
combined is listed with its reason, never left out in silence.

Order: which ones -> offsets in metres about the first -> `reduce.combine` -> client, grid, height -> `check.repeats` ->
findings -> the mark's own leave check.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from fieldbook.check.leave import NOT_BLOCKING
from fieldbook.check.mark_leave import mark_leave, reaches_accuracy
from fieldbook.check.repeats import Circumstance, Judged, compare, repeat_findings
from fieldbook.model.reduction import (
    ClientPosition,
    Finding,
    GridPosition,
    Height,
    MarkOccupation,
    MarkResult,
    NotCombined,
    Uncertainty,
)
from fieldbook.model.session import Requirement, Session
from fieldbook.model.state import BookState, Occupation
from fieldbook.occupy.local_positions import attach_to_marks
from fieldbook.occupy.reductions import Failure
from fieldbook.reduce import frames
from fieldbook.reduce.budget import welch_satterthwaite
from fieldbook.reduce.combine import (
    Combination,
    Input,
    LinearForm,
    class_mean_u_m,
    combine_occupations,
    linear_form,
    printed_lines,
)
from fieldbook.reduce.constants import SAME_EPOCH_YEARS
from fieldbook.reduce.fix_classes import CLASSES, ClassOfFix
from fieldbook.reduce.geodesy import enu_difference, geocentric, moved_by_enu
from fieldbook.reduce.geoid import height_above_geoid
from fieldbook.reduce.gridhashes import meant_geoid
from fieldbook.reduce.occupation import METHOD, Reduced
from fieldbook.reduce.prediction import type_a
from fieldbook.reduce.region import coverage_factor_95
from fieldbook.reduce.shared import Equipment, equipment_of, split_terms
from fieldbook.reduce.stated import stated_uncertainty
from fieldbook.reduce.terms import mean_term

METHOD_SEVERAL = (
    "occupations weighted by kind of fix and length, generalised least squares; what they share is not averaged; "
    f"each: {METHOD}"
)


@dataclass(frozen=True)
class _Member:
    """One occupation with its reduction."""

    reduced: Reduced
    occupation: Occupation

    @property
    def number(self) -> int:
        return self.occupation.number

    @property
    def session(self) -> Session:
        return self.occupation.session


def combine_marks(
    state: BookState, reduced: Sequence[Reduced], search_dirs: Sequence[Path], failed: Sequence[Failure] = ()
) -> list[MarkResult]:
    """One result per mark that has a reduction, in order of the first occupation.

    Args:
        state: the folded book the reductions were made from.
        reduced: with findings (`occupy.reductions.judge`), all occupations of each mark.
        search_dirs: folders in which a geoid model is looked for before the package's own.
        failed: occupations that could not be reduced; they are listed as not combined.

    Raises:
        ReductionError: grid or geoid of the combined mark cannot be reached (each occupation's own could).
    """
    marks: dict[str, list[_Member]] = {}
    for item in sorted(reduced, key=lambda one: one.reduction.occupation):
        member = _Member(item, state.occupations[item.reduction.occupation])
        marks.setdefault(member.occupation.mark, []).append(member)
    results = [
        _mark(name, members, [item for item in failed if item.mark == name], search_dirs)
        for name, members in marks.items()
    ]
    attach_to_marks(state, results, reduced)
    return results


def _mark(name: str, members: list[_Member], failed: list[Failure], search_dirs: Sequence[Path]) -> MarkResult:
    used, left_out = _chosen(members)
    left_out += [
        NotCombined(item.occupation, item.error.code, f"It was not reduced: {item.error.text} {item.error.remedy}")
        for item in failed
    ]
    left_out.sort(key=lambda item: item.occupation)
    result = MarkResult(
        mark=name,
        occupations=sorted([*(item.number for item in members), *(item.occupation for item in failed)]),
        used=[],
        not_combined=left_out,
        odd_one=None,
        started=min((item.reduced.reduction.started or "" for item in used), default="") or None,
        ended=max((item.reduced.reduction.ended or "" for item in used), default="") or None,
        kept_s=sum(item.reduced.reduction.kept_s for item in used),
        receiver_frame=used[0].reduced.reduction.receiver.frame if used else None,
        client=None,
        grid=None,
        height=None,
        uncertainty=None,
        uncertainty_client=None,
    )
    requirement = _requirement(members)
    judged = Judged([], None)
    if used:
        judged = _combined(result, used, requirement, search_dirs)
    circumstances = [_circumstance(item, requirement) for item in used]
    result.findings = _findings(result, used, repeat_findings(judged, circumstances))
    result.leave = mark_leave(requirement, result, [item.reduced.reduction for item in used])
    return result


# -- which ones ------------------------------------------------------------------------------------------------


def _chosen(members: list[_Member]) -> tuple[list[_Member], list[NotCombined]]:
    """Those that share frames and epochs, and why not the others.

    Of several such groups the one with most occupations that meet the required accuracy, of equal ones the one with the
    best occupation.
    """
    if len(members) == 1:
        return members, []
    groups: list[list[_Member]] = []
    left_out: list[NotCombined] = []
    for item in members:
        if item.reduced.reduction.client is None:
            text = "It has no coordinates in the client's frame (no ellipsoidal height): read the antenna height, or see whether the receiver sends the geoid separation."
            left_out.append(NotCombined(item.number, "no_client_position", text))
            continue
        group = next((found for found in groups if _same_frames(found[0], item)), None)
        if group is None:
            groups.append([item])
        else:
            group.append(item)
    if not groups:
        return [], left_out
    requirement = _requirement(members)
    best = max(groups, key=lambda group: _worth(group, requirement))
    for group in groups:
        if group is not best:
            left_out += [NotCombined(item.number, *_why_not(best[0], item)) for item in group]
    return best, left_out


def _worth(group: list[_Member], requirement: Requirement) -> tuple[int, float, int]:
    best_m = min(item.reduced.reduction.uncertainty.horizontal95_m for item in group)
    return sum(reaches_accuracy(requirement, item.reduced.reduction) for item in group), -best_m, -group[0].number


def _requirement(members: list[_Member]) -> Requirement:
    """The strictest of the mark (smallest circle), the latest of equal ones: a careless session cannot loosen it."""
    found = members[0].session.requirement
    for item in members[1:]:
        if item.session.requirement.horizontal_95_m <= found.horizontal_95_m:
            found = item.session.requirement
    return found


def _same_frames(one: _Member, two: _Member) -> bool:
    return _why_not(one, two)[0] == ""


def _why_not(one: _Member, two: _Member) -> tuple[str, str]:
    """(code, text) why `two` does not go together with `one`; ("", "") if it does. Both have a client position."""
    first, second = one.reduced.reduction, two.reduced.reduction
    here, there = first.client, second.client
    assert here is not None  # noqa: S101 - the caller has looked
    assert there is not None  # noqa: S101
    if first.receiver.frame != second.receiver.frame:
        return "receiver_frame_differs", (
            f"It was observed in {second.receiver.frame_name} ({second.receiver.frame}), the others in "
            f"{first.receiver.frame_name} ({first.receiver.frame}): their errors of frame are not common. "
            "See that the receiver's frame is stated rightly; certify it alone."
        )
    if here.frame != there.frame:
        return "client_frame_differs", (
            f"It is wanted in {there.frame_name} ({there.frame}), the others in {here.frame_name} ({here.frame}). "
            "State one client frame for the mark."
        )
    if (here.epoch is None) != (there.epoch is None) or abs((here.epoch or 0.0) - (there.epoch or 0.0)) > (
        SAME_EPOCH_YEARS
    ):
        return "epoch_differs", (
            f"It is at epoch {there.epoch}, the others at {here.epoch}, in a frame that moves: the mark is at two places. "
            "Take a static client frame, or state one client_epoch."
        )
    return "", ""


# -- the combination -------------------------------------------------------------------------------------------


def _combined(result: MarkResult, used: list[_Member], requirement: Requirement, search_dirs: Sequence[Path]) -> Judged:
    """Fill in position, uncertainty, residuals and repeats."""
    equipment = equipment_of([(i.session.corrections, i.session.antenna, i.session.receiver) for i in used])
    offsets = _offsets(used)
    inputs = _inputs(used, equipment, offsets, in_client=False)
    found = combine_occupations(inputs)
    result.used = [
        MarkOccupation(
            occupation=item.number,
            open=item.reduced.reduction.open,
            fix_class=item.reduced.estimate.fix_class.name,
            kept_s=item.reduced.reduction.kept_s,
            weight_enu=[float(value) for value in found.weights[row]],
            residual_enu_m=list(residual.form.enu_m),
            residual_u_enu_m=list(residual.form.combined.u_enu_m),
            plan_significance=residual.plan_significance,
            height_significance=residual.height_significance,
        )
        for row, (item, residual) in enumerate(zip(used, found.residuals, strict=True))
    ]
    result.uncertainty = _uncertainty(found.form, used, with_common=False)
    client = used[0].reduced.reduction.client
    if client is not None:
        in_client = linear_form(_inputs(used, equipment, offsets, in_client=True), found.weights)
        result.uncertainty_client = _uncertainty(in_client, used, with_common=True)
        result.client = _client(client, found, used)
        result.grid = _grid(result.client, used[-1])
        result.height = _height(result.client, in_client, used[-1], search_dirs)
    judged = compare(inputs, [_circumstance(item, requirement) for item in used], requirement)
    result.repeats, result.odd_one = judged.repeats, judged.odd_one
    return judged


def _offsets(used: list[_Member]) -> list[tuple[float, float, float | None]]:
    """East, north, up of each from the first, in the client's frame. One alone is its own origin."""
    clients = [item.reduced.reduction.client for item in used]
    first = clients[0]
    if first is None:
        return [(0.0, 0.0, None if used[0].reduced.reduction.receiver.h_m is None else 0.0)]
    ellipsoid = frames.frame_info(first.frame).ellipsoid
    level = next((item.h_m for item in clients if item is not None and item.h_m is not None), 0.0)
    origin = (first.lat_deg, first.lon_deg, level)
    found: list[tuple[float, float, float | None]] = []
    for item in clients:
        assert item is not None  # noqa: S101 - only those with a client position are combined
        place = (item.lat_deg, item.lon_deg, level if item.h_m is None else item.h_m)
        east, north, up = (float(value) for value in enu_difference(origin, place, ellipsoid))
        found.append((east, north, None if item.h_m is None else up))
    return found


def _inputs(
    used: list[_Member],
    equipment: list[Equipment],
    offsets: list[tuple[float, float, float | None]],
    *,
    in_client: bool,
) -> list[Input]:
    found = []
    for item, gear, offset in zip(used, equipment, offsets, strict=True):
        reduction, estimate = item.reduced.reduction, item.reduced.estimate
        stated = reduction.uncertainty_client if in_client else reduction.uncertainty
        part = type_a(estimate.mean)
        mean, own, shared = split_terms(
            (stated or reduction.uncertainty).budget, mean_term(part.u_enu_m, part.dof_enu, part.rho_en), gear
        )
        if estimate.mean.governed_by != "data":
            mean = replace(mean, group=f"mean, {estimate.fix_class.name}")
        prior = class_mean_u_m(estimate.fix_class, reduction.kept_s)
        found.append(Input(item.number, offset, mean, own, shared, prior))
    return found


def _uncertainty(form: LinearForm, used: list[_Member], *, with_common: bool) -> Uncertainty:
    governed = {item.reduced.mean.governed_by for item in used}
    return stated_uncertainty(
        form.combined,
        printed_lines(form.terms),
        correlation_time_s=used[0].reduced.mean.tau_s if len(used) == 1 else None,
        governed_by=governed.pop() if len(governed) == 1 else "class and data",
        method=METHOD if len(used) == 1 else METHOD_SEVERAL,
        with_common=with_common,
    )


def _client(first: ClientPosition, found: Combination, used: list[_Member]) -> ClientPosition:
    """The origin moved by the combined offset; one occupation alone stays as it is, to the last bit."""
    if len(used) == 1:
        return first
    clients = [item.reduced.reduction.client for item in used]
    level = next((item.h_m for item in clients if item is not None and item.h_m is not None), None)
    ellipsoid = frames.frame_info(first.frame).ellipsoid
    east, north, up = found.form.enu_m
    offset = (east or 0.0, north or 0.0, up or 0.0)
    lat, lon, h = moved_by_enu((first.lat_deg, first.lon_deg, level or 0.0), offset, ellipsoid)
    epochs = [item.epoch for item in clients if item is not None and item.epoch is not None]
    epoch = sum(epochs) / len(epochs) if epochs else None
    if up is None or level is None:
        return ClientPosition(first.frame, first.frame_name, epoch, lat, lon, None, None, None, None)
    x, y, z = (float(value) for value in np.asarray(geocentric(lat, lon, h, ellipsoid)))
    return ClientPosition(first.frame, first.frame_name, epoch, lat, lon, h, x, y, z)


def _grid(client: ClientPosition, latest: _Member) -> GridPosition | None:
    grid = latest.session.frame.grid
    if grid is None:
        return None
    return frames.project(
        client.frame,
        grid,
        client.lat_deg,
        client.lon_deg,
        client.h_m,
        outside_area_accepted=latest.occupation.outside_area_accepted,
    )


def _height(client: ClientPosition, form: LinearForm, latest: _Member, dirs: Sequence[Path]) -> Height | None:
    geoid = latest.session.frame.geoid
    epoch = latest.reduced.reduction.epoch_of_observation
    if geoid is None or client.h_m is None or epoch is None:
        return None
    height = height_above_geoid(client, geoid, dirs, epoch_of_observation=epoch, meant=meant_geoid(latest.occupation))
    u_h, u_n = form.combined.u_enu_m[2], height.undulation_u_m
    if u_h is not None and u_n is not None:
        u_total, dof = welch_satterthwaite([(u_h, form.combined.dof_enu[2]), (u_n, None)])
        height.vertical95_m = coverage_factor_95(dof) * u_total
    return height


# -- what is said of it ----------------------------------------------------------------------------------------


def _circumstance(item: _Member, requirement: Requirement) -> Circumstance:
    reduction, session = item.reduced.reduction, item.session
    kind = class_for_tolerance(item.reduced, session)
    antenna = session.antenna
    return Circumstance(
        occupation=item.number,
        started=reduction.started,
        ended=reduction.ended,
        sigma_plan_m=kind.horizontal_m,
        sigma_height_m=kind.vertical_m,
        meets=reaches_accuracy(requirement, item.reduced.reduction),
        arp_height_m=reduction.antenna.height_arp_m,
        tribrach=session.setup.tribrach_id,
        antenna=f"{antenna.model} {antenna.serial}" if antenna.serial else None,
        observer=item.occupation.observer or session.job.observer or None,
        station=session.corrections.station,
        receiver=session.receiver.serial,
        entry_seq=item.occupation.entry_seq,
    )


def class_for_tolerance(reduced: Reduced, session: Session) -> ClassOfFix:
    """The table's class, or the stated one: a receiver's bad opinion of itself (GST) does not widen a fixed tolerance."""
    found = reduced.estimate.fix_class
    if session.receiver.fix_class is not None:
        stated = session.receiver.fix_class
        return ClassOfFix(
            found.name, stated.horizontal_m, stated.vertical_m, stated.correlation_s, "", stated.source, found.margin
        )
    return next((one for one in CLASSES if one.name == found.name), found)


def _findings(result: MarkResult, used: list[_Member], of_repeats: list[Finding]) -> list[Finding]:
    found: list[Finding] = []
    for code, words in (("", "are open"), ("simulated", "come from a simulated receiver")):
        stops = {
            item.number: [
                finding.code
                for finding in item.reduced.reduction.findings
                if finding.severity == "stop" and (finding.code in NOT_BLOCKING) == bool(code)
            ]
            for item in used
        }
        stops = {number: codes for number, codes in stops.items() if codes}
        if stops and code:
            found.append(Finding(code, "stop", f"Occupations {_list(stops)} {words}; a certificate stays a draft."))
        elif stops:
            named = "; ".join(f"{number}: {', '.join(codes)}" for number, codes in stops.items())
            text = f"Findings that stop {words} in occupations of this mark ({named}). Answer them there, or strike."
            found.append(Finding("occupation_has_stop", "stop", text, {"occupations": sorted(stops)}))
    found += of_repeats
    for left in result.not_combined:
        text = f"Occupation {left.occupation} is not combined. {left.text}"
        found.append(Finding("not_combined", "caution", text, {"occupation": left.occupation, "why": left.code}))
    running = [item.number for item in used if item.reduced.reduction.open]
    if running and len(used) > 1:
        text = f"Occupation {_list(running)} is still open: the combined figures will change."
        found.append(Finding("occupation_open", "info", text, {"occupations": running}))
    order = ("stop", "caution", "info")
    return sorted(found, key=lambda item: order.index(item.severity))


def _list(numbers: Sequence[int] | dict[int, list[str]]) -> str:
    return ", ".join(str(number) for number in numbers)
