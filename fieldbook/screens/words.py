"""Words and numbers as the trade writes them; one table per vocabulary."""

from __future__ import annotations

from fieldbook.clock import utc_text
from fieldbook.model.epoch import QUALITY_WORDS
from fieldbook.model.rounding import rounded_up

LEAVE_LINES = {
    "horizontal_95_m": "95 % horizontal",
    "vertical_95_m": "95 % height",
    "minimum_time_s": "time on mark",
    "initialisations": "initialisations that agree",
    "gates": "fix, DOP, satellites, age",
    "accept_quality": "fix quality",
    "max_hdop": "HDOP at most",
    "max_pdop": "PDOP at most",
    "max_correction_age_s": "corrections not older than",
    "min_satellites": "satellites at least",
    "height_readings": "height readings",
    "occupations": "occupations",
    "hours_between": "hours between occupations",
}
SET_ASIDE = {"dop": "DOP", "gst": "GST", "age": "age of corrections", "quality": "fix quality"}
SEVERITY = {"stop": ("■ STOP", "bad"), "caution": ("▲", "warn"), "info": ("·", "soft")}
VERDICT = {"good to leave": "good", "not yet": "warn", "cannot reach": "bad"}


def quality_word(quality: int | None) -> str:
    """The fix quality by its NMEA 0183 meaning."""
    return "no fix yet" if quality is None else QUALITY_WORDS.get(quality, f"quality {quality}")


def set_aside_word(code: str) -> str:
    """A set-aside code in words."""
    return SET_ASIDE.get(code, code.replace("_", " "))


def leave_word(line: str) -> str:
    """A requirement's key as a line of the leave check."""
    return LEAVE_LINES.get(line, line.removesuffix("_m").removesuffix("_s").replace("_", " "))


def length_95(value_m: float | None) -> str:
    """A 95 % figure, rounded up: `17 mm`, `6.3 mm`, `0.24 m`, `3.1 m`."""
    if value_m is None:
        return "not known"
    if value_m < 0.00995:
        return f"{rounded_up(value_m * 1000, 1)} mm"
    if value_m < 0.0995:
        return f"{rounded_up(value_m * 1000, 0)} mm"
    return f"{rounded_up(value_m, 2 if value_m < 0.995 else 1)} m"


def millimetres(value_m: float) -> str:
    """A difference in whole millimetres."""
    return f"{value_m * 1000:.0f} mm"


def signed_mm(value_m: float | None) -> str:
    """`+3`, `-12`, `0` whole millimetres, without a unit; a dash where it is not known."""
    if value_m is None:
        return "–"
    whole = round(1000 * value_m)
    return f"{whole:+d}" if whole else "0"


def duration(seconds: float | None) -> str:
    """`58 s`, `14 min 2 s`, `2 h 5 min`."""
    if seconds is None:
        return "not known"
    total = int(seconds + 0.5)
    if total < 60:
        return f"{total} s"
    if total < 3600:
        return f"{total // 60} min" + (f" {total % 60} s" if total % 60 else "")
    return f"{total // 3600} h" + (f" {total % 3600 // 60} min" if total % 3600 // 60 else "")


def stopwatch(seconds: float | None) -> str:
    """`14:02`, `1:02:33`."""
    if seconds is None:
        return "-:--"
    total = max(0, int(seconds))
    hours, rest = divmod(total, 3600)
    return f"{hours}:{rest // 60:02d}:{rest % 60:02d}" if hours else f"{rest // 60:02d}:{rest % 60:02d}"


def clock_text(utc_ms: int) -> str:
    """`09:41:22`."""
    return utc_text(utc_ms)[11:19]


def hour_minute(utc: str | None) -> str:
    """`09:41` of an entry's time."""
    return utc[11:16] if utc and len(utc) > 16 else "--:--"
