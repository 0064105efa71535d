"""Is a choice of frames and epochs complete and of the right kind? Asked before anything is recorded.

Epochs: a dynamic frame's coordinates mean nothing without one, a static frame's do not need one. The epoch of the
operation is the receiver's where its frame is dynamic, else the client's where that is dynamic, else the epoch of
observation; it is never left out, because PROJ then silently uses the parameters' own (0.5 m in Australia).
"""

from __future__ import annotations

from datetime import UTC, datetime

from fieldbook.errors import ReductionError, UsageError
from fieldbook.model.session import FrameChoice, Motion, TakenAs
from fieldbook.reduce.constants import PLATE_ROTATIONS
from fieldbook.reduce.frames.projection import check_grid
from fieldbook.reduce.frames.registry import FrameInfo, frame_info

# The two ways there are, and the way round: nothing moves a mark by default.
MOTION_REMEDY = (
    "State how the mark moves in [[frame.motion]]: the plate of a published model (ITRF2020 or ITRF2014), or a velocity "
    "with its source, either with sigma_m_per_year; or take the receiver's epoch for the client."
)

_FIRST_EPOCH, _LAST_EPOCH = 1980.0, 2100.0  # GPS time begins in 1980; a coordinate epoch of 0.0 is a slip
_SAME_EPOCH_A = 1e-6


def decimal_year(instant: datetime) -> float:
    """Year + seconds since 1 January / seconds of that year, of an instant with a time zone (UTC).

    Raises:
        ValueError: an instant without time zone.
    """
    if instant.tzinfo is None:
        raise ValueError("an instant needs its time zone")
    moment = instant.astimezone(UTC)
    start = datetime(moment.year, 1, 1, tzinfo=UTC)
    length = datetime(moment.year + 1, 1, 1, tzinfo=UTC) - start
    return moment.year + (moment - start).total_seconds() / length.total_seconds()


def check_frames(choice: FrameChoice) -> None:
    """Refuse a choice by kind; silent when it can be tried.

    Raises:
        UsageError: a frame that is not geographic 3-D EPSG; an ensemble (but for receiver = client = the same code
            with `realisation`); a missing epoch; dynamic frames at different epochs without a stated motion; a
            declared equality or a motion that does not fit; a grid of another datum.
    """
    receiver, client = frame_info(choice.receiver), frame_info(choice.client)
    _check_ensembles(choice, receiver, client)
    _check_epoch(choice.receiver_epoch, receiver, "receiver_epoch")
    _check_epoch(choice.client_epoch, client, "client_epoch")
    for equality in choice.taken_as:
        check_taken_as(equality)
    _check_motion(choice, receiver, client)
    if choice.grid is not None:
        check_grid(choice.client, choice.grid)


def receiver_epoch_of(choice: FrameChoice, epoch_of_observation: float) -> float | None:
    """Decimal year of the receiver's coordinates; None where its frame is static."""
    return _resolved(choice.receiver_epoch, frame_info(choice.receiver), epoch_of_observation)


def client_epoch_of(choice: FrameChoice, epoch_of_observation: float) -> float | None:
    """Decimal year of the client's coordinates; None where that frame is static."""
    return _resolved(choice.client_epoch, frame_info(choice.client), epoch_of_observation)


def operation_epoch_of(choice: FrameChoice, epoch_of_observation: float) -> float:
    """The fourth number of every PROJ call: the receiver's epoch, else the client's, else that of observation.

    Raises:
        ReductionError: none of them is a usable decimal year.
    """
    receiver = receiver_epoch_of(choice, epoch_of_observation)
    client = client_epoch_of(choice, epoch_of_observation)
    # With stated motion the frames meet at the client's epoch (the position has been moved there first).
    ordered = (client, receiver) if receiver is not None and client is not None else (receiver, client)
    epoch = next((value for value in ordered if value is not None), epoch_of_observation)
    if not _FIRST_EPOCH <= epoch <= _LAST_EPOCH:  # also refuses NaN
        raise ReductionError(
            f"The epoch of the frame operation, {epoch}, is not a usable decimal year.",
            "State the epoch, or decide the date of the observations.",
            code="epoch_unknown",
        )
    return epoch


def motion_of(choice: FrameChoice, epoch_of_observation: float) -> tuple[Motion, float, float] | None:
    """The stated motion with the epochs (have, shall have), or None where the epochs are equal or one is static.

    Raises:
        ReductionError: two dynamic frames at different epochs and no motion stated.
    """
    have = receiver_epoch_of(choice, epoch_of_observation)
    want = client_epoch_of(choice, epoch_of_observation)
    if have is None or want is None or abs(have - want) <= _SAME_EPOCH_A:
        return None
    if not choice.motion:
        raise ReductionError(
            f"The receiver's coordinates are at {have:.4f}, the client's shall be at {want:.4f}, both moving frames.",
            MOTION_REMEDY,
            code="motion_unknown",
        )
    return choice.motion[0], have, want


