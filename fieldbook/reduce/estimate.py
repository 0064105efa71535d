"""From screened blocks to the mean, its Type A uncertainty and what the digits and the class add: one function.

Strategy: everything here works on at most 26 000 blocks, so a live evaluation costs milliseconds whatever the number
of epochs. The budget itself is put together where antenna, set-up and frames are known.
"""

from __future__ import annotations

from dataclasses import dataclass

from fieldbook.model.session import FixClass
from fieldbook.reduce.blocks import Blocks
from fieldbook.reduce.correlated_mean import CorrelatedMean, correlated_mean
from fieldbook.reduce.fix_classes import ClassOfFix, GstVerdict, governing_class, with_receiver_estimate
from fieldbook.reduce.initialisations import Judgement
from fieldbook.reduce.kept_sums import median_gst_m
from fieldbook.reduce.local_frame import LocalFrame
from fieldbook.reduce.resolution import Pair, Resolution, resolution_of
from fieldbook.reduce.screening import Screened


@dataclass(frozen=True)
class Estimate:
    """The reported point in the receiver's frame, as far as the epochs alone can tell.

    lat_deg, lon_deg, h_m: of `mean` about `frame`; h_m None without heights. fix_class: the governing class, its
    sigma raised to the receiver's own estimate where that applies; floor_enu_m: least uncertainty claimed.
    kept_s: kept epochs x median step. Instants in ms of the occupation's clock. blocks: what the mean is made of;
    all_blocks: with those that lie apart, for the detectors.
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
    all_blocks: Blocks


def estimate(screened: Screened, judgement: Judgement, override: FixClass | None = None) -> Estimate | None:
    """Mean and Type A uncertainty of the used initialisations; None when no epoch is used.

    Args:
        screened, judgement: of the same moment.
        override: class of fix stated for this receiver.
    """
    used = [screened.initialisations[number] for number in judgement.used]
    blocks = judgement.blocks
    east, north, up = blocks.bins(0), blocks.bins(1), blocks.bins(2)
    mean_instant = blocks.mean_instant_ms
    if screened.frame is None or east is None or north is None or mean_instant is None:
        return None
    governing = governing_class({quality for item in used for quality in item.qualities}, override)
    fix_class, gst = with_receiver_estimate(governing, *median_gst_m(used))
    mean = correlated_mean(east, north, up, fix_class)
    place = screened.frame.geodetic(mean.east.mean_m, mean.north.mean_m, None if mean.up is None else mean.up.mean_m)
    sd = blocks.sd_m()
    floor = fix_class.floor_enu_m
    kept, with_height = int(blocks.column("count").sum()), int(blocks.column("count_up").sum())
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
        without_height=kept - with_height,
        kept_s=kept * (screened.median_step_ms or 0) / 1000.0,
        first_ms=min(item.first_ms for item in used),
        last_ms=max(item.last_ms for item in used),
        mean_instant_ms=mean_instant,
        blocks=blocks,
        all_blocks=judgement.all_blocks,
    )
