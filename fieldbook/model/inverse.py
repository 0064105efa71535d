"""The line between two marks: the tree of `fieldbook marks inverse --json` as dataclasses, field for field.

Metres and degrees as named; azimuths from true north of the frame, clockwise, 0 <= a < 360; None = not known.
"""

from __future__ import annotations

import dataclasses
from dataclasses import dataclass, field
from typing import Any

from fieldbook.model.reduction import BudgetLine


@dataclass
class GridLine:
    """The straight line on the plane grid. factor: grid distance over ground distance, None without heights."""

    crs: str
    crs_name: str
    distance_m: float
    bearing_deg: float | None
    factor: float | None


@dataclass
class Taped:
    """A distance measured on the spot, mark to mark, against the slope distance of the coordinates.

    difference_m: measured minus computed. limit_m: 95 % of the difference, both uncertainties together.
    """

    measured_m: float
    measured_u_m: float
    difference_m: float
    limit_m: float
    agrees: bool


@dataclass
class Inverse:
    """Two marks and the line between them.

    azimuth_deg             forward, of the geodesic at the first mark
    reverse_azimuth_deg     at the second mark, towards the first
    geodesic_m              on the ellipsoid
    chord_m                 straight, between the two marks' feet on the ellipsoid
    ground_m                horizontal, at the mean ellipsoidal height of both
    slope_m                 straight, mark to mark: what a tape or a total station measures
    height_difference_m     second minus first, ellipsoidal; physical_difference_m by the geoid model of both
    distance95_m, azimuth95_arcsec, slope95_m, height95_m   half-widths at 95 %
    u_enu_m, cov_en_m2, dof_enu    of the difference of the two marks, what both share has dropped out
    budget                  lines of that difference; assumed: what was taken for granted, one sentence each
    """

    first: str
    second: str
    frame: str
    frame_name: str
    epoch: float | None
    azimuth_deg: float | None
    reverse_azimuth_deg: float | None
    geodesic_m: float
    chord_m: float
    ground_m: float | None
    mean_height_m: float | None
    slope_m: float | None
    height_difference_m: float | None
    physical_difference_m: float | None
    height_model: str | None
    distance95_m: float
    azimuth95_arcsec: float | None
    slope95_m: float | None
    height95_m: float | None
    u_enu_m: list[float | None]
    cov_en_m2: list[list[float]]
    dof_enu: list[float | None]
    grid: GridLine | None = None
    taped: Taped | None = None
    budget: list[BudgetLine] = field(default_factory=list)
    assumed: list[str] = field(default_factory=list)

    def to_json(self) -> dict[str, Any]:
        """Finite numbers or null."""
        return dataclasses.asdict(self)
