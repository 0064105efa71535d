"""The vocabulary of a session file as one table: which tables and keys exist, of what kind, and which words they take.

The table is the only place that knows a key; the reader, the error that names the nearest known key, `entry --set`
and the documentation test all look here. Kinds:

    text      a text                         words:a|b   one of these texts
    number    a number, kept as typed        positive    a number above zero
    integer   a whole number                 qualities   list of NMEA GGA qualities 1 to 5
    flag      true or false                  epoch       a decimal year or "observation"
    vector3   list of three numbers          point/offset/class/witnesses   inline tables, see INLINE
"""

from __future__ import annotations

REPORTED_POINTS = ("phase centre", "ARP", "mark")
RECEIVER_APPLIES = ("nothing", "pattern", "offset", "offset and pattern")
METHODS = ("slant", "vertical", "mount", "rod")
UNITS = ("m", "ft", "ftUS")
OCCASIONS = ("before", "during", "after")
CORRECTION_KINDS = ("own base on known mark", "own base on unknown mark", "network", "satellite", "none")
HEIGHT_RULES = ("before and after", "once")


def words(*allowed: str) -> str:
    """The kind of a key that takes one of these texts."""
    return "words:" + "|".join(allowed)


TABLES: dict[str, dict[str, str]] = {
    "job": {
        "title": "text",
        "client": "text",
        "firm": "text",
        "purpose": "text",
        "remarks": "text",
        "observer": "text",
    },
    "requirement": {
        "horizontal_95_m": "positive",
        "vertical_95_m": "positive",
        "in": words("receiver frame", "client frame"),
        "minimum_time_s": "positive",
        "initialisations": "integer",
        "occupations": "integer",
        "hours_between": "positive",
        "height_readings": words(*HEIGHT_RULES),
        "accept_quality": "qualities",
        "max_hdop": "positive",
        "max_pdop": "positive",
        "max_correction_age_s": "positive",
        "min_satellites": "integer",
        "source": "text",
    },
    "frame": {
        "receiver": "text",
        "receiver_epoch": "epoch",
        "client": "text",
        "client_epoch": "epoch",
        "realisation": "text",
        "grid": "text",
        "geoid": "text",
        "geoid_sha256": "text",
        "taken_as": "list:frame.taken_as",
        "motion": "list:frame.motion",
    },
    "frame.taken_as": {"code": "text", "as": "text", "source": "text", "sigma_m": "number"},
    "frame.motion": {
        "model": "text",
        "plate": "text",
        "sigma_m_per_year": "number",
        "velocity_m_per_year": "vector3",
        "source": "text",
    },
    "corrections": {
        "kind": words(*CORRECTION_KINDS),
        "station": "text",
        "coordinates": "text",
        "frame": "text",
        "epoch": "text",
        "source": "text",
        "u95_m": "positive",
        "antenna": "text",
        "distance_m": "positive",
    },
    "mark": {
        "name": "text",
        "description": "text",
        "id": "text",
        "inscription": "text",
        "access": "text",
        "condition": "text",
        "witness_marks": "list:mark.witness_marks",
        "approximate": "inline:mark.approximate",
    },
    "mark.witness_marks": {"text": "text", "azimuth_deg": "number", "distance_m": "positive"},
    "mark.approximate": {"lat_deg": "number", "lon_deg": "number"},
    "antenna": {
        "model": "text",
        "serial": "text",
        "orientation_deg": "number",
        "arp_to_phase_centre_m": "inline:antenna.arp_to_phase_centre_m",
        "offset_frequency": "text",
        "slant_radius_m": "positive",
        "slant_mark_above_arp_m": "number",
        "arp_above_mount_m": "number",
        "antex": "text",
        "antex_entry": "integer",
        "listed": "text",
        "receiver_applies": words(*RECEIVER_APPLIES),
        "source": "text",
        "calibration": "inline:antenna.calibration",
    },
    "antenna.calibration": {"file": "text", "sha256": "text", "block": "text"},
    "antenna.arp_to_phase_centre_m": {"north": "number", "east": "number", "up": "number"},
    "setup": {
        "reported_point": words(*REPORTED_POINTS),
        "receiver_height_m": "number",
        "support": words("tripod", "pole", "pillar", "fixed-height tripod"),
        "pole_length_m": "positive",
        "bubble_arcmin": "positive",
        "tribrach_id": "text",
        "last_check": "text",
        "centring": "text",
        "centring_sigma_m": "positive",
        "reading_sigma_m": "positive",
        "inscription_read": "text",
        "height": "list:setup.height",
    },
    "setup.height": {
        "method": words(*METHODS),
        "value": "positive",
        "unit": words(*UNITS),
        "when": words(*OCCASIONS),
        "at": "text",
        "reader": "text",
        "time": "text",
        "sigma_m": "positive",
        "tape_offset_m": "number",
    },
    "receiver": {
        "link": "text",
        "maker": "text",
        "model": "text",
        "serial": "text",
        "firmware": "text",
        "talker": "text",
        "accept_without_checksum": "flag",
        "datum_confirmed": "text",
        "class": "inline:receiver.class",
    },
    "receiver.class": {
        "horizontal_m": "positive",
        "vertical_m": "positive",
        "correlation_s": "positive",
        "source": "text",
    },
}

# lines of the leave check: requirement keys, and the findings that stop
LEAVE_KEYS = (*(key for key in TABLES["requirement"] if key not in ("in", "source")), "findings")

TOP_LEVEL = ("job", "requirement", "frame", "corrections", "mark", "antenna", "setup", "receiver")

REQUIRED: dict[str, tuple[str, ...]] = {
    "job": ("title", "observer"),
    "requirement": ("horizontal_95_m", "vertical_95_m", "accept_quality", "occupations"),
    "frame": ("receiver", "client"),
    "corrections": ("kind",),
    "mark": ("name",),
    "antenna": ("model",),
    "setup": ("reported_point", "centring", "centring_sigma_m"),
    "receiver": ("link",),
    "frame.taken_as": ("code", "as", "source", "sigma_m"),
    "mark.witness_marks": ("text",),
    "mark.approximate": ("lat_deg", "lon_deg"),
    "antenna.arp_to_phase_centre_m": ("north", "east", "up"),
    "antenna.calibration": ("file", "sha256", "block"),
    "setup.height": ("method", "value", "unit", "when"),
    "receiver.class": ("horizontal_m", "vertical_m", "correlation_s", "source"),
}
