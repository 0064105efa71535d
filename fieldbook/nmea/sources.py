"""Signs that more than one receiver writes into one link, or that what it writes is no observation.

Strategy. A receiver keeps its talker, layout and grid of fix times; two of them on one line alternate. A
position of another signature that interleaves on another time grid, or that lies more than 5 m off and is
followed by the first signature again, is counted; what is said of it is one warning, and choosing a talker
is the observer's decision.
"""

from __future__ import annotations

import math

from fieldbook.model.epoch import E8MIN_PER_DEG, Epoch
from fieldbook.nmea.dates import nearness_ms
from fieldbook.nmea.sentences import Counts, Heard

Signature = tuple[str, int, int | None, str | None]

_NEAR_MS = 2000
_GRID_MS = 100
_GRID_TOLERANCE_MS = 10
_FAR_M = 5.0
_METRES_PER_E8MIN = 1852.0 / 10**8  # good enough to tell 5 m from nothing
_CONFLICTS_TO_SAY_SO = 0.05
_ASSUMED_METRES = 1000.0


def near_zero(place: tuple[float, float] | None) -> bool:
    """The approximate site (latitude, longitude in degrees) lies within 1 km of 0 N 0 E."""
    if place is None:
        return False
    return math.hypot(*place) * 60 * 1852 <= _ASSUMED_METRES


class SourceWatch:
    """Looks at every position that counts."""

    def __init__(self, counts: Counts) -> None:
        self._counts = counts
        self._last: tuple[Signature, Epoch] | None = None
        self._before: tuple[Signature, Epoch] | None = None

    def add(self, heard: Heard) -> None:
        """One more position, in order."""
        epoch = heard.epoch
        if epoch.time_ms is None or epoch.latitude_e8min is None:
            return
        signature = (epoch.talker, heard.layout, epoch.latitude_decimals, epoch.station)
        last, before = self._last, self._before
        if last is None or last[0] != signature:
            if last is not None and self._is_other(signature, epoch, last[0], last[1], before):
                self._counts["mixed_receivers"] += 1
            self._before = last
        self._last = (signature, epoch)

    @staticmethod
    def _is_other(
        signature: Signature,
        epoch: Epoch,
        last_signature: Signature,
        last: Epoch,
        before: tuple[Signature, Epoch] | None,
    ) -> bool:
        if epoch.time_ms is None or last.time_ms is None or nearness_ms(epoch.time_ms, last.time_ms) > _NEAR_MS:
            return False
        grid = abs(epoch.time_ms - last.time_ms) % _GRID_MS
        if min(grid, _GRID_MS - grid) > _GRID_TOLERANCE_MS and signature[0] != last_signature[0]:
            return True
        if before is None or before[0] != signature or before[1].time_ms is None:
            return False
        alternating = nearness_ms(epoch.time_ms, before[1].time_ms) <= 2 * _NEAR_MS
        return alternating and _distance_m(epoch, last) > _FAR_M


def _distance_m(one: Epoch, other: Epoch) -> float:
    if None in (one.latitude_e8min, one.longitude_e8min, other.latitude_e8min, other.longitude_e8min):
        return 0.0
    assert one.latitude_e8min is not None and one.longitude_e8min is not None  # noqa: S101, PT018
    assert other.latitude_e8min is not None and other.longitude_e8min is not None  # noqa: S101, PT018
    north = one.latitude_e8min - other.latitude_e8min
    half_turn = 180 * E8MIN_PER_DEG
    east = (one.longitude_e8min - other.longitude_e8min + half_turn) % (2 * half_turn) - half_turn
    scale = math.cos(math.radians(one.latitude_e8min / E8MIN_PER_DEG))
    return math.hypot(north, east * scale) * _METRES_PER_E8MIN


def warnings_of(counts: Counts, epochs: int, rollover_weeks: int | None, *, silent: bool) -> list[str]:
    """Codes of what the observer has to be told, in a fixed order."""
    said = {
        "no_valid_nmea": silent,
        "mixed_receivers": counts.get("mixed_receivers", 0) > 0,
        "two_sources": counts.get("conflict", 0) > _CONFLICTS_TO_SAY_SO * epochs,
        "simulator_output": counts.get("quality_8", 0) > 0,
        "manual_position": counts.get("quality_7", 0) > 0,
        "dead_reckoning": counts.get("quality_6", 0) > 0,
        "date_jump": counts.get("date_jump", 0) > 0,
        "rollover_suspected": rollover_weeks is not None,
    }
    return [code for code, holds in said.items() if holds]
