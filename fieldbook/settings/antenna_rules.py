"""What must hold between the antenna, what the receiver applies and what it reports; nothing of it has a default."""

from __future__ import annotations

from collections.abc import Callable

from fieldbook.errors import UsageError
from fieldbook.model.calibration import AntennaCalibration, split_model
from fieldbook.model.canonical import Tree
from fieldbook.model.frequencies import Combination, combination
from fieldbook.settings.antex import block_calibration

LARGEST_TAPE_OFFSET_M = 0.5
AGREES_M = 0.001  # a typed offset beside a calibration is a check value
Where = Callable[..., str]

# what the receiver applies -> the points its coordinates can then refer to
POINTS_OF = {
    "nothing": ("phase centre",),
    "pattern": ("phase centre",),
    "offset": ("ARP", "mark"),
    "offset and pattern": ("ARP", "mark"),
}


def antenna_conditions(tree: Tree, where: Where) -> None:
    """All conditions on `[antenna]` that reach beyond one key.

    Raises:
        UsageError: naming key, line and remedy.
    """
    antenna, point = tree["antenna"], tree["setup"]["reported_point"]
    applies = antenna.get("receiver_applies")
    if applies is not None and point not in POINTS_OF[applies]:
        raise UsageError(
            f"{where('antenna', 'receiver_applies')}: a receiver that applies {applies} reports the "
            f'{" or the ".join(POINTS_OF[applies])}, and reported_point is "{point}".',
            "Look at the antenna chosen in the receiver: one of the two is wrong, and an offset taken off twice or never "
            "is a decimetre.",
        )
    if "calibration" in antenna:
        _calibrated(antenna, where)
    elif "antex" in antenna:
        raise UsageError(
            f"{where('antenna', 'antex')}: the calibration of {antenna['antex']} was not frozen into this session.",
            "Read the session file again, with the ANTEX file beside it.",
        )
    elif point == "phase centre" and "arp_to_phase_centre_m" not in antenna:
        raise UsageError(
            f'{where("setup", "reported_point")}: reported_point = "phase centre" needs the offset of the antenna.',
            "Write antenna.arp_to_phase_centre_m = { north = ..., east = ..., up = ... } from its calibration, or "
            "antenna.antex, or antenna.listed.",
        )


def reading_conditions(reading: Tree, antenna: Tree, where: Where) -> None:
    """What one height reading needs of the antenna, and what cannot be.

    Raises:
        UsageError: naming the key and the remedy.
    """
    method = reading["method"]
    if method == "slant":
        for key in ("slant_radius_m", "slant_mark_above_arp_m"):
            if key not in antenna:
                raise UsageError(
                    f"{where('setup.height')}: a slant reading needs antenna.{key}.",
                    "Write it in [antenna], from the drawing of the antenna; or read the vertical height.",
                )
    if method in ("mount", "rod") and "arp_above_mount_m" not in antenna:
        what = "a reading to the bottom of the mount" if method == "mount" else "a rod's fixed height"
        raise UsageError(
            f"{where('setup.height')}: {what} needs antenna.arp_above_mount_m.",
            "Write it in [antenna], from its drawing; 0 where the ARP is the bottom of the mount.",
        )
    offset = reading.get("tape_offset_m")
    if offset is None:
        return
    if method == "rod":
        raise UsageError(
            f"{where('setup.height', 'tape_offset_m')}: a rod's fixed height has no tape.", "Leave tape_offset_m out."
        )
    if abs(float(offset)) > LARGEST_TAPE_OFFSET_M:
        raise UsageError(
            f"{where('setup.height', 'tape_offset_m')}: {offset} m is no offset of a tape.",
            "It is the length of the hook or the missing end, in metres; added to the reading.",
        )


def _calibrated(antenna: Tree, where: Where) -> None:
    if "receiver_applies" not in antenna:
        raise UsageError(
            f"{where('antenna')}: with a calibration it must be said what the receiver applies itself.",
            "Write antenna.receiver_applies: " + ", ".join(f'"{name}"' for name in POINTS_OF) + ".",
        )
    kept = antenna["calibration"]
    calibration = block_calibration(kept["block"], kept["file"])
    if split_model(antenna["model"]) != (calibration.antenna, calibration.radome):
        raise UsageError(
            f'{where("antenna", "model")}: model is "{antenna["model"]}", the calibration is of "{calibration.model}".',
            "Another type or radome is another antenna: correct the model or take its own calibration.",
        )
    if calibration.serial and calibration.serial != antenna.get("serial"):
        raise UsageError(
            f"{where('antenna', 'serial')}: the calibration is of serial {calibration.serial}, the antenna is "
            f"{antenna.get('serial', 'not stated')}.",
            "An individual calibration is good for its own antenna only.",
        )
    used = _frequencies(antenna, calibration, where)
    typed = antenna.get("arp_to_phase_centre_m")
    if typed is not None:
        _agrees(typed, used, calibration, where)


def _frequencies(antenna: Tree, calibration: AntennaCalibration, where: Where) -> Combination:
    have = ", ".join(item.code for item in calibration.frequencies)
    if "offset_frequency" not in antenna:
        raise UsageError(
            f"{where('antenna')}: with a calibration it must be said which signals the position is computed from.",
            f'Write antenna.offset_frequency, such as "L1" or "L1/L2 ionosphere-free"; the calibration has {have}.',
        )
    try:
        used = combination(antenna["offset_frequency"])
    except ValueError as problem:
        raise UsageError(
            f"{where('antenna', 'offset_frequency')}: {problem}.", f"The calibration has {have}."
        ) from None
    for code in used.codes:
        if calibration.frequency(code) is None:
            raise UsageError(
                f"{where('antenna', 'offset_frequency')}: the calibration of {calibration.model} has no {code}; it has {have}.",
                "Another frequency is never taken instead; find a calibration that has it, or type the offset in.",
            )
    return used


def _agrees(typed: Tree, used: Combination, calibration: AntennaCalibration, where: Where) -> None:
    offset = combined_offset(calibration, used)
    for name, value in zip(("north", "east", "up"), offset, strict=True):
        if abs(float(typed[name]) - value) > AGREES_M:
            raise UsageError(
                f"{where('antenna', 'arp_to_phase_centre_m')}: {name} is typed as {float(typed[name]):.4f} m, the "
                f"calibration gives {value:.4f} m for {used.text}.",
                "Leave the typed offset out, or correct it: beside a calibration it is a check.",
            )


def combined_offset(calibration: AntennaCalibration, used: Combination) -> tuple[float, float, float]:
    """Offset of a combination of signals in metres, north, east, up of the antenna.

    Raises:
        KeyError: the calibration lacks a frequency.
    """
    sums = [0.0, 0.0, 0.0]
    for code, factor in zip(used.codes, used.coefficients, strict=True):
        found = calibration.frequency(code)
        if found is None:
            raise KeyError(code)
        sums = [total + factor * value for total, value in zip(sums, found.offset_neu_m, strict=True)]
    return sums[0], sums[1], sums[2]
