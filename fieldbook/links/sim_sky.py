"""The sky of a simulated receiver: circular orbits of four constellations, seen from the site.

Radius, inclination and period of each system are those of its published nominal constellation; the places of the
satellites in their planes are invented, so no almanac of a day is reproduced. What matters is kept: satellites
rise, culminate and set on plausible arcs, and each system's ground track repeats after its own time.
"""

from __future__ import annotations

import math
import random
from dataclasses import dataclass

EARTH_RATE = 7.2921151467e-5  # rad/s, the interface specifications' value
EARTH_RADIUS_M = 6_378_137.0
FLATTENING = 1.0 / 298.257222101  # GRS80


@dataclass(frozen=True)
class Signal:
    """One tracked signal: NMEA signal ID (hexadecimal text) and how much weaker it is than the first."""

    id: str
    weaker_db: float


@dataclass(frozen=True)
class System:
    """One constellation.

    Attributes:
        talker: of GSV; id: NMEA system ID of GSA.
        planes, per_plane: satellites; `first` is the number of the first one in NMEA.
    """

    name: str
    talker: str
    id: str
    first: int
    planes: int
    per_plane: int
    radius_m: float
    inclination_deg: float
    period_s: float
    signals: tuple[Signal, ...]


SYSTEMS = (
    System("GPS", "GP", "1", 1, 6, 5, 26_560e3, 55.0, 43_082.05, (Signal("1", 0.0), Signal("6", 3.0))),
    System("GLONASS", "GL", "2", 65, 3, 8, 25_508e3, 64.8, 40_548.4, (Signal("1", 0.0), Signal("3", 2.5))),
    System("Galileo", "GA", "3", 1, 3, 8, 29_600e3, 56.0, 50_684.8, (Signal("7", 0.0), Signal("2", 1.0))),
    System("BeiDou", "GB", "4", 19, 3, 8, 27_906e3, 55.0, 46_396.1, (Signal("1", 0.0), Signal("B", 2.0))),
)


@dataclass(frozen=True)
class Seen:
    """One satellite above the mask.

    Attributes:
        cn0_dbhz: per signal of its system; None = in the covered sector, not tracked.
    """

    system: System
    number: int
    azimuth_deg: float
    elevation_deg: float
    cn0_dbhz: tuple[int | None, ...]

    @property
    def used(self) -> bool:
        """Tracked, and so used in the fix."""
        return self.cn0_dbhz[0] is not None


@dataclass(frozen=True)
class Dop:
    """Dilution of precision of the satellites used."""

    pdop: float
    hdop: float
    vdop: float


