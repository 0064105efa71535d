"""Sentences of a simulated receiver, written by pynmea2: GGA, GST, RMC, ZDA, GSA with system ID, GSV with signal ID.

pynmea2 adds talker, commas and checksum. The order of fields is NMEA 0183's (4.10 and later, with navigational
status, system and signal IDs); a field the receiver does not know is empty, never zero.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta

import pynmea2

from fieldbook.links.sim_sky import SYSTEMS, Dop, Seen

MODE_LETTERS = {0: "N", 1: "A", 2: "D", 4: "R", 5: "F"}
_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
SLOTS = 12  # satellites of one GSA
PER_SENTENCE = 4  # satellites of one GSV


@dataclass(frozen=True)
class Fix:
    """What one epoch's sentences say. Angles in degrees, lengths in metres; None = not known."""

    utc_ms: int
    quality: int
    lat_deg: float
    lon_deg: float
    altitude_m: float
    separation_m: float
    satellites: int
    dop: Dop | None
    age_s: float | None
    station: str
    sigma_enu_m: tuple[float, float, float]
    speed_knots: float
    minute_decimals: int
    altitude_decimals: int
    separation_decimals: int


def sentence(talker: str, kind: str, fields: Sequence[str]) -> bytes:
    """One sentence with its checksum and CR LF."""
    made = getattr(pynmea2, kind)(talker, kind, tuple(fields))
    return str(made).encode("ascii") + b"\r\n"


def moment(utc_ms: int) -> datetime:
    """UTC of milliseconds since 1970, exactly."""
    return _EPOCH + timedelta(milliseconds=utc_ms)


def time_text(utc_ms: int) -> str:
    """hhmmss.ss"""
    at = moment(utc_ms)
    return f"{at:%H%M%S}.{at.microsecond // 10_000:02d}"


def angle_text(degrees: float, whole_digits: int, decimals: int) -> str:
    """Degrees and minutes as ddmm.mmm or dddmm.mmm, rounded once, never showing 60 minutes."""
    units = round(abs(degrees) * 60.0 * 10**decimals)
    whole, rest = divmod(units, 60 * 10**decimals)
    minutes, part = divmod(rest, 10**decimals)
    return f"{whole:0{whole_digits}d}{minutes:02d}.{part:0{decimals}d}"


def position_fields(fix: Fix) -> tuple[str, str, str, str]:
    """Latitude, N or S, longitude, E or W; empty without a fix."""
    if fix.quality == 0:
        return "", "", "", ""
    return (
        angle_text(fix.lat_deg, 2, fix.minute_decimals),
        "S" if fix.lat_deg < 0 else "N",
        angle_text(fix.lon_deg, 3, fix.minute_decimals),
        "W" if fix.lon_deg < 0 else "E",
    )


def gga(fix: Fix) -> bytes:
    """Fix data."""
    known = fix.quality != 0
    corrected = fix.age_s is not None
    return sentence(
        "GN",
        "GGA",
        (
            time_text(fix.utc_ms),
            *position_fields(fix),
            str(fix.quality),
            f"{fix.satellites:02d}",
            f"{fix.dop.hdop:.2f}" if fix.dop and known else "",
            f"{fix.altitude_m:.{fix.altitude_decimals}f}" if known else "",
            "M" if known else "",
            f"{fix.separation_m:.{fix.separation_decimals}f}" if known else "",
            "M" if known else "",
            f"{fix.age_s:.1f}" if corrected else "",
            fix.station if corrected else "",
        ),
    )


def gst(fix: Fix) -> bytes:
    """The receiver's own error estimate; the ellipse fields are not supported by this receiver."""
    if fix.quality == 0:
        return sentence("GN", "GST", (time_text(fix.utc_ms), *[""] * 7))
    east_m, north_m, up_m = fix.sigma_enu_m
    figures = (f"{value:.3f}" for value in (north_m, east_m, up_m))
    return sentence("GN", "GST", (time_text(fix.utc_ms), f"{2.0 * up_m:.2f}", "", "", "", *figures))


def rmc(fix: Fix) -> bytes:
    """Recommended minimum data: the date, status, mode letter; navigational status V as modern receivers send it."""
    known = fix.quality != 0
    at = moment(fix.utc_ms)
    return sentence(
        "GN",
        "RMC",
        (
            time_text(fix.utc_ms),
            "A" if known else "V",
            *position_fields(fix),
            f"{fix.speed_knots:.3f}" if known else "",
            "",
            f"{at:%d%m%y}",
            "",
            "",
            MODE_LETTERS[fix.quality],
            "V",
        ),
    )


def zda(utc_ms: int) -> bytes:
    """Date with a year of four digits."""
    at = moment(utc_ms)
    return sentence("GN", "ZDA", (time_text(utc_ms), f"{at:%d}", f"{at:%m}", f"{at:%Y}", "00", "00"))


def gsa(seen: Iterable[Seen], geometry: Dop | None, *, fixed: bool) -> Iterator[bytes]:
    """Satellites used, one or more sentences per system, with the system ID."""
    used = [item for item in seen if item.used] if fixed else []
    figures = ("", "", "")
    if geometry is not None and fixed:
        figures = (f"{geometry.pdop:.2f}", f"{geometry.hdop:.2f}", f"{geometry.vdop:.2f}")
    for system in SYSTEMS:
        numbers = [f"{item.number:02d}" for item in used if item.system is system]
        for start in range(0, max(len(numbers), 1), SLOTS):
            slots = numbers[start : start + SLOTS]
            slots += [""] * (SLOTS - len(slots))
            yield sentence("GN", "GSA", ("A", "3" if fixed else "1", *slots, *figures, system.id))


def gsv(seen: Iterable[Seen]) -> Iterator[bytes]:
    """Satellites in view, a set per system and signal, with the signal ID; a covered one has no strength."""
    everything = list(seen)
    for system in SYSTEMS:
        mine = [item for item in everything if item.system is system]
        for index, signal in enumerate(system.signals):
            total = max(1, -(-len(mine) // PER_SENTENCE))
            for number in range(total):
                fields = [str(total), str(number + 1), f"{len(mine):02d}"]
                for item in mine[number * PER_SENTENCE : (number + 1) * PER_SENTENCE]:
                    strength = item.cn0_dbhz[index]
                    fields += [
                        f"{item.number:02d}",
                        f"{item.elevation_deg:02.0f}",
                        f"{round(item.azimuth_deg) % 360:03d}",
                    ]
                    fields.append("" if strength is None else f"{strength:02d}")
                yield sentence(system.talker, "GSV", [*fields, signal.id])
