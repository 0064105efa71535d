"""What each example of the decoder's rules must give. Source: the rules themselves (sections A to G), the fields by
NMEA 0183; numbers follow from the digits of the lines. Exact, no tolerance.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import date
from typing import Any

from fieldbook.nmea.decoder import DecoderOptions

FEET, MODE_CONFLICT, NO_CHECKSUM, DATE_JUMP = 8, 16, 32, 4
LATITUDE = -75_456_789_010  # 12 deg 34.5678901 S
LONGITUDE = -142_567_890_120  # 23 deg 45.6789012 W


@dataclass(frozen=True)
class Case:
    """Expected: one dict per epoch (only the named fields are compared), counters, and what the decoder knows."""

    rule: str
    epochs: list[dict[str, Any]]
    counts: dict[str, int] = field(default_factory=dict)
    day0: date | None = None
    source: str | None = None
    warnings: list[str] = field(default_factory=list)
    options: DecoderOptions = field(default_factory=DecoderOptions)
    sky: list[tuple[str, int, float | None]] | None = None
    may_be_followed: bool = True  # False: the rule is about what ends the stream


def at(hours: int, minutes: int, seconds: float, **more: Any) -> dict[str, Any]:
    """An epoch at a time with nothing against it unless said."""
    return {"time_ms": round((hours * 3600 + minutes * 60 + seconds) * 1000), "code": None, **more}


PLACE = {"latitude_e8min": LATITUDE, "longitude_e8min": LONGITUDE, "latitude_decimals": 7, "longitude_decimals": 7}
MAY4 = date(2031, 5, 4)
NONE = {"warnings": ["no_valid_nmea"]}

CASES = [
    Case("A1", [at(10, 0, 0, **PLACE, number=1, day=0)], {"good": 1, "junk_bytes": 26}),
    Case("A2", [at(10, 0, 1, source="RMC")], {"truncated": 1, "good": 1}, MAY4, "RMC"),
    Case("A3", [at(10, 0, 2, source="GGA")], {"good": 2}, MAY4, "RMC"),
    Case("A4", [at(10, 0, 3)], {"good": 1, "junk_bytes": 19}),
    Case("A5", [at(10, 0, 4)], {"good": 3, "junk_bytes": 0, "line_end_bytes": 3}, MAY4, "RMC"),
    Case("A6", [at(10, 0, 5, **PLACE)], {"good": 1}),
    Case("A7", [], {"truncated": 1, "good": 0}, may_be_followed=False, **NONE),
    Case("A8", [], {"bad_checksum": 1, "good": 0}, **NONE),
    Case("A9", [], {"no_checksum": 1, "good": 0}, **NONE),
    Case(
        "A9",
        [at(10, 0, 8, flags=NO_CHECKSUM)],
        {"no_checksum": 1, "used_without_checksum": 1},
        options=DecoderOptions(accept_without_checksum=True),
    ),
    Case("A10", [], {"truncated": 1, "good": 0}, **NONE),
    Case("A11", [at(10, 0, 13)], {"good": 1}),
    Case("A12", [at(10, 0, 10)], {"good": 1, "bad_bytes": 1}),
    Case("A13", [], {"bad_bytes": 1, "good": 0}, **NONE),
    Case("A14", [at(10, 0, 11)], {"good": 1, "bad_bytes": 1}),
    Case("A15", [at(10, 0, 12, latitude_e8min=-75_456_789_012, latitude_decimals=11)], {"good": 1, "over_82": 1}),
    Case("A16", [at(10, 0, 14)], {"good": 1, "tag_bytes": 22, "junk_bytes": 0}),
    Case("A17", [], {"query": 1, "good": 1}),
    Case("A18", [], {"junk_bytes": 5, "good": 0}, **NONE),
    Case(
        "B1",
        [at(10, 1, 0, talker="IN"), at(10, 1, 0, talker="BD", code="conflict")],
        {"conflict": 1},
        warnings=["two_sources"],
    ),
    Case("B2", [], {"good": 1}, sky=[("QZSS", 2, 38.0)]),
    Case("B3", [], {"unknown_type": 1, "encapsulated": 1, "good": 2}),
    Case("B4", [at(10, 1, 1, quality=2, satellites=None, altitude_e5m=None, age_ms=None)], {}, MAY4, "RMC"),
    Case("B5", [at(10, 1, 2, code="no_position", latitude_e8min=None, quality=0, hdop_milli=None)], {"no_position": 1}),
    Case("B6", [at(10, 1, 3, altitude_e5m=None), at(10, 1, 3.1, altitude_e5m=None)], {"bad_field": 2}),
    Case("B7", [at(10, 1, 4 + n / 10, code="no_position", latitude_e8min=None) for n in range(4)], {"bad_position": 4}),
    Case("B8", [at(10, 1, 5, latitude_e8min=-75_400_000_000, latitude_decimals=0, longitude_e8min=30_750_000_000)]),
    Case(
        "B9",
        [
            at(10, 1, 6, longitude_e8min=1_079_999_999_900),
            at(10, 1, 7, longitude_e8min=-1_079_999_999_900),
            at(10, 1, 8, latitude_e8min=540_000_000_000, longitude_e8min=0),
        ],
    ),
    Case("B10", [at(10, 1, 9, **PLACE, altitude_e5m=12_345_600, altitude_decimals=3, separation_decimals=3)]),
    Case("B11", [at(10, 1, 10, latitude_decimals=4, longitude_decimals=4)]),
    Case(
        "C1",
        [at(10, 2, 0, sigma_latitude_e5m=1100, sigma_longitude_e5m=1200, sigma_altitude_e5m=2500)],
        {},
        MAY4,
        "RMC",
    ),
    Case("C2", [at(10, 2, 1, sigma_latitude_e5m=1100)], {}, MAY4, "RMC"),
    Case("C3", [at(10, 2, 2)], {"good": 2}, MAY4, "RMC"),
    Case("C4", [at(10, 2, 3), at(10, 2, 4)], {}, MAY4, "RMC"),
    Case("C5", [at(10, 2, 5, sigma_latitude_e5m=1100), at(10, 2, 6, sigma_latitude_e5m=None)]),
    Case("C6", [at(10, 2, 7)], {"good": 3}, MAY4, "RMC"),
    Case("C7", [at(10, 2, 8)], {"good": 2}),
    Case("C8", [at(10, 2, 10, source="GGA")], {"rmc_only_discarded": 1}, MAY4, "RMC"),
    Case("C9", [at(10, 2, 12, pdop_milli=1200, vdop_milli=900), {"code": "no_time", "time_ms": None}], {"no_time": 1}),
    Case("C10", [at(10, 2, 13), at(10, 2, 13, code="duplicate")], {"duplicate": 1}, MAY4, "RMC"),
    Case(
        "C11",
        [at(10, 2, 14, talker="GP", code="conflict"), at(10, 2, 14, talker="GN")],
        {"conflict": 1},
        warnings=["two_sources"],
    ),
    Case("C12", [at(10, 2, 15, source="GGA", latitude_decimals=7)], {"gns_merged": 1}),
    Case("C13", [at(10, 2, 16, source="GNS", quality=4, satellites=14, separation_e5m=-1_234_500, station="0061")]),
    Case(
        "C14", [at(10, 2, 17, source="RMC", altitude_e5m=None, separation_e5m=None, hdop_milli=None)], {}, MAY4, "RMC"
    ),
    Case("C15", [at(10, 2, 18), at(10, 2, 18.05), at(10, 2, 18.1)]),
    Case("C16", [at(10, 2, 19.379)], {"good": 2}, MAY4, "RMC"),
    Case("C17", [at(10, 2, 21), at(10, 2, 30), at(10, 2, 25, code="time_back")], {"time_back": 1}),
    Case("D1", [at(10, 3, 0, day=0), at(10, 3, 1, day=0)], {}, MAY4, "RMC"),
    Case("D2", [at(10, 3, 2, source="RMC", code="no_position")], {"untrusted_date": 1}),
    Case("D3", [at(23, 59, 59, day=0), at(0, 0, 0, day=1)], {}, MAY4, "ZDA"),
    Case("D4", [at(23, 59, 59, day=0), at(0, 0, 0, day=1)], {}, MAY4, "RMC"),
    Case("D5", [at(23, 59, 59.226, day=0)], {}, MAY4, "RMC"),
    Case("D6", [at(23, 59, 59, day=0), at(23, 59, 60, day=0), at(0, 0, 0, day=1)]),
    Case(
        "D7",
        [at(23, 59, 59), at(0, 0, 0, day=1), at(0, 0, 0, day=1, code="duplicate"), at(0, 0, 1, day=1)],
        {"repeated_second": 1},
    ),
    Case("D8", [{"code": "no_time", "time_ms": None, "day": None}] * 2, {"bad_time": 2, "no_time": 2}),
    Case("D9", [at(10, 3, 3, code="status"), at(10, 3, 4)], {"untrusted_date": 1}, MAY4, "RMC"),
    Case("D10", [at(10, 3, 5, quality=1)], {"bad_date": 1}),
    Case("D11", [at(10, 3, 6)], {}, date(2011, 9, 18), "RMC"),
    Case(
        "D12",
        [at(10, 3, 7, day=0, flags=0), at(10, 3, 8, day=5, flags=DATE_JUMP)],
        {"date_jump": 1},
        MAY4,
        "RMC",
        ["date_jump"],
    ),
    Case("D13", [], {"good": 2}),
    Case("D14", [at(10, 3, 11, received_utc_ms=None)]),
    Case("E1", [at(10, 4, 0, quality=0, code=None)], {"quality_0": 1}),
    Case("E2", [{"code": "no_time", "quality": 0}]),
    Case("E3", [at(10, 4, 1, code="no_position", latitude_e8min=None)], {"zero_position": 1}),
    Case("E3", [at(10, 4, 1, latitude_e8min=0)], options=DecoderOptions(approximate=(0.004, -0.004))),
    Case("E4", [at(10, 4, 2, quality=5), at(10, 4, 3, quality=4)], {"quality_5": 1, "quality_4": 1}),
    Case("E5", [at(10, 4, 4, quality=6), at(10, 4, 5, quality=8)], {}, warnings=["simulator_output", "dead_reckoning"]),
    Case("E6", [at(10, 4, 6, code="status"), at(10, 4, 7)], {"status": 1}, MAY4, "RMC"),
    Case("E7", [at(10, 4, 8, quality=4, flags=MODE_CONFLICT)], {"mode_conflict": 1}, MAY4, "RMC"),
    Case("E8", [at(10, 4, 9, **PLACE), at(10, 4, 10, **PLACE), at(10, 4, 11, **PLACE)]),
    Case("E9", []),
    Case(
        "E10",
        [
            at(10, 4, 14, age_ms=1000, station="0061"),
            at(10, 4, 15, age_ms=14_000, station="0061"),
            at(10, 4, 16, age_ms=1000, station="0133"),
        ],
    ),
    Case("E11", [at(10, 4, 17, satellites=31, hdop_milli=None)]),
    Case("E12", [at(10, 4, 18, datum="999", **PLACE)]),
    Case(
        "F1",
        [
            at(10, 5, 0, separation_e5m=None, separation_decimals=None),
            at(10, 5, 1, separation_e5m=0, separation_decimals=1),
        ],
    ),
    Case("F2", [at(10, 5, 2, altitude_e5m=None, **PLACE)], {}),
    # 405.039 ft x 0.3048 = 123.4558872 m, by hand
    Case("F3", [at(10, 5, 3, altitude_e5m=12_345_589, altitude_decimals=3, flags=FEET)], {"feet": 1}),
    Case("F4", [at(10, 5, 4, altitude_e5m=-2_800_000, altitude_decimals=0, separation_e5m=-1_200_000)]),
    Case("F5", [at(10, 5, 5, separation_e5m=-1_234_500), at(10, 5, 6, separation_e5m=-1_290_000)]),
    Case("F6", [], {"good": 3}),
    Case(
        "F7",
        [],
        {"good": 4},
        sky=[
            ("BeiDou", 19, 45.0),
            ("GPS", 2, 38.0),
            ("GPS", 5, 41.0),
            ("GPS", 12, 47.0),
            ("GPS", 15, 33.0),
            ("GPS", 24, 45.0),
        ],
    ),
    Case("F8", [], {"good": 2}, sky=[("GPS", 2, 49.4), ("GPS", 5, 41.0), ("GPS", 12, None)]),
    Case("F9", [], sky=[("BeiDou", 27, 30.0), ("GPS", 27, 16.0)]),
    Case(
        "G1",
        [at(10, 6, 0, talker="GN"), at(10, 6, 0.379, talker="GP")],
        {"mixed_receivers": 1},
        warnings=["mixed_receivers"],
    ),
    Case("G1", [at(10, 6, 0, talker="GN")], {"other_talker": 1}, options=DecoderOptions(talker="GN")),
    Case("G2", [at(10, 6, 1, **PLACE)], {"good": 1}),
    Case("G3", [], {"truncated": 1}, may_be_followed=False, **NONE),
    Case("G4", [at(10, 6, 3)], {"good": 1}),
    Case("G5", [at(10, 6, 4)], {"good": 1}),
]
