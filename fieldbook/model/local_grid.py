"""A local plane grid fitted to marks, and a mark in it. Metres and degrees as named; None = not known.

plane    own transverse Mercator about the marks, scaled to their mean height: x east, y north, ground lengths there
grid     the local grid: E = east + a x - b y, N = north + b x + a y
"""

from __future__ import annotations

from dataclasses import dataclass, field


@dataclass(frozen=True)
class ControlMark:
    """A mark with both coordinates. cov_en_m2: of latitude and longitude, as measured. u_m, u_height_m: of the local ones."""

    mark: str
    lat_deg: float
    lon_deg: float
    h_m: float
    cov_en_m2: tuple[tuple[float, float], tuple[float, float]]
    u_up_m: float | None
    east_m: float
    north_m: float
    u_m: float
    height_m: float | None = None
    u_height_m: float | None = None


@dataclass(frozen=True)
class Misfit:
    """What is left at a control mark, given minus fitted, in the local grid.

    residual_*: of the fit with all marks. predicted_*: of the fit without this one; u_*: standard uncertainty of that;
    significance: probability of a larger one by chance.
    """

    mark: str
    residual_east_m: float
    residual_north_m: float
    residual_height_m: float | None
    predicted_east_m: float
    predicted_north_m: float
    u_east_m: float
    u_north_m: float
    significance: float
    predicted_height_m: float | None = None
    u_height_m: float | None = None


@dataclass(frozen=True)
class LocalGrid:
    """A fitted local grid.

    lat0_deg, lon0_deg, scale0, plane_height_m: of the plane. a, b, east_m, north_m: of the similarity; covariance_4 in that
    order (east, north, a, b), already widened where the fit is worse than stated. dof: 2 n - 4. variance_factor: chi-squared
    over dof. height_*: H = h + shift + tilt_east x + tilt_north y; None without local heights.
    """

    name: str
    frame: str
    lat0_deg: float
    lon0_deg: float
    scale0: float
    plane_height_m: float
    east_m: float
    north_m: float
    a: float
    b: float
    covariance_4: tuple[tuple[float, ...], ...]
    dof: int
    variance_factor: float
    marks: tuple[ControlMark, ...]
    misfits: tuple[Misfit, ...]
    height_parameters: tuple[float, ...] | None = None  # shift; or shift, tilt east, tilt north
    height_covariance: tuple[tuple[float, ...], ...] | None = None
    height_dof: int = 0
    height_variance_factor: float = 1.0

    @property
    def scale(self) -> float:
        """Grid length over ground length at the mean height of the marks."""
        return float((self.a * self.a + self.b * self.b) ** 0.5)

    @property
    def widened(self) -> bool:
        """The marks fit worse than their stated uncertainties."""
        return self.variance_factor > 1.0


@dataclass
class LocalPosition:
    """A mark in a local grid. inside: in the hull of the marks that made it; without a decision there is no other.

    bearing_correction_deg: azimuth = local bearing + it. combined_factor: grid distance = ground distance x it.
    """

    name: str
    easting_m: float
    northing_m: float
    height_m: float | None
    u_en_m: list[float]
    horizontal95_m: float
    vertical95_m: float | None
    bearing_correction_deg: float
    scale_factor: float
    elevation_factor: float
    combined_factor: float
    plane_height_m: float
    inside: bool
    marks: list[str] = field(default_factory=list)
    largest_residual_m: float = 0.0
    largest_predicted_m: float = 0.0
    scale_ppm: float = 0.0
    widened: bool = False
    entry: int | None = None  # seq of the entry that keeps the grid
