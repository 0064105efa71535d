"""What the received digits of an occupation allow: steps on the ground and the standard uncertainty they add."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from functools import reduce as fold

from fieldbook.reduce.kept_sums import InitialisationSums
from fieldbook.reduce.local_frame import LocalFrame
from fieldbook.reduce.quantisation import METRES_PER_MINUTE, Digits, constant_resolution_u_m, mean_resolution_u_m

Pair = tuple[float | None, float | None, float | None]

LEAST_SEPARATION_DECIMALS = 1  # common practice of geoid tables in receivers, no source
_FIELDS = ("longitude", "latitude", "altitude", "separation")


@dataclass(frozen=True)
class Resolution:
    """What the received digits allow. Steps and standard uncertainties in metres, None without heights.

    distinct: number of distinct received values of latitude, longitude, altitude, separation (counted up to 64);
    digits: what was seen of each.
    """

    step_enu_m: Pair
    u_enu_m: Pair
    separation_decimals: int | None
    separation_u_m: float | None
    distinct: dict[str, int]
    digits: dict[str, Digits]


def steps_m(used: Sequence[InitialisationSums], frame: LocalFrame) -> Pair:
    """Received steps of east, north, height in metres; None where nothing was received."""
    return _steps(_digits(used), frame)


def resolution_of(
    heard: list[InitialisationSums], used: list[InitialisationSums], frame: LocalFrame, sd_enu_m: Pair
) -> Resolution:
    """Steps and u_q from the digits; the separation's decimals are the fewest of the whole occupation, padded zeros off."""
    digits = _digits(used)
    steps = _steps(digits, frame)
    distinct = {name: item.count_distinct for name, item in digits.items()}
    u = u_of_steps(steps, sd_enu_m, distinct)
    decimals = _separation_decimals(fold(Digits.merged, (item.digits["separation"] for item in heard), Digits()))
    separation_u_m = None if decimals is None else constant_resolution_u_m(decimals)
    return Resolution(steps, u, decimals, separation_u_m, distinct, digits)


def _separation_decimals(whole: Digits) -> int | None:
    """The fewest printed, padded zeros off; a constant ends in zeros by chance, so not beyond one decimal."""
    if whole.fewest_decimals is None:
        return None
    meant = 5 - round(math.log10(whole.padded_units(5)))
    return min(whole.fewest_decimals, max(meant, LEAST_SEPARATION_DECIMALS))


def u_of_steps(steps_enu_m: Pair, sd_enu_m: Pair, distinct: dict[str, int]) -> Pair:
    """u_q of the mean per axis from steps, scatter and number of distinct received values; None without a step."""
    east, north, up = (
        None if step is None else mean_resolution_u_m(step, sd or 0.0, distinct.get(name))
        for name, step, sd in zip(("longitude", "latitude", "altitude"), steps_enu_m, sd_enu_m, strict=True)
    )
    return east, north, up


def _times(value: float | None, factor: float) -> float | None:
    return None if value is None else value * factor


def _digits(used: Sequence[InitialisationSums]) -> dict[str, Digits]:
    return {name: fold(Digits.merged, (item.digits[name] for item in used), Digits()) for name in _FIELDS}


def _steps(digits: dict[str, Digits], frame: LocalFrame) -> Pair:
    per_unit = METRES_PER_MINUTE * 1e-8
    return (
        _times(digits["longitude"].step_units(8, digits["latitude"]), per_unit * frame.cos_latitude),
        _times(digits["latitude"].step_units(8, digits["longitude"]), per_unit),
        _times(digits["altitude"].step_units(5), 1e-5),
    )
