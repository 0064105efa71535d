"""Two reduced marks of one book and the line between them, so that a tape or a total station can check both at once.

The uncertainty is that of the difference of two combined marks, not of each alone: station, antenna, receiver and frame
operation are the same error in both where they are the same (`reduce.shared`), and drop out. The plumb line does not: its
deflection is another one at another mark.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from fieldbook.book.store import Book
from fieldbook.errors import UsageError
from fieldbook.model.inverse import GridLine, Inverse, Taped
from fieldbook.model.state import BookState
from fieldbook.occupy.mark_results import MarkPosition, mark_position
from fieldbook.reduce import frames
from fieldbook.reduce.between import SHORTEST_M, distances, halfwidths
from fieldbook.reduce.combine import Input, LinearForm, class_mean_u_m, linear_form, printed_lines
from fieldbook.reduce.constants import SAME_EPOCH_YEARS
from fieldbook.reduce.prediction import type_a
from fieldbook.reduce.region import NORMAL_95
from fieldbook.reduce.shared import equipment_of, split_terms
from fieldbook.reduce.terms import mean_term

PLUMB_LINE = "plumb line"
ASSUMED = (
    "What both marks share (station, antenna type, receiver, frame operation) is taken as the same error at both.",
    "The axes of both marks are taken as parallel.",
    "The deflection of the vertical is taken as another one at each mark.",
    "Centring, levelling and refraction of the measurement that checks the line are not in these figures.",
)


def inverse(book: Book, first: str, second: str, taped: tuple[float, float] | None = None) -> Inverse:
    """The line from the first mark to the second.

    Args:
        taped: a slope distance measured between the marks, and its standard uncertainty, metres.

    Raises:
        UsageError: the same mark twice, an unknown one, or marks in different frames or epochs; a taped distance that
            is not positive, or where a height is not known.
        ReductionError: a mark cannot be reduced.
    """
    if first == second:
        raise UsageError("A line needs two marks.", "Name two different marks.", code="same_mark")
    state = book.state()
    ends = mark_position(book, first), mark_position(book, second)
    _check_frames(*ends)
    one, two = (item.client for item in ends)
    ellipsoid = frames.frame_info(one.frame).ellipsoid
    length, azimuth, reverse = frames.geodesic(ellipsoid, (one.lat_deg, one.lon_deg), (two.lat_deg, two.lon_deg))
    form = _difference(state, ends)
    direction = azimuth if length >= SHORTEST_M else None
    places = [(item.lat_deg, item.lon_deg, item.h_m) for item in (one, two)]
    found = distances(places[0], places[1], ellipsoid, length, azimuth)
    rise = None if one.h_m is None or two.h_m is None else two.h_m - one.h_m
    wide = halfwidths(form.combined, direction, length, found.slope_m, rise)
    heights = [item.result.height for item in ends]
    same_model = heights[0] and heights[1] and heights[0].model_sha256 == heights[1].model_sha256
    return Inverse(
        first=first,
        second=second,
        frame=one.frame,
        frame_name=one.frame_name,
        epoch=one.epoch,
        azimuth_deg=direction,
        reverse_azimuth_deg=None if direction is None else reverse,
        geodesic_m=length,
        chord_m=found.chord_m,
        ground_m=found.ground_m,
        mean_height_m=found.mean_height_m,
        slope_m=found.slope_m,
        height_difference_m=rise,
        physical_difference_m=heights[1].orthometric_m - heights[0].orthometric_m  # type: ignore[union-attr]
        if same_model
        else None,
        height_model=heights[0].model if same_model else None,  # type: ignore[union-attr]
        distance95_m=wide.distance_m,
        azimuth95_arcsec=wide.azimuth_arcsec,
        slope95_m=wide.slope_m,
        height95_m=wide.height_m if rise is not None else None,
        u_enu_m=list(form.combined.u_enu_m),
        cov_en_m2=[list(row) for row in form.combined.cov_en_m2],
        dof_enu=list(form.combined.dof_enu),
        grid=_grid(ends, found.ground_m),
        taped=_taped(taped, found.slope_m, wide.slope_m),
        budget=printed_lines(form.terms),
        assumed=list(ASSUMED),
    )


def _check_frames(first: MarkPosition, second: MarkPosition) -> None:
    one, two = first.client, second.client
    if one.frame != two.frame or one.frame_name != two.frame_name:
        raise UsageError(
            f"{first.result.mark} is in {one.frame_name} ({one.frame}), {second.result.mark} in {two.frame_name} "
            f"({two.frame}).",
            "A line needs both marks in one frame: correct frame.client by `fieldbook entry BOOK setup`.",
            code="frames_differ",
        )
    if one.epoch is not None and two.epoch is not None and abs(one.epoch - two.epoch) > SAME_EPOCH_YEARS:
        raise UsageError(
            f"{first.result.mark} is at epoch {one.epoch:.3f}, {second.result.mark} at {two.epoch:.3f}: a moving frame.",
            "State one client_epoch for both, with [[frame.motion]].",
            code="epochs_differ",
        )


def _difference(state: BookState, ends: tuple[MarkPosition, MarkPosition]) -> LinearForm:
    """Second mark minus first, with the budget of the difference."""
    members = [(item, reduced) for item in ends for reduced in item.members]
    sessions = [state.occupations[reduced.reduction.occupation].session for _, reduced in members]
    equipment = equipment_of([(one.corrections, one.antenna, one.receiver) for one in sessions])
    inputs: list[Input] = []
    rows: list[np.ndarray] = []
    for (end, reduced), gear in zip(members, equipment, strict=True):
        reduction, estimate = reduced.reduction, reduced.estimate
        part = type_a(estimate.mean)
        stated = reduction.uncertainty_client or reduction.uncertainty
        mean, own, shared = split_terms(stated.budget, mean_term(part.u_enu_m, part.dof_enu, part.rho_en), gear)
        name = end.result.mark
        apart = tuple(
            replace(item, scope=f"{item.scope}, mark {name}") if item.term.source.startswith(PLUMB_LINE) else item
            for item in shared
        )
        height = None if reduction.client is None or reduction.client.h_m is None else 0.0
        prior = class_mean_u_m(estimate.fix_class, reduction.kept_s)
        inputs.append(Input(reduction.occupation, (0.0, 0.0, height), mean, own, apart, prior))
        used = next(item for item in end.result.used if item.occupation == reduction.occupation)
        rows.append((1.0 if end is ends[1] else -1.0) * np.asarray(used.weight_enu))
    coefficients = np.array(rows)
    if any(end.client.h_m is None for end in ends):
        coefficients[:, 2] = 0.0
    return linear_form(inputs, coefficients)


def _grid(ends: tuple[MarkPosition, MarkPosition], ground_m: float | None) -> GridLine | None:
    one, two = (item.result.grid for item in ends)
    if one is None or two is None or one.crs != two.crs:
        return None
    return grid_line(one.crs, one.crs_name, (one.easting_m, one.northing_m), (two.easting_m, two.northing_m), ground_m)


def grid_line(
    crs: str, crs_name: str, first: tuple[float, float], second: tuple[float, float], ground_m: float | None
) -> GridLine:
    """Distance and bearing on the plane between two places (east, north) in metres."""
    east, north = second[0] - first[0], second[1] - first[1]
    distance = float(np.hypot(east, north))
    bearing = float(np.degrees(np.arctan2(east, north))) % 360.0 if distance >= SHORTEST_M else None
    return GridLine(crs, crs_name, distance, bearing, distance / ground_m if ground_m else None)


def _taped(taped: tuple[float, float] | None, slope_m: float | None, slope95_m: float | None) -> Taped | None:
    if taped is None:
        return None
    measured, u = taped
    if slope_m is None or slope95_m is None:
        raise UsageError(
            "A slope distance cannot be compared: the height of one mark is not known.",
            "Leave it out.",
            code="no_height",
        )
    if not (0.0 < measured < 1e6 and 0.0 < u < 1e3):
        raise UsageError("The measured distance and its uncertainty must be positive metres.", "Correct them.")
    limit = float(np.hypot(slope95_m, NORMAL_95 * u))
    difference = measured - slope_m
    return Taped(measured, u, difference, limit, abs(difference) <= limit)
