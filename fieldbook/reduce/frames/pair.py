"""A pair of frames at a place, before anything is observed: which operation would be used, how good it is, what it does.

The answer is that of the reduction itself (`transform_to_client`), with what it does not print: the candidates that were
considered and why each was not taken, the grids they lack, and how the effect changes from year to year.
"""

from __future__ import annotations

from dataclasses import dataclass

from fieldbook.errors import FieldbookError, ReductionError, UsageError
from fieldbook.model.reduction import Operation
from fieldbook.model.session import FrameChoice
from fieldbook.reduce.frames.candidates import Candidate, offer
from fieldbook.reduce.frames.choice import operation_epoch_of
from fieldbook.reduce.frames.convert import operation_codes, transform_to_client
from fieldbook.reduce.frames.registry import FrameInfo, frame_info, same_frame
from fieldbook.reduce.geodesy import wrapped_longitude

DEFINITION = 0.0
NOTABLE_MM = 0.05  # below it a yearly change is none


@dataclass(frozen=True)
class Considered:
    """One of PROJ's offers: its step codes, the sum of stated accuracies, and what became of it ('' = sound)."""

    codes: tuple[str, ...]
    accuracy_m: float
    reason: str
    missing: tuple[str, ...]
    used: bool


@dataclass(frozen=True)
class Pair:
    """Two frames at a place. `refused` says why there is no operation; `change_mm` is the effect's change in a year."""

    receiver: FrameInfo
    client: FrameInfo
    lat_deg: float
    lon_deg: float
    h_m: float
    epoch: float
    operation: Operation | None
    refused: FieldbookError | None
    change_mm: tuple[float, float, float] | None
    considered: tuple[Considered, ...]
    warnings: tuple[str, ...]

    @property
    def effect_mm(self) -> tuple[float, float, float] | None:
        """East, north, up in millimetres, client minus receiver, at the place."""
        if self.operation is None or self.operation.shift_enu_m is None:
            return None
        east, north, up = (1000.0 * value for value in self.operation.shift_enu_m)
        return east, north, up

    @property
    def missing_grids(self) -> tuple[str, ...]:
        """Grids that sound operations lack here."""
        return tuple(sorted({name for item in self.considered if not item.reason for name in item.missing}))


def pair_at(choice: FrameChoice, lat_deg: float, lon_deg: float, h_m: float, epoch: float) -> Pair:
    """The pair of a choice at a place and an epoch of observation (decimal year).

    Raises:
        UsageError: a code that is no frame at all (`frame_info`). What is refused for another reason is in `refused`.
    """
    receiver, client = frame_info(choice.receiver), frame_info(choice.client)
    operation, refused = None, None
    try:
        _, operation = transform_to_client(choice, lat_deg, lon_deg, h_m, epoch)
    except (ReductionError, UsageError) as error:
        refused = error
    change = None if operation is None else _change(choice, lat_deg, lon_deg, h_m, epoch, operation)
    considered = _considered(choice, receiver, client, lat_deg, lon_deg, epoch, operation)
    warnings = _warnings(choice, receiver, client, operation, change)
    return Pair(receiver, client, lat_deg, lon_deg, h_m, epoch, operation, refused, change, considered, tuple(warnings))


def _change(
    choice: FrameChoice, lat_deg: float, lon_deg: float, h_m: float, epoch: float, operation: Operation
) -> tuple[float, float, float] | None:
    """The effect a year later minus the effect now, for the same figures of the receiver."""
    if operation.shift_enu_m is None or not operation.steps:
        return None
    codes = operation_codes(operation)
    try:
        _, then = transform_to_client(choice, lat_deg, lon_deg, h_m, epoch + 1.0, keep_steps=codes)
    except FieldbookError:
        return None
    if then.shift_enu_m is None:
        return None
    east, north, up = (1000.0 * (b - a) for a, b in zip(operation.shift_enu_m, then.shift_enu_m, strict=True))
    return east, north, up


def _considered(
    choice: FrameChoice,
    receiver: FrameInfo,
    client: FrameInfo,
    lat_deg: float,
    lon_deg: float,
    epoch: float,
    operation: Operation | None,
) -> tuple[Considered, ...]:
    if receiver.ensemble or client.ensemble or same_frame(receiver, client):
        return ()
    try:
        when: float | None = round(operation_epoch_of(choice, epoch), 3)
    except FieldbookError:
        when = None
    found = offer(
        receiver.code,
        client.code,
        round(lat_deg, 3),
        round(wrapped_longitude(lon_deg), 3),
        when,
        anywhere=False,
    )
    used = operation_codes(operation) if operation is not None else None
    listed = [_one(item, used) for item in found.candidates]
    if found.stuck:
        listed.append(Considered((), 0.0, "only a time-specific operation is known, which PROJ cannot run", (), False))
    return tuple(sorted(listed, key=lambda item: (not item.used, bool(item.reason), item.accuracy_m)))


def _one(item: Candidate, used: list[str] | None) -> Considered:
    return Considered(
        item.codes, item.total_m, item.reason, item.missing, used is not None and list(item.codes) == used
    )


def _warnings(
    choice: FrameChoice,
    receiver: FrameInfo,
    client: FrameInfo,
    operation: Operation | None,
    change_mm: tuple[float, float, float] | None,
) -> list[str]:
    found = [
        f"{info.code} {info.name} is an ensemble of several realisations, decimetres to metres apart: only receiver = client "
        "with the realisation stated."
        for info in dict.fromkeys((receiver, client))
        if info.ensemble
    ]
    speed = 0.0 if change_mm is None else (change_mm[0] ** 2 + change_mm[1] ** 2) ** 0.5
    if receiver.dynamic != client.dynamic and operation is not None and operation.steps:
        moving, fixed = (receiver, client) if receiver.dynamic else (client, receiver)
        found.append(
            f"{moving.name} moves against the ground, {fixed.name} goes with it: the epoch decides. Here a year is "
            f"{speed:.1f} mm in plan."
        )
    if receiver.dynamic and client.dynamic and choice.receiver_epoch != choice.client_epoch:
        found.append(
            f"Both frames move, and the epochs differ ({choice.receiver_epoch}, {choice.client_epoch}): how the mark moves "
            "must be stated in [[frame.motion]]."
        )
    if not receiver.dynamic and not client.dynamic and speed > NOTABLE_MM:
        found.append(f"Both frames are static, but the operation between them depends on time: {speed:.1f} mm a year.")
    if operation is not None and operation.steps and operation.accuracy_m == DEFINITION:
        found.append(
            "The stated accuracy 0.0 is a definition: it says nothing of how well marks of either frame agree with it."
        )
    if receiver.name.startswith("WGS 84"):
        found.append(
            "A receiver without corrections is good to metres, whatever the operation states; with corrections its frame is "
            "that of the corrections, whatever its datum sentence says."
        )
    return found
