"""What is known before the first byte: job, requirement, frames, corrections, mark, antenna, set-up, receiver.

Built by `settings` from a session file (or from the tree stored in an `occupation` entry, by the same code).
None means 'not stated'. Numbers are floats in the unit of the name; the tree keeps the digits as typed.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from decimal import Decimal

from fieldbook.model.calibration import FrozenCalibration
from fieldbook.model.canonical import Tree

METRES_PER_UNIT = {
    "m": Decimal(1),
    "ft": Decimal("0.3048"),  # international foot, exact (1959 agreement)
    "ftUS": Decimal(1200) / Decimal(3937),  # US survey foot, 1200/3937 m exactly
}


@dataclass(frozen=True)
class Job:
    title: str
    observer: str
    client: str | None = None
    firm: str | None = None
    purpose: str | None = None
    remarks: str | None = None


@dataclass(frozen=True)
class Requirement:
    """What this mark must reach. A line that is None is not judged."""

    horizontal_95_m: float
    vertical_95_m: float
    accept_quality: tuple[int, ...]
    occupations: int
    in_frame: str = "receiver frame"  # or "client frame"
    minimum_time_s: float | None = None
    initialisations: int | None = None  # 2 where quality 4 is accepted and nothing is stated
    hours_between: float | None = None
    height_readings: str | None = "before and after"
    max_hdop: float | None = None
    max_pdop: float | None = None
    max_correction_age_s: float | None = None
    min_satellites: int | None = None
    source: str | None = None


@dataclass(frozen=True)
class TakenAs:
    """A declared equality of two frames: printed, with its uncertainty."""

    code: str
    as_code: str
    source: str
    sigma_m: float


@dataclass(frozen=True)
class Motion:
    """Stated motion between two epochs of a dynamic frame."""

    model: str | None = None
    plate: str | None = None
    sigma_m_per_year: float | None = None
    velocity_m_per_year: tuple[float, float, float] | None = None
    source: str | None = None


@dataclass(frozen=True)
class FrameChoice:
    """Receiver's frame and epoch, client's frame and epoch, grid and geoid. No part of it has a default."""

    receiver: str  # "EPSG:7912"
    client: str
    receiver_epoch: float | str | None = None  # "observation", decimal year, or None (static frame)
    client_epoch: float | str | None = None
    realisation: str | None = None
    grid: str | None = None
    geoid: str | None = None
    geoid_sha256: str | None = None  # of the file meant when the session file was read
    taken_as: tuple[TakenAs, ...] = ()
    motion: tuple[Motion, ...] = ()


@dataclass(frozen=True)
class Corrections:
    kind: str
    station: str | None = None
    coordinates: str | None = None
    frame: str | None = None
    epoch: str | None = None
    source: str | None = None
    u95_m: float | None = None
    antenna: str | None = None
    distance_m: float | None = None


@dataclass(frozen=True)
class WitnessMark:
    text: str
    azimuth_deg: float | None = None
    distance_m: float | None = None


@dataclass(frozen=True)
class Mark:
    name: str
    description: str | None = None
    id: str | None = None
    inscription: str | None = None
    access: str | None = None
    condition: str | None = None
    witness_marks: tuple[WitnessMark, ...] = ()
    approximate_lat_deg: float | None = None
    approximate_lon_deg: float | None = None


@dataclass(frozen=True)
class Antenna:
    model: str
    serial: str | None = None
    orientation_deg: float | None = None
    arp_to_phase_centre_north_m: float | None = None
    arp_to_phase_centre_east_m: float | None = None
    arp_to_phase_centre_up_m: float | None = None
    offset_frequency: str | None = None
    slant_radius_m: float | None = None
    slant_mark_above_arp_m: float | None = None
    arp_above_mount_m: float | None = None  # ARP above the bottom of the mount; 0 where they are the same point
    receiver_applies: str | None = None  # "nothing", "pattern", "offset", "offset and pattern"
    source: str | None = None  # of typed dimensions and offsets
    calibration: FrozenCalibration | None = None


@dataclass(frozen=True)
class HeightReading:
    """One reading as typed. `seq` is its entry in the book, None while it only stands in a session file."""

    method: str  # "slant", "vertical", "mount", "rod"
    value: Decimal
    unit: str  # "m", "ft", "ftUS"
    when: str  # "before", "during", "after"
    at: str | None = None
    reader: str | None = None
    time: str | None = None
    sigma_m: float | None = None
    seq: int | None = None
    tape_offset_m: float | None = None  # to be added: hook, broken end, zero of the tape

    @property
    def value_m(self) -> float:
        """The reading in metres as typed, by the exact factor of its unit; the tape's offset is not in it."""
        return float(self.value * METRES_PER_UNIT[self.unit])


@dataclass(frozen=True)
class Setup:
    reported_point: str  # "phase centre", "ARP", "mark"
    centring: str
    centring_sigma_m: float
    receiver_height_m: float | None = None
    support: str | None = None
    pole_length_m: float | None = None
    bubble_arcmin: float | None = None
    tribrach_id: str | None = None
    last_check: str | None = None
    reading_sigma_m: float | None = None
    inscription_read: str | None = None  # from the metal, at this set-up; or "not readable because ..."
    heights: tuple[HeightReading, ...] = ()


@dataclass(frozen=True)
class FixClass:
    """Class of fix as overridden by a field test of this receiver."""

    horizontal_m: float
    vertical_m: float
    correlation_s: float
    source: str


@dataclass(frozen=True)
class Receiver:
    link: str
    maker: str | None = None
    model: str | None = None
    serial: str | None = None
    firmware: str | None = None
    talker: str | None = None
    accept_without_checksum: bool = False
    datum_confirmed: str | None = None  # the DTM local-datum code that was confirmed, e.g. "999"
    fix_class: FixClass | None = None


@dataclass(frozen=True)
class Session:
    """A whole session file. `tree` is its canonical tree (texts, integers, booleans only)."""

    job: Job
    requirement: Requirement
    frame: FrameChoice
    corrections: Corrections
    mark: Mark
    antenna: Antenna
    setup: Setup
    receiver: Receiver
    tree: Tree = field(repr=False, compare=False, default_factory=dict)