def check_taken_as(equality: TakenAs) -> None:
    """A declared equality joins two frames of the same sort, with a source and an uncertainty.

    Raises:
        UsageError: an ensemble, a static frame taken as a moving one, no source, or no positive sigma.
    """
    frames = (frame_info(equality.code), frame_info(equality.as_code))
    for info in frames:
        if info.ensemble:
            raise _ensemble_refused(info)
    if frames[0].dynamic != frames[1].dynamic:
        raise UsageError(
            f"frame.taken_as: {frames[0].name} and {frames[1].name} cannot be equal: one of them moves with a plate.",
            "Declare equality of two static or of two moving frames.",
            code="taken_as",
        )
    if not equality.source.strip() or not 0.0 < equality.sigma_m < 1.0:
        raise UsageError(
            f"frame.taken_as of {equality.code}: source and sigma_m (over 0, under 1 m) are needed.",
            "Name who declares the equality and how good it is: it is printed.",
            code="taken_as",
        )


def _check_ensembles(choice: FrameChoice, receiver: FrameInfo, client: FrameInfo) -> None:
    if receiver.ensemble and receiver.code == client.code:
        if not (choice.realisation or "").strip():
            raise UsageError(
                f"{receiver.code} ({receiver.name}) is an ensemble of several realisations.",
                'Name the realisation, e.g. realisation = "DREF91, 2016", or give the code of the realisation.',
                code="frame_ensemble",
            )
        return
    for info in (receiver, client):
        if info.ensemble:
            raise _ensemble_refused(info)
    if choice.realisation is not None:
        raise UsageError(
            f"frame.realisation is stated, but {receiver.code} is one realisation already.",
            "Remove it: it belongs only to receiver = client = the same ensemble code.",
            code="frame_realisation",
        )


def _ensemble_refused(info: FrameInfo) -> UsageError:
    return UsageError(
        f"{info.code} ({info.name}) is an ensemble of several realisations: steps from or to it are null copies.",
        "Give the code of the realisation, e.g. EPSG:10605 for WGS 84 (G2296) or EPSG:7931 for ETRF2000.",
        code="frame_ensemble",
    )


def _check_epoch(value: float | str | None, info: FrameInfo, key: str) -> None:
    if value is None:
        if info.dynamic:
            raise UsageError(
                f"frame.{key} is missing: {info.code} ({info.name}) is a moving frame.",
                f'Write {key} = "observation" or a decimal year.',
                code="epoch_missing",
            )
        return
    if isinstance(value, str):
        if value != "observation":
            raise UsageError(
                f'frame.{key}: {value!r} is neither "observation" nor a decimal year.',
                f'Write {key} = "observation" or e.g. {key} = 2020.0.',
                code="epoch_bad",
            )
        return
    if not _FIRST_EPOCH <= value <= _LAST_EPOCH:
        raise UsageError(
            f"frame.{key} = {value} is not a usable decimal year.",
            f"Write a year between {_FIRST_EPOCH:.0f} and {_LAST_EPOCH:.0f}, e.g. 2020.0.",
            code="epoch_bad",
        )


def _check_motion(choice: FrameChoice, receiver: FrameInfo, client: FrameInfo) -> None:
    both = receiver.dynamic and client.dynamic
    # "observation" against a year: equal only by accident, so it is refused before the first byte.
    different = both and choice.receiver_epoch != choice.client_epoch
    if different and not choice.motion:
        raise UsageError(
            f"Receiver epoch {choice.receiver_epoch} and client epoch {choice.client_epoch} differ, and both "
            f"{receiver.name} and {client.name} are moving frames.",
            MOTION_REMEDY,
            code="motion_unknown",
        )
    if not choice.motion:
        return
    if len(choice.motion) > 1:
        raise UsageError("More than one [[frame.motion]] is stated.", "State one.", code="motion_bad")
    if not both:
        raise UsageError(
            f"[[frame.motion]] is stated, but {receiver.name if not receiver.dynamic else client.name} is static.",
            "Remove it: motion belongs between two moving frames at different epochs.",
            code="motion_bad",
        )
    _check_motion_itself(choice.motion[0])


def _check_motion_itself(motion: Motion) -> None:
    sigma = motion.sigma_m_per_year
    if sigma is None or not 0.0 < sigma < 0.1:
        raise UsageError(
            "frame.motion: sigma_m_per_year (over 0, under 0.1) is needed.",
            "State one standard uncertainty of the motion per horizontal axis, metres a year.",
            code="motion_bad",
        )
    plate = motion.model is not None or motion.plate is not None
    if plate == (motion.velocity_m_per_year is not None):
        raise UsageError(
            "frame.motion needs either model and plate, or velocity_m_per_year, and not both.",
            'E.g. model = "ITRF2020", plate = "AUST"; or a velocity with its source.',
            code="motion_bad",
        )
    if plate and (motion.model, motion.plate) not in PLATE_ROTATIONS:
        known = ", ".join(f"{model} {name}" for model, name in PLATE_ROTATIONS)
        raise UsageError(
            f"frame.motion: no plate {motion.plate} in a model {motion.model}.",
            f"Known: {known}.",
            code="motion_bad",
        )
    if not plate and not (motion.source or "").strip():
        raise UsageError(
            "frame.motion: a stated velocity needs its source.",
            "Name the publication or the station the velocity comes from.",
            code="motion_bad",
        )


def _resolved(value: float | str | None, info: FrameInfo, epoch_of_observation: float) -> float | None:
    if not info.dynamic or value is None:
        return None
    return epoch_of_observation if isinstance(value, str) else float(value)
