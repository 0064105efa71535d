"""One whole reduction, antenna to grid, computed a second time by pygeodesy from the mean of the fixes: to 0.1 mm.

Invented occupation near Frankfurt: phase centre of a turned antenna, slant height, ITRF2020 at the epoch of observation to
ETRF2000, UTM zone 32. pygeodesy 26 does the local frame, the Helmert transformation with its own parameters, the geodetic
coordinates (Karney) and the exact transverse Mercator; nothing of ours is used but the mean of the reported point.
"""

from __future__ import annotations

import dataclasses
import math
import random
import tomllib
from datetime import date
from decimal import Decimal
from pathlib import Path

import pytest

from fieldbook.model.epoch import Epoch
from fieldbook.model.session import HeightReading
from fieldbook.model.state import Occupation
from fieldbook.reduce.frames import operation_codes
from fieldbook.reduce.occupation import reduce_occupation
from fieldbook.settings.session import session_from_tree

SAMPLE = Path(__file__).parents[1] / "settings" / "contract_sample.toml"
LAT, LON = 50.1, 8.7
ORIENTATION_DEG = 35.0
NORTH_M, EAST_M, UP_M = 0.0021, -0.0017, 0.0873
SLANT_M, RADIUS_M, ABOVE_M = 1.5320, 0.1500, 0.0300


def occupation() -> Occupation:
    raw = tomllib.loads(SAMPLE.read_text(encoding="utf-8"), parse_float=Decimal)
    raw["setup"].pop("height")
    raw["frame"] = {
        "receiver": "EPSG:9989",
        "receiver_epoch": "observation",
        "client": "EPSG:7931",
        "grid": "EPSG:16032",
        "geoid": "egm96_15.gtx",
    }
    raw["antenna"] |= {
        "orientation_deg": Decimal(str(ORIENTATION_DEG)),
        "arp_to_phase_centre_m": {"north": Decimal("0.0021"), "east": Decimal("-0.0017"), "up": Decimal("0.0873")},
        "slant_radius_m": Decimal("0.1500"),
        "slant_mark_above_arp_m": Decimal("0.0300"),
    }
    session = session_from_tree(raw)
    return Occupation(
        number=1, mark="FR-01", session=session, entry_seq=2, started_utc="2027-03-04T01:00:00.000Z", observer="R. Kell",
        link="file:receiver.nmea", simulated=False, ended_by="end of file", day0=date(2027, 3, 4), day0_source="RMC",
        heights=[HeightReading("slant", Decimal("1.5320"), "m", when) for when in ("before", "after")],
    )  # fmt: skip


def epochs(count: int = 120) -> list[Epoch]:
    chance = random.Random(11)
    base = Epoch(
        1, "GGA", "GN", day=0, time_ms=3_600_000, latitude_e8min=0, longitude_e8min=0, latitude_decimals=8,
        longitude_decimals=8, altitude_e5m=10_200_000, altitude_decimals=5, separation_e5m=4_800_000,
        separation_decimals=5, quality=4, satellites=18, hdop_milli=700, pdop_milli=1200, age_ms=1000, station="0042",
    )  # fmt: skip
    return [
        dataclasses.replace(
            base,
            number=number,
            time_ms=3_600_000 + 1000 * number,
            latitude_e8min=round((LAT * 60) * 1e8) + round(chance.gauss(0, 160)),
            longitude_e8min=round((LON * 60) * 1e8) + round(chance.gauss(0, 250)),
            altitude_e5m=10_200_000 + round(chance.gauss(0, 600)),
        )
        for number in range(1, count + 1)
    ]


def test_antenna_to_grid_by_a_second_library() -> None:
    trf = pytest.importorskip("pygeodesy.trf")
    ellipsoidal = pytest.importorskip("pygeodesy.ellipsoidalExact")
    ltp = pytest.importorskip("pygeodesy.ltp")
    ecef = pytest.importorskip("pygeodesy.ecef")
    etm = pytest.importorskip("pygeodesy.etm")
    datums = pytest.importorskip("pygeodesy.datums")

    found = reduce_occupation(occupation(), epochs(), [])
    reduction, mean = found.reduction, found.estimate
    assert operation_codes(reduction.operation) == ["EPSG:10586"]
    assert mean.h_m is not None

    # antenna: the height above the mark from the slant, the offset turned by the orientation
    arp = math.sqrt(SLANT_M**2 - RADIUS_M**2) - ABOVE_M
    assert reduction.antenna.height_arp_m == pytest.approx(arp, abs=1e-9)
    turn = math.radians(ORIENTATION_DEG)
    east = EAST_M * math.cos(turn) + NORTH_M * math.sin(turn)
    north = NORTH_M * math.cos(turn) - EAST_M * math.sin(turn)
    plane = ltp.Ltp(mean.lat_deg, mean.lon_deg, mean.h_m, ecef=ecef.EcefKarney(datums.Datums.GRS80))
    level = plane.reverse(-east, -north, 0.0)
    mark = ellipsoidal.LatLon(
        float(level.lat), float(level.lon), height=float(level.height) - arp - UP_M, datum=datums.Datums.GRS80
    )
    receiver = reduction.receiver
    assert receiver.h_m == pytest.approx(mean.h_m - arp - UP_M, abs=1e-5)
    assert mark.distanceTo(ellipsoidal.LatLon(receiver.lat_deg, receiver.lon_deg, datum=datums.Datums.GRS80)) < 1e-5

    # frame: pygeodesy's own parameters of ITRF2020 to ETRF2000, its own epoch arithmetic
    epoch = reduction.epoch_of_observation
    assert epoch is not None
    cartesian = ellipsoidal.Cartesian(*mark.toCartesian().xyz, reframe=trf.RefFrames.ITRF2020, epoch=epoch)
    carried = cartesian.toRefFrame(trf.RefFrames.ETRF2000, epoch=epoch)
    client = reduction.client
    assert client is not None
    assert [client.x_m, client.y_m, client.z_m] == pytest.approx([carried.x, carried.y, carried.z], abs=1e-4)
    place = carried.toLatLon(datum=datums.Datums.GRS80)
    assert client.h_m == pytest.approx(place.height, abs=1e-4)

    # grid: exact transverse Mercator on GRS 1980 (UTM zone 32: 9 E, 0.9996, 500 km)
    grid = reduction.grid
    assert grid is not None
    exact = etm.ExactTransverseMercator(datums.Datums.GRS80, lon0=9.0, k0=0.9996)
    easting, northing, convergence, scale = exact.forward(place.lat, place.lon)
    assert grid.easting_m == pytest.approx(easting + 500_000.0, abs=1e-4)
    assert grid.northing_m == pytest.approx(northing, abs=1e-4)
    assert grid.convergence_deg == pytest.approx(convergence, abs=1e-9)
    assert grid.scale_factor == pytest.approx(scale, abs=1e-10)  # PROJ differentiates numerically
    assert reduction.height is not None
    assert reduction.height.orthometric_m == pytest.approx(client.h_m - reduction.height.undulation_m, abs=1e-9)
