"""Constants of the reduction, each with its source. Limits of ours are named so and say why.

Angles in radians or milliarc-seconds as named, lengths in metres.
"""

from __future__ import annotations

import math
from dataclasses import dataclass


@dataclass(frozen=True)
class Ellipsoid:
    """An oblate ellipsoid of revolution: semi-major axis in metres and 1/f."""

    name: str
    a_m: float
    inverse_flattening: float

    @property
    def flattening(self) -> float:
        """f = (a - b) / a."""
        return 1.0 / self.inverse_flattening

    @property
    def b_m(self) -> float:
        """Semi-minor axis in metres."""
        return self.a_m * (1.0 - self.flattening)

    @property
    def e2(self) -> float:
        """First eccentricity squared, f (2 - f)."""
        return self.flattening * (2.0 - self.flattening)

    @property
    def second_e2(self) -> float:
        """Second eccentricity squared, e^2 / (1 - e^2)."""
        return self.e2 / (1.0 - self.e2)


# GRS 1980: H. Moritz, Geodetic Reference System 1980, Journal of Geodesy 74 (2000), pages 128-133;
# the digits are those of the EPSG data set v11.022, ellipsoid 7019.
GRS80 = Ellipsoid("GRS 1980", 6378137.0, 298.257222101)

# WGS 84: NGA.STND.0036 (2014), table 3.1; EPSG v11.022, ellipsoid 7030. 0.1 mm from GRS 1980 in b.
WGS84 = Ellipsoid("WGS 84", 6378137.0, 298.257223563)

# Milliarc-second in radians: one degree is 3600000 of them (exact).
MAS_RAD = math.pi / 180.0 / 3_600_000.0

# Limit of ours (project decision): operations whose stated accuracies add up to more need a recorded decision.
ACCURACY_LIMIT_M = 0.2

# Limit of ours: half side of the area of interest about the mark, degrees (about 0.5 km): small against every
# area of use, large against the uncertainty of any position.
AREA_HALF_SIDE_DEG = 0.005

# Limit of ours: a time-specific parameter set is used only this near to its own epoch, years (7 cm/a x 0.01 a
# is under 1 mm for the fastest plates).
SAME_EPOCH_YEARS = 0.01

# Limit of ours: a global geoid model goes with frames whose ellipsoidal height is this near to ITRF2020's.
GEOID_FRAME_LIMIT_M = 0.2

# A grid is called conformal when its two principal scales agree within this.
CONFORMAL_LIMIT = 1e-9

# Value of a GTX node without data: NOAA VDatum, description of the binary GTX format.
GTX_NO_DATA = -88.8888


@dataclass(frozen=True)
class PlateRotation:
    """Rotation rates of a plate about X, Y, Z, milliarc-seconds per year, position-vector sign."""

    model: str
    plate: str
    rates_mas: tuple[float, float, float]


# Rates as they stand in PROJ 9.5.1's resource files ITRF2014 and ITRF2020, made from these papers (page numbers not seen).
# The origin rate bias of ITRF2020 (0.37, 0.35, 0.74 mm a year, table 2 of the 2023 paper) is left out: with it the model is
# 0.75 mm a year off the published ITRF2020 velocity of the EUREF station, without it 0.29.
PLATE_SOURCES = {
    "ITRF2014": "Altamimi et al., Geophysical Journal International 209 (2017), doi 10.1093/gji/ggx136",
    "ITRF2020": "Altamimi et al., Geophysical Research Letters 50 (2023), doi 10.1029/2023GL106373, no origin rate bias",
}

# Frames whose coordinates a model moves without a further tie: its own ITRF and what equals it or follows it.
PLATE_FRAMES = {
    "ITRF2014": ("ITRF2014", "IGS14", "IGb14", "WGS 84 (G2139)"),
    "ITRF2020": ("ITRF2020", "IGS20", "WGS 84 (G2296)"),
}

PLATE_ROTATIONS = {
    (item.model, item.plate): item
    for item in (
        PlateRotation("ITRF2014", "ANTA", (-0.248, -0.324, 0.675)),
        PlateRotation("ITRF2014", "ARAB", (1.154, -0.136, 1.444)),
        PlateRotation("ITRF2014", "AUST", (1.510, 1.182, 1.215)),
        PlateRotation("ITRF2014", "EURA", (-0.085, -0.531, 0.770)),
        PlateRotation("ITRF2014", "INDI", (1.154, -0.005, 1.454)),
        PlateRotation("ITRF2014", "NAZC", (-0.333, -1.544, 1.623)),
        PlateRotation("ITRF2014", "NOAM", (0.024, -0.694, -0.063)),
        PlateRotation("ITRF2014", "NUBI", (0.099, -0.614, 0.733)),
        PlateRotation("ITRF2014", "PCFC", (-0.409, 1.047, -2.169)),
        PlateRotation("ITRF2014", "SOAM", (-0.270, -0.301, -0.140)),
        PlateRotation("ITRF2014", "SOMA", (-0.121, -0.794, 0.884)),
        PlateRotation("ITRF2020", "AMUR", (-0.131, -0.551, 0.837)),
        PlateRotation("ITRF2020", "ANTA", (-0.269, -0.312, 0.678)),
        PlateRotation("ITRF2020", "ARAB", (1.129, -0.146, 1.438)),
        PlateRotation("ITRF2020", "AUST", (1.487, 1.175, 1.223)),
        PlateRotation("ITRF2020", "CARB", (0.207, -1.422, 0.726)),
        PlateRotation("ITRF2020", "EURA", (-0.085, -0.519, 0.753)),
        PlateRotation("ITRF2020", "INDI", (1.137, 0.013, 1.444)),
        PlateRotation("ITRF2020", "NAZC", (-0.327, -1.561, 1.605)),
        PlateRotation("ITRF2020", "NOAM", (0.045, -0.666, -0.098)),
        PlateRotation("ITRF2020", "NUBI", (0.090, -0.585, 0.717)),
        PlateRotation("ITRF2020", "PCFC", (-0.404, 1.021, -2.154)),
        PlateRotation("ITRF2020", "SOAM", (-0.261, -0.282, -0.157)),
        PlateRotation("ITRF2020", "SOMA", (-0.081, -0.719, 0.864)),
    )
}
