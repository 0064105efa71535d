"""Where the satellites stood at one instant, as the receiver said."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Direction:
    """One satellite."""

    system: str  # "GPS", "Galileo", ...
    elevation_deg: int
    azimuth_deg: int  # from true north, clockwise


Picture = tuple[Direction, ...]  # the satellites used at one instant
