"""From screened blocks to the mean, its Type A uncertainty and what the digits and the class add: one function.

Strategy: everything here works on at most 26 000 blocks, so a live evaluation costs milliseconds whatever the number
of epochs. The budget itself is put together where antenna, set-up and frames are known.
"""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass
from functools import reduce as fold

from fieldbook.model.session import FixClass
from fieldbook.reduce.blocks import Blocks
from fieldbook.reduce.correlated_mean import CorrelatedMean, correlated_mean
from fieldbook.reduce.fix_classes import ClassOfFix, GstVerdict, governing_class, with_receiver_estimate
from fieldbook.reduce.initialisations import Judgement
from fieldbook.reduce.kept_sums import InitialisationSums, median_of
from fieldbook.reduce.local_frame import LocalFrame
from fieldbook.reduce.quantisation import (
    METRES_PER_MINUTE,
    Digits,
    constant_resolution_u_m,
    mean_resolution_u_m,
)
from fieldbook.reduce.screening import Screened

Pair = tuple[float | None, float | None, float | None]


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


@dataclass(frozen=True)
class Estimate:
    """The reported point in the receiver's frame, as far as the epochs alone can tell.

    lat_deg, lon_deg, h_m: of `mean` about `frame`; h_m None without heights. fix_class: the governing class, its
    sigma raised to the receiver's own estimate where that applies; floor_enu_m: least uncertainty claimed.
    kept_s: kept epochs x median step. Instants in ms of the occupation's clock.
    """

    frame: LocalFrame
    mean: CorrelatedMean
    lat_deg: float
    lon_deg: float
    h_m: float | None
    fix_class: ClassOfFix
    gst: GstVerdict
    floor_enu_m: Pair
    resolution: Resolution
    sd_enu_m: Pair
    kept: int
    without_height: int
    kept_s: float
    first_ms: int
    last_ms: int
    mean_instant_ms: float
    blocks: Blocks


def estimate(screened: Screened, judgement: Judgement, override: FixClass | None = None) -> Estimate | None:
    """Mean and Type A uncertainty of the used initialisations; None when no epoch is used.

    Args:
        screened, judgement: of the same moment.
        override: class of fix stated for this receiver.
    """
    used = [screened.initialisations[number] for number in judgement.used]
    blocks = screened.blocks.of_initialisations(judgement.used)
    east, north, up = blocks.bins(0), blocks.bins(1), blocks.bins(2)
    mean_instant = blocks.mean_instant_ms
    if screened.frame is None or east is None or north is None or mean_instant is None:
        return None
    governing = governing_class({quality for item in used for quality in item.qualities}, override)
    fix_class, gst = with_receiver_estimate(governing, *_median_gst(used))
    mean = correlated_mean(east, north, up, fix_class)
    place = screened.frame.geodetic(mean.east.mean_m, mean.north.mean_m, None if mean.up is None else mean.up.mean_m)
    sd = blocks.sd_m()
    floor = fix_class.floor_enu_m
    kept = sum(item.kept for item in used)
    return Estimate(
        frame=screened.frame,
        mean=mean,
        lat_deg=place[0],
        lon_deg=place[1],
        h_m=place[2],
        fix_class=fix_class,
        gst=gst,
        floor_enu_m=(floor[0], floor[1], None if mean.up is None else floor[2]),
        resolution=resolution_of(list(screened.initialisations.values()), used, screened.frame, sd),
        sd_enu_m=sd,
        kept=kept,
        without_height=kept - sum(item.with_height for item in used),
        kept_s=kept * (screened.median_step_ms or 0) / 1000.0,
        first_ms=min(item.first_ms for item in used),
        last_ms=max(item.last_ms for item in used),
        mean_instant_ms=mean_instant,
        blocks=blocks,
    )


def _median_gst(used: list[InitialisationSums]) -> tuple[float | None, float | None]:
    medians = []
    for name in ("gst_horizontal", "gst_up"):
        total: Counter[int] = Counter()
        for item in used:
            total.update(getattr(item, name))
        median = median_of(total)
        medians.append(None if median is None else median * 1e-5)
    return medians[0], medians[1]


def resolution_of(
    heard: list[InitialisationSums], used: list[InitialisationSums], frame: LocalFrame, sd_enu_m: Pair
) -> Resolution:
    """Steps and u_q from the digits; the separation's decimals are the fewest of the whole occupation."""
    names = ("longitude", "latitude", "altitude", "separation")
    digits = {name: fold(Digits.merged, (item.digits[name] for item in used)) for name in names}
    whole = fold(Digits.merged, (item.digits["separation"] for item in heard))
    per_unit = METRES_PER_MINUTE * 1e-8
    steps = (
        _times(digits["longitude"].step_units(8), per_unit * frame.cos_latitude),
        _times(digits["latitude"].step_units(8), per_unit),
        _times(digits["altitude"].step_units(5), 1e-5),
    )
    distinct = {name: digits[name].count_distinct for name in names}
    u = u_of_steps(steps, sd_enu_m, distinct)
    decimals = whole.fewest_decimals
    return Resolution(
        steps,
        u,
        decimals,
        None if decimals is None else constant_resolution_u_m(decimals),
        distinct,
        digits,
    )


def u_of_steps(steps_enu_m: Pair, sd_enu_m: Pair, distinct: dict[str, int]) -> Pair:
    """u_q of the mean per axis from steps, scatter and number of distinct received values; None without a step."""
    east, north, up = (
        None if step is None else mean_resolution_u_m(step, sd or 0.0, distinct.get(name))
        for name, step, sd in zip(("longitude", "latitude", "altitude"), steps_enu_m, sd_enu_m, strict=True)
    )
    return east, north, up


def _times(value: float | None, factor: float) -> float | None:
    return None if value is None else value * factor
