"""Fields to meaning: one reader per sentence type, each taking what is there and nothing that is not.

Strategy. A sentence shorter than today's is padded, a longer one is cut (decoder rule B4); an empty field is
None, a wrong one is None and counted as `bad_field`. Positions are read straight into the Epoch they will become.
"""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass
from datetime import date
from functools import lru_cache

from fieldbook.model.epoch import Epoch, EpochFlag
from fieldbook.nmea import fields
from fieldbook.nmea.tables import QUALITY_OF_MODE, best_mode_quality

# plain integers: an operation of an IntFlag costs more than reading a field
_FEET = int(EpochFlag.FEET)
Counts = defaultdict[str, int]

_NO_DOP_MILLI = (0, 99_990)
_METRE_PLACES = 5


@dataclass(slots=True)
class Heard:
    """One heard position sentence, not yet numbered."""

    epoch: Epoch
    text: bytes  # the sentence, for the test of identity
    place: list[str]  # the four fields of the position as text
    layout: int  # number of fields
    modes: str = ""  # GNS
    timed: bool = True


@dataclass(slots=True)
class Rmc:
    """What an RMC says of its epoch; its position is read only where the source has no other."""

    talker: str
    text: bytes
    parts: list[str]
    valid: bool  # status A; the navigation status (13th field) is another matter
    date: date | None  # of status A only: other dates are hints
    mode: str


@dataclass(slots=True)
class Gst:
    """Sigmas in 0.01 mm; None = not given or exactly zero."""

    talker: str
    latitude: int | None
    longitude: int | None
    altitude: int | None
    zero: bool


def split(text: bytes, count: int) -> list[str]:
    """The fields of a sentence, padded with empty ones up to `count`."""
    parts = str(text, "ascii").split(",")
    if len(parts) < count:
        parts += [""] * (count - len(parts))
    return parts


def _decimal(text: str, places: int, counts: Counts) -> tuple[int, int] | None:
    if not text:
        return None
    found = fields.read_decimal(text, places)
    if found is None:
        counts["bad_field"] += 1
    return found


def _count(text: str, counts: Counts, most_digits: int = 4) -> int | None:
    if not text:
        return None
    found = fields.read_count(text, most_digits)
    if found is None:
        counts["bad_field"] += 1
    return found


def read_dop(text: str, counts: Counts) -> int | None:
    """DOP in 0.001; 0.0, 99.99 and empty are none."""
    found = _decimal(text, 3, counts)
    return None if found is None or found[0] in _NO_DOP_MILLI or found[0] < 0 else found[0]


def read_place(epoch: Epoch, place: list[str], counts: Counts) -> None:
    """Latitude and longitude of four fields into the epoch, both or neither."""
    north, north_half, east, east_half = place
    if not north and not east:
        return
    latitude = fields.read_latitude(north, north_half)
    longitude = fields.read_longitude(east, east_half)
    if latitude is None or longitude is None:
        counts["bad_position"] += 1
        return
    epoch.latitude_e8min, epoch.latitude_decimals = latitude
    epoch.longitude_e8min, epoch.longitude_decimals = longitude


def _length(text: str, unit: str, epoch: Epoch, counts: Counts) -> tuple[int | None, int | None]:
    """A length in 1e-5 m with its decimals; feet are converted and flagged, another unit is not used."""
    found = _decimal(text, _METRE_PLACES, counts)
    if found is None:
        return None, None
    if unit == "M":
        return found
    if unit in ("f", "F"):
        epoch.flags |= _FEET
        counts["feet"] += 1
        return fields.feet_to_metres(found[0]), found[1]
    counts["bad_unit"] += 1
    return None, None


def _corrections(epoch: Epoch, age: str, station: str, counts: Counts) -> None:
    """Age and station; 0.0 with station 0000, or 0 with an autonomous fix, is how some say 'none'."""
    found = _decimal(age, 3, counts)
    if found is not None and found[0] < 0:
        counts["bad_field"] += 1
        found = None
    epoch.station = station or None
    if found is None:
        return
    if found[0] == 0 and station == "0000":
        epoch.station = None
    elif found[0] != 0 or epoch.quality != 1:
        epoch.age_ms = found[0]


