"""The receiver's position at one instant, as received: one row of the book's `epoch` table.

Numbers are integers, so that nothing is rounded twice and two rebuilds are equal to the last bit:
angles in 1e-8 arc-minute, heights and sigmas in 0.01 mm (1e-5 m), DOP in 0.001, age in ms. None = not given,
never 0. One epoch object exists for every GGA or GNS with a good checksum that was heard (RMC only where the
source sends neither), including those that can never be used: `code` then names the decoder's reason.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import IntFlag, StrEnum

E8MIN_PER_DEG = 60 * 10**8
DAY_MS = 86_400_000


# Fix quality by its NMEA 0183 meaning, GGA field 6: the one spelling for screens, commands and paper.
QUALITY_WORDS = {
    0: "no fix",
    1: "autonomous",
    2: "differential",
    3: "PPS",
    4: "RTK fixed",
    5: "RTK float",
    6: "dead reckoning",
    7: "manual",
    8: "simulator",
}


class SetAside(StrEnum):
    """Why an epoch is not used: one code each, the first that applies in this order (contract, section 3)."""

    NO_TIME = "no_time"
    DATE_UNKNOWN = "date_unknown"
    TIME_BACK = "time_back"
    DUPLICATE = "duplicate"
    CONFLICT = "conflict"
    NO_POSITION = "no_position"
    NO_FIX = "no_fix"
    QUALITY = "quality"
    STATUS = "status"
    DATUM = "datum"
    AGE = "age"
    SATELLITES = "satellites"
    DOP = "dop"
    GST = "gst"
    FROZEN = "frozen"
    OUTLIER = "outlier"
    INITIALISATION = "initialisation"
    OPERATOR = "operator"


class EpochFlag(IntFlag):
    """Circumstances worth keeping with an epoch; none of them alone sets it aside."""

    INCOMPLETE = 1  # the link was lost while this epoch was open
    AFTER_BREAK = 2  # first epoch after a lost link, a recorder restart or dropped bytes
    DATE_JUMP = 4  # the date changed by anything but +1 day at midnight
    FEET = 8  # altitude came in feet and was converted
    MODE_CONFLICT = 16  # mode letter of RMC or GNS contradicts the GGA quality; GGA wins
    NO_CHECKSUM = 32  # used without checksum, because the session says so
    GST_ZERO = 64  # GST sigmas of exactly zero: taken as none


@dataclass(slots=True)
class Epoch:
    """One heard position sentence with what the other sentences of its epoch add to it."""

    number: int  # 1, 2, ... in order of hearing within the occupation
    source: str  # "GGA", "GNS" or "RMC"
    talker: str  # "GN", "GP", ...
    day: int | None = None  # days since the day of the occupation's first timed epoch
    time_ms: int | None = None  # fix time of day; 86 400 000 and above only in a leap second
    code: str | None = None  # the decoder's own reason (a SetAside value), None = nothing against it so far
    latitude_e8min: int | None = None  # signed, north positive
    longitude_e8min: int | None = None  # signed, east positive
    latitude_decimals: int | None = None  # digits after the point of the minutes, as received
    longitude_decimals: int | None = None
    altitude_e5m: int | None = None  # above the receiver's own geoid model
    altitude_decimals: int | None = None
    separation_e5m: int | None = None  # geoid separation of the same sentence
    separation_decimals: int | None = None
    quality: int | None = None  # GGA field 6, or from the mode letter of GNS/RMC
    satellites: int | None = None
    hdop_milli: int | None = None
    pdop_milli: int | None = None
    vdop_milli: int | None = None
    age_ms: int | None = None  # age of corrections
    station: str | None = None  # correction station as text
    sigma_latitude_e5m: int | None = None  # GST
    sigma_longitude_e5m: int | None = None
    sigma_altitude_e5m: int | None = None
    datum: str | None = None  # DTM local datum in force when it is neither W84 nor P90
    flags: int = 0  # EpochFlag
    received_monotonic_ms: int | None = None  # arrival of the first byte of the epoch
    received_utc_ms: int | None = None

    @property
    def height_e5m(self) -> int | None:
        """Ellipsoidal height: altitude + separation of the same sentence, or None."""
        if self.altitude_e5m is None or self.separation_e5m is None:
            return None
        return self.altitude_e5m + self.separation_e5m

    @property
    def instant_ms(self) -> int | None:
        """Milliseconds since 00:00 of day 0, the occupation's own clock."""
        if self.day is None or self.time_ms is None:
            return None
        return self.day * DAY_MS + self.time_ms


@dataclass(frozen=True, slots=True)
class Satellite:
    """One satellite of the latest GSV cycle (strongest signal)."""

    system: str  # "GPS", "GLONASS", "Galileo", "BeiDou", "QZSS", "NavIC", "SBAS"
    number: int
    elevation_deg: int | None
    azimuth_deg: int | None
    cn0_dbhz: float | None
    used: bool
