"""Receiver's frame and epoch to the client's: identity, stated motion, route; then everything is recorded.

Same datum and same epoch: PROJ is not called at all. Otherwise the position goes through the legs of the route
with the operation epoch always as the fourth number, every result is tested for being finite, and the shift is
formed through geocentric coordinates, each frame on its own ellipsoid.
"""

from __future__ import annotations

import hashlib
import math
from pathlib import Path

from pyproj.exceptions import ProjError

from fieldbook.errors import ReductionError
from fieldbook.model.reduction import ClientPosition, GridFile, Operation, OperationStep
from fieldbook.model.session import FrameChoice, Motion
from fieldbook.reduce.constants import ACCURACY_LIMIT_M, PLATE_ROTATIONS, PLATE_SOURCES
from fieldbook.reduce.frames.candidates import step_code
from fieldbook.reduce.frames.choice import (
    check_frames,
    client_epoch_of,
    motion_of,
    operation_epoch_of,
    receiver_epoch_of,
)
from fieldbook.reduce.frames.registry import ITRF2020, FrameInfo, frame_info, inside, same_frame, shortened
from fieldbook.reduce.frames.route import Leg, Mark, Route, find_route
from fieldbook.reduce.geodesy import (
    Position,
    enu_difference,
    geocentric,
    geographic,
    plate_velocity_m,
    wrapped_longitude,
)

_IDENTITY = "identity: receiver's and client's frame and epoch are the same"


def operation_codes(operation: Operation) -> list[str]:
    """The codes that an `operation` entry records: ['EPSG:9991 inverse', 'EPSG:8049']."""
    return [step_code(step) for step in operation.steps]


def transform_to_client(
    choice: FrameChoice,
    lat_deg: float,
    lon_deg: float,
    h_m: float | None,
    epoch_of_observation: float,
    *,
    keep_steps: list[str] | None = None,
    accuracy_over_limit: bool = False,
    outside_area_accepted: bool = False,
) -> tuple[ClientPosition | None, Operation]:
    """The mark in the client's frame and epoch, with the operation that brought it there.

    Args:
        lat_deg, lon_deg, h_m: the mark in the receiver's frame; h None = unknown. Then the client is None, unless
            both frames are the same (identity, h None); the operation is found all the same.
        epoch_of_observation: decimal year of the mean UTC of the kept epochs.
        keep_steps: recorded step codes; preferred when they are among the sound ones.
        accuracy_over_limit, outside_area_accepted: recorded decisions.

    Raises:
        UsageError: the choice itself is refused (`check_frames`).
        ReductionError: not reachable at this mark, with the remedy; OperationChanged (code operation_changed) when
            `keep_steps` are not to be had any more.
    """
    check_frames(choice)
    receiver, client = frame_info(choice.receiver), frame_info(choice.client)
    lon_deg = _checked_place(lat_deg, lon_deg, h_m)
    area_ok = _area(receiver, client, lat_deg, lon_deg, accepted=outside_area_accepted)
    motion = motion_of(choice, epoch_of_observation)
    if same_frame(receiver, client) and motion is None:
        operation = Operation(_IDENTITY, [], _epoch_of_identity(choice, epoch_of_observation), area_ok, [], 0.0)
        operation.shift_enu_m = None if h_m is None else [0.0, 0.0, 0.0]
        return _client(choice, client, (lat_deg, lon_deg), h_m, epoch_of_observation), operation
    epoch = operation_epoch_of(choice, epoch_of_observation)
    moved = [_motion_step(*motion)] if motion else []
    # Only where the mark really is outside: without an area PROJ also offers what belongs elsewhere.
    mark = Mark(lat_deg, lon_deg, epoch, anywhere=not area_ok, over_limit=accuracy_over_limit)
    route = _route(choice, receiver, client, mark, moved, keep_steps)
    steps = [*moved, *route.steps]
    total = sum(step.accuracy_m or 0.0 for step in steps)
    if total > ACCURACY_LIMIT_M + 1e-9 and not accuracy_over_limit:
        raise ReductionError(
            f"Motion and frame operation together state {total:.3f} m, over the limit of {ACCURACY_LIMIT_M} m.",
            "Record a decision that accepts it, or take the receiver's epoch for the client.",
            code="accuracy_over_limit",
        )
    area_ok = area_ok and all(
        inside(leg.candidate.bounds, lat_deg, lon_deg) for leg in route.legs if leg.candidate is not None
    )
    operation = Operation(" + ".join(step.name for step in steps), steps, epoch, area_ok, _grid_files(route), total)
    if h_m is None:
        return None, operation
    start: Position = (lat_deg, lon_deg, h_m)
    end = _run(route, _moved(start, receiver, motion), epoch)
    operation.shift_enu_m = [float(value) for value in enu_difference(start, end, receiver.ellipsoid, client.ellipsoid)]
    return _client(choice, client, end[:2], end[2], epoch_of_observation), operation


