"""Other occupations of the same mark, set beside the one that is certified.

Differences are taken between marks in the client's frame where both have it (positions of a dynamic receiver's frame
at two dates differ by the motion of the ground), else in the receiver's frame, and say which.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from datetime import datetime

from fieldbook.model.canonical import Tree, fixed
from fieldbook.model.reduction import ClientPosition, Geodetic, Reduction
from fieldbook.model.rounding import rounded, rounded_up

# GRS 1980 (Moritz, Geodetic Reference System 1980): semi-major axis, first eccentricity squared. A difference of
# metres needs the radii to 1e-4 only; any other ellipsoid of a modern frame gives the same millimetre.
SEMI_MAJOR_M = 6378137.0
E2 = 0.00669438002290


def repeats_of(reduction: Reduction, others: Iterable[Reduction]) -> list[Tree]:
    """One line per other occupation of the same mark: when, how long, and that one minus this one.

    Args:
        reduction: the occupation to be certified.
        others: reductions of any occupations; those of other marks and the occupation itself are left out.
    """
    return [
        _repeat(reduction, other)
        for other in sorted(others, key=lambda item: item.occupation)
        if other.mark == reduction.mark and other.occupation != reduction.occupation
    ]


def _repeat(this: Reduction, other: Reduction) -> Tree:
    here, there, frame = _same_frame(this, other)
    east_m, north_m, up_m = difference_enu_m(here, there)
    vertical = other.uncertainty.vertical95_m
    return {
        "occupation": other.occupation,
        "open": other.open,
        "started": other.started,
        "ended": other.ended,
        "hours_apart": fixed(_hours_apart(this, other), 2),
        "frame": frame,
        "difference_enu_m": [fixed(east_m, 7), fixed(north_m, 7), fixed(up_m, 7)],
        "horizontal95_m": fixed(other.uncertainty.horizontal95_m, 7),
        "vertical95_m": fixed(vertical, 7),
        "printed": {
            "east_mm": rounded(east_m * 1000, 0),
            "north_mm": rounded(north_m * 1000, 0),
            "up_mm": "–" if up_m is None else rounded(up_m * 1000, 0),
            "horizontal95_mm": rounded_up(other.uncertainty.horizontal95_m * 1000, 0),
            "vertical95_mm": "–" if vertical is None else rounded_up(vertical * 1000, 0),
        },
    }


def _same_frame(this: Reduction, other: Reduction) -> tuple[Geodetic | ClientPosition, Geodetic | ClientPosition, str]:
    one, two = this.client, other.client
    if one is not None and two is not None and (one.frame, one.epoch) == (two.frame, two.epoch):
        return one, two, f"{one.frame_name} ({one.frame})"
    return this.receiver, other.receiver, f"{this.receiver.frame_name} ({this.receiver.frame}), as observed"


def difference_enu_m(
    here: Geodetic | ClientPosition, there: Geodetic | ClientPosition
) -> tuple[float, float, float | None]:
    """Metres east, north, up from `here` to `there`, for points metres apart.

    Source: radii of curvature of the ellipsoid, M = a(1 - e2)/W^3 and N = a/W with W = sqrt(1 - e2 sin^2 lat).
    """
    lat = math.radians((here.lat_deg + there.lat_deg) / 2)
    height = here.h_m or 0.0
    w2 = 1 - E2 * math.sin(lat) ** 2
    prime_m = SEMI_MAJOR_M / math.sqrt(w2)
    meridian_m = prime_m * (1 - E2) / w2
    lon_step = (there.lon_deg - here.lon_deg + 180) % 360 - 180
    north = math.radians(there.lat_deg - here.lat_deg) * (meridian_m + height)
    east = math.radians(lon_step) * (prime_m + height) * math.cos(lat)
    up = None if here.h_m is None or there.h_m is None else there.h_m - here.h_m
    return east, north, up


def _hours_apart(this: Reduction, other: Reduction) -> float | None:
    """Hours from the end of the earlier to the start of the later occupation; zero when they overlap."""
    if not (this.started and this.ended and other.started and other.ended):
        return None
    first, second = (this, other) if this.started <= other.started else (other, this)
    gap = _moment(second.started) - _moment(first.ended)
    return max(0.0, gap / 3600)


def _moment(text: str | None) -> float:
    return datetime.fromisoformat(str(text)).timestamp()