class Sky:
    """The sky over one place.

    Args:
        lat_deg, lon_deg: geodetic.
        mask_deg: nothing below this elevation.
        obstruction: azimuth from, azimuth to, elevation below which that sector is covered; None = open.
        draws: for the scatter of the signal strengths.
    """

    def __init__(
        self,
        lat_deg: float,
        lon_deg: float,
        mask_deg: float,
        obstruction: tuple[float, float, float] | None,
        draws: random.Random,
    ) -> None:
        self._lat, self._lon = math.radians(lat_deg), math.radians(lon_deg)
        self._mask_deg, self._obstruction, self._draws = mask_deg, obstruction, draws
        squeezed = math.atan((1.0 - FLATTENING) * math.tan(self._lat))  # enough for an arc in the sky
        self._site = (
            EARTH_RADIUS_M * math.cos(squeezed) * math.cos(self._lon),
            EARTH_RADIUS_M * math.cos(squeezed) * math.sin(self._lon),
            EARTH_RADIUS_M * (1.0 - FLATTENING) * math.sin(squeezed),
        )

    def at(self, utc_s: float) -> list[Seen]:
        """Satellites above the mask at this time (seconds since 1970)."""
        found = []
        for system in SYSTEMS:
            for index in range(system.planes * system.per_plane):
                azimuth_deg, elevation_deg = self._direction(system, index, utc_s)
                if elevation_deg >= self._mask_deg:
                    found.append(self._seen(system, index, azimuth_deg, elevation_deg))
        return found

    def _seen(self, system: System, index: int, azimuth_deg: float, elevation_deg: float) -> Seen:
        strengths: tuple[int | None, ...] = tuple(None for _ in system.signals)
        if not self._covered(azimuth_deg, elevation_deg):
            base = 33.0 + 16.0 * math.sin(math.radians(elevation_deg))
            strengths = tuple(round(base - item.weaker_db + self._draws.gauss(0.0, 0.6)) for item in system.signals)
        return Seen(system, system.first + index, azimuth_deg, elevation_deg, strengths)

    def _covered(self, azimuth_deg: float, elevation_deg: float) -> bool:
        if self._obstruction is None:
            return False
        start_deg, end_deg, height_deg = self._obstruction
        return elevation_deg < height_deg and (azimuth_deg - start_deg) % 360.0 <= (end_deg - start_deg) % 360.0

    def _direction(self, system: System, index: int, utc_s: float) -> tuple[float, float]:
        plane, place = divmod(index, system.per_plane)
        node = 2.0 * math.pi * plane / system.planes + 0.7 * int(system.id) - EARTH_RATE * utc_s
        spread = 2.0 * math.pi * (place / system.per_plane + plane / (system.planes * system.per_plane))
        along = spread + 0.4 * math.sin(7.0 * index + int(system.id)) + 2.0 * math.pi * (utc_s / system.period_s)
        tilt = math.radians(system.inclination_deg)
        flat = system.radius_m * math.cos(along)
        across = system.radius_m * math.sin(along) * math.cos(tilt)
        x = flat * math.cos(node) - across * math.sin(node) - self._site[0]
        y = flat * math.sin(node) + across * math.cos(node) - self._site[1]
        z = system.radius_m * math.sin(along) * math.sin(tilt) - self._site[2]
        sin_lat, cos_lat = math.sin(self._lat), math.cos(self._lat)
        outward = math.cos(self._lon) * x + math.sin(self._lon) * y
        east = -math.sin(self._lon) * x + math.cos(self._lon) * y
        north = -sin_lat * outward + cos_lat * z
        up = cos_lat * outward + sin_lat * z
        azimuth_deg = math.degrees(math.atan2(east, north)) % 360.0
        return azimuth_deg, math.degrees(math.atan2(up, math.hypot(east, north)))


def dop(seen: list[Seen]) -> Dop | None:
    """Dilution of precision of the satellites used, None with fewer than four or a degenerate geometry.

    Square roots of the diagonal of (A'A)^-1, A = rows (east, north, up, 1) of the unit directions.
    """
    rows = []
    for item in seen:
        if item.used:
            azimuth, elevation = math.radians(item.azimuth_deg), math.radians(item.elevation_deg)
            flat = math.cos(elevation)
            rows.append((flat * math.sin(azimuth), flat * math.cos(azimuth), math.sin(elevation), 1.0))
    if len(rows) < 4:
        return None
    normal = [[sum(row[i] * row[j] for row in rows) for j in range(4)] for i in range(4)]
    inverse = _inverse(normal)
    if inverse is None:
        return None
    east, north, up = (inverse[i][i] for i in range(3))
    return Dop(math.sqrt(east + north + up), math.sqrt(east + north), math.sqrt(up))


def _inverse(matrix: list[list[float]]) -> list[list[float]] | None:
    """Gauss-Jordan with pivoting; None for a singular matrix."""
    size = len(matrix)
    work = [[*row, *(1.0 if i == j else 0.0 for j in range(size))] for i, row in enumerate(matrix)]
    for column in range(size):
        pivot = max(range(column, size), key=lambda i: abs(work[i][column]))
        if abs(work[pivot][column]) < 1e-9:
            return None
        work[column], work[pivot] = work[pivot], work[column]
        scale = work[column][column]
        work[column] = [value / scale for value in work[column]]
        for i in range(size):
            if i != column:
                factor = work[i][column]
                work[i] = [a - factor * b for a, b in zip(work[i], work[column], strict=True)]
    return [row[size:] for row in work]