def ellipsoidal_height_difference_to_itrf2020(
    code: str, lat_deg: float, lon_deg: float, h_m: float, epoch: float
) -> float:
    """Ellipsoidal height in a frame minus that in ITRF2020 at a place, metres: what a global geoid model is off by.

    Args:
        epoch: decimal year of the coordinates; for a static frame that of observation.

    Outside the frame's area of use (which needs a recorded decision to get here) the search is made without area.

    Raises:
        ReductionError: no sound route from the frame to ITRF2020 at this place.
    """
    frame, target = frame_info(code), frame_info(ITRF2020)
    if frame.ensemble:
        raise ReductionError(
            f"{frame.name} is an ensemble: its height against ITRF2020 is not known.",
            "Give the code of the realisation, or leave the geoid out.",
            code="frame_unreachable",
        )
    if same_frame(frame, target):
        return 0.0
    lon_deg = wrapped_longitude(lon_deg)
    anywhere = not inside(frame.bounds, lat_deg, lon_deg)
    route = find_route(frame, target, Mark(lat_deg, lon_deg, epoch, anywhere=anywhere))
    return h_m - _run(route, (lat_deg, lon_deg, h_m), epoch)[2]


def _route(
    choice: FrameChoice,
    receiver: FrameInfo,
    client: FrameInfo,
    mark: Mark,
    moved: list[OperationStep],
    keep_steps: list[str] | None,
) -> Route:
    if same_frame(receiver, client):
        return Route(())
    own = {step_code(step) for step in moved}
    keep = None if keep_steps is None else [code for code in keep_steps if code not in own]
    return find_route(receiver, client, mark, taken_as=choice.taken_as, keep_codes=keep)


def _checked_place(lat_deg: float, lon_deg: float, h_m: float | None) -> float:
    """The longitude in [-180, 180), after the numbers have been found usable."""
    numbers = [lat_deg, lon_deg, *([] if h_m is None else [h_m])]
    if not all(math.isfinite(value) for value in numbers) or abs(lat_deg) > 90.0 or abs(lon_deg) > 540.0:
        raise ReductionError(
            f"The position ({lat_deg}, {lon_deg}, {h_m}) is not a place on the earth.",
            "Look at the receiver's output: latitude and longitude may be exchanged.",
            code="no_position",
        )
    return wrapped_longitude(lon_deg)


def _area(receiver: FrameInfo, client: FrameInfo, lat_deg: float, lon_deg: float, *, accepted: bool) -> bool:
    outside = [info for info in (client, receiver) if not inside(info.bounds, lat_deg, lon_deg)]
    if outside and not accepted:
        info = outside[0]
        raise ReductionError(
            f"The mark ({lat_deg:.4f}, {lon_deg:.4f}) is outside the area of use of {info.code} {info.name}: "
            f"{shortened(info.area_name)}",
            "Give the frame of this place, or record a decision that accepts figures outside the area.",
            code="outside_area",
        )
    return not outside