def read_gga(text: bytes, talker: str, counts: Counts) -> tuple[Heard, str]:
    """A GGA as an epoch, and its time field."""
    f = split(text, 15)
    epoch = Epoch(0, "GGA", talker)
    heard = Heard(epoch, text, f[2:6], len(f))
    read_place(epoch, heard.place, counts)
    epoch.quality = _count(f[6], counts, 2) if f[6] else 0
    epoch.satellites = _count(f[7], counts)
    epoch.hdop_milli = read_dop(f[8], counts)
    epoch.altitude_e5m, epoch.altitude_decimals = _length(f[9], f[10], epoch, counts)
    epoch.separation_e5m, epoch.separation_decimals = _length(f[11], f[12], epoch, counts)
    if f[13] or f[14]:
        _corrections(epoch, f[13], f[14], counts)
    return heard, f[1]


def read_gns(text: bytes, talker: str, counts: Counts) -> tuple[Heard, str]:
    """A GNS as an epoch, and its time field; quality is that of the best mode letter."""
    f = split(text, 13)
    epoch = Epoch(0, "GNS", talker)
    heard = Heard(epoch, text, f[2:6], len(f), f[6])
    read_place(epoch, heard.place, counts)
    epoch.quality = best_mode_quality(f[6]) if f[6] else 0
    epoch.satellites = _count(f[7], counts)
    epoch.hdop_milli = read_dop(f[8], counts)
    epoch.altitude_e5m, epoch.altitude_decimals = _length(f[9], "M", epoch, counts)
    epoch.separation_e5m, epoch.separation_decimals = _length(f[10], "M", epoch, counts)
    if f[11] or f[12]:
        _corrections(epoch, f[11], f[12], counts)
    return heard, f[1]


def read_rmc(text: bytes, talker: str, counts: Counts) -> tuple[Rmc, str]:
    """An RMC, and its time field. A date with status V is never trusted, a wrong one is counted."""
    f = split(text, 13)
    day = fields.read_date(f[9]) if f[9] else None
    if f[9] and day is None:
        counts["bad_date"] += 1
    valid = f[2] == "A"
    if day is not None and not valid:
        counts["untrusted_date"] += 1
    return Rmc(talker, text, f, valid, day if valid else None, f[12]), f[1]


def rmc_heard(rmc: Rmc, counts: Counts) -> Heard:
    """An RMC as an epoch of its own: no height; quality from its mode letter, else unknown."""
    epoch = Epoch(0, "RMC", rmc.talker)
    heard = Heard(epoch, rmc.text, rmc.parts[3:7], len(rmc.parts))
    read_place(epoch, heard.place, counts)
    epoch.quality = QUALITY_OF_MODE.get(rmc.mode)
    return heard


def read_gst(text: bytes, talker: str, counts: Counts) -> tuple[Gst, str]:
    """The sigmas of a GST, and its time field."""
    f = split(text, 9)
    values, zero, bad = _sigmas(*f[6:9])
    if bad:
        counts["bad_field"] += bad
    return Gst(talker, *values, zero), f[1]


@lru_cache(maxsize=1024)  # a receiver's sigmas are few
def _sigmas(*parts: str) -> tuple[tuple[int | None, int | None, int | None], bool, int]:
    """Three sigmas, whether one is exactly zero, and how many are no sigma."""
    values: list[int | None] = []
    zero, bad = False, 0
    for part in parts:
        found = fields.read_decimal(part, _METRE_PLACES) if part else None
        if part and (found is None or found[0] < 0):
            bad += 1
            found = None
        if found is not None and found[0] == 0:
            zero = True
            found = None
        values.append(None if found is None else found[0])
    return (values[0], values[1], values[2]), zero, bad


def read_zda_date(parts: list[str], counts: Counts) -> date | None:
    """The UTC date of a ZDA; its local zone is informative only and not read."""
    if not (parts[2] or parts[3] or parts[4]):
        return None
    found = fields.make_date(parts[2], parts[3], parts[4])
    if found is None:
        counts["bad_date"] += 1
    return found


def read_gsa_dops(text: bytes, counts: Counts) -> tuple[int | None, int | None]:
    """(PDOP, VDOP) of a GSA in 0.001; the last field is a system ID when there is one more than 12, 20 or 24 slots."""
    tail = str(text, "ascii").rsplit(",", 4)
    if len(tail) < 5:
        return None, None
    with_id = text.count(b",") - 5 not in (12, 20, 24)
    pdop, vdop = (tail[1], tail[3]) if with_id else (tail[2], tail[4])
    return read_dop(pdop, counts), read_dop(vdop, counts)