def _epoch_of_identity(choice: FrameChoice, epoch_of_observation: float) -> float | None:
    return receiver_epoch_of(choice, epoch_of_observation)


def _moved(start: Position, receiver: FrameInfo, motion: tuple[Motion, float, float] | None) -> Position:
    """The position at the client's epoch, still in the receiver's frame: X + dt omega x X, or X + dt v."""
    if motion is None:
        return start
    stated, have, want = motion
    xyz = geocentric(*start, receiver.ellipsoid)
    if stated.velocity_m_per_year is not None:
        velocity = stated.velocity_m_per_year
        return geographic([x + (want - have) * v for x, v in zip(xyz, velocity, strict=True)], receiver.ellipsoid)
    rates = PLATE_ROTATIONS[(str(stated.model), str(stated.plate))].rates_mas
    return geographic(xyz + (want - have) * plate_velocity_m(xyz, rates), receiver.ellipsoid)


def _motion_step(motion: Motion, have: float, want: float) -> OperationStep:
    """The motion as a recorded step; its accuracy is sigma per year times the years."""
    per_year = float(motion.sigma_m_per_year or 0.0)
    span = f"{have:.4f} to {want:.4f}"
    said = [f"standard uncertainty {1000 * per_year:g} mm a year over {abs(want - have):.2f} years"]
    if motion.velocity_m_per_year is not None:
        code = "velocity " + " ".join(f"{value:+.4f}" for value in motion.velocity_m_per_year)
        name = f"stated velocity, {span}"
    else:
        code = f"{motion.model} {motion.plate}"
        name = f"plate motion {motion.model} {motion.plate}, {span}"
        said.append(PLATE_SOURCES[str(motion.model)])
    if motion.source:
        said.append(motion.source)
    return OperationStep("motion", code, name, per_year * abs(want - have), remark="; ".join(said))


def _run(route: Route, start: Position, epoch: float) -> Position:
    here = start
    for leg in route.legs:
        here = _run_leg(leg, here, epoch)
    return here


def _run_leg(leg: Leg, start: Position, epoch: float) -> Position:
    if leg.candidate is None:
        # Equal frames: equal geocentric coordinates, whatever the ellipsoids.
        if leg.source.ellipsoid == leg.target.ellipsoid:
            return start
        return geographic(geocentric(*start, leg.source.ellipsoid), leg.target.ellipsoid)
    transformer = leg.candidate.transformer
    if transformer is None:
        raise AssertionError("a route holds only candidates that can run")
    try:
        lon, lat, height, _ = transformer.transform(start[1], start[0], start[2], epoch, errcheck=True)
    except ProjError as error:
        raise _no_result(leg) from error
    if not all(math.isfinite(value) for value in (lon, lat, height)):
        raise _no_result(leg)
    return float(lat), wrapped_longitude(float(lon)), float(height)


def _no_result(leg: Leg) -> ReductionError:
    return ReductionError(
        f"{leg.source.name} to {leg.target.name} gives no finite position at this mark.",
        "Look at the position, or give the certificate in the receiver's own frame.",
        code="operation_failed",
    )


def _grid_files(route: Route) -> list[GridFile]:
    files = []
    for leg in route.legs:
        for name, path in leg.candidate.grids if leg.candidate is not None else ():
            files.append(GridFile(name, hashlib.sha256(Path(path).read_bytes()).hexdigest()))
    return files


def _client(
    choice: FrameChoice,
    client: FrameInfo,
    place: tuple[float, float],
    h_m: float | None,
    epoch_of_observation: float,
) -> ClientPosition:
    name = f"{client.name}, {choice.realisation}" if client.ensemble else client.name
    xyz = [None, None, None] if h_m is None else [float(v) for v in geocentric(*place, h_m, client.ellipsoid)]
    return ClientPosition(
        client.code, name, client_epoch_of(choice, epoch_of_observation), place[0], place[1], h_m, *xyz
    )
