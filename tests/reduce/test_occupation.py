"""The reduction of one occupation, case by case: what is refused, what becomes unknown, what decisions change."""

from __future__ import annotations

import dataclasses
import random
import tomllib
from datetime import date
from decimal import Decimal
from pathlib import Path
from typing import Any

import pytest

from fieldbook.errors import ReductionError, UsageError
from fieldbook.model.canonical import Tree
from fieldbook.model.epoch import Epoch
from fieldbook.model.session import HeightReading
from fieldbook.model.state import Occupation
from fieldbook.reduce.geodesy import enu_difference
from fieldbook.reduce.occupation import OccupationReducer, Reduced, reduce_occupation
from fieldbook.settings.session import merged, session_from_tree

SAMPLE = Path(__file__).parents[1] / "settings" / "contract_sample.toml"
LAT_E8MIN = round(-34.2743 * 6_000_000_000)
LON_E8MIN = round(146.0518 * 6_000_000_000)


def tree() -> Tree:
    """The contract's sample session as a tree, without its height reading."""
    raw = tomllib.loads(SAMPLE.read_text(encoding="utf-8"), parse_float=Decimal)
    raw["setup"].pop("height")
    return raw


def occupation(changes: Tree | None = None, **more: Any) -> Occupation:
    """An ended occupation with one vertical reading of 1.5 m before and after."""
    session = session_from_tree(merged(session_from_tree(tree()).tree, changes or {}))
    heights = [HeightReading("vertical", Decimal("1.5000"), "m", when) for when in ("before", "after")]
    made = Occupation(
        number=1,
        mark="KR-07",
        session=session,
        entry_seq=2,
        started_utc="2027-03-04T01:00:00.000Z",
        observer="R. Kell",
        link="file:receiver.nmea",
        simulated=False,
        heights=heights,
        ended_by="end of file",
        day0=date(2027, 3, 4),
        day0_source="RMC",
    )
    return dataclasses.replace(made, **more)


def epochs(count: int = 300, **more: Any) -> list[Epoch]:
    """RTK epochs at 1 Hz about one place, scatter 3 mm and 6 mm, from a seed."""
    chance = random.Random(5)
    rows = []
    for number in range(1, count + 1):
        row = Epoch(
            number,
            "GGA",
            "GN",
            day=0,
            time_ms=3_600_000 + 1000 * number,
            latitude_e8min=LAT_E8MIN + round(chance.gauss(0, 160)),
            longitude_e8min=LON_E8MIN + round(chance.gauss(0, 190)),
            latitude_decimals=8,
            longitude_decimals=8,
            altitude_e5m=21_837_000 + round(chance.gauss(0, 600)),
            altitude_decimals=4,
            separation_e5m=1_348_200,
            separation_decimals=4,
            quality=4,
            satellites=18,
            hdop_milli=700,
            pdop_milli=1200,
            age_ms=1000,
            station="0042",
        )
        rows.append(dataclasses.replace(row, **more))
    return rows


def reduced(changes: Tree | None = None, rows: list[Epoch] | None = None, **more: Any) -> Reduced:
    return reduce_occupation(occupation(changes, **more), rows if rows is not None else epochs(), [])


def codes(item: Reduced) -> set[str]:
    return {finding.code for finding in item.notes}


def test_the_mark_lies_below_the_phase_centre() -> None:
    item = reduced()
    mark = item.reduction.receiver
    assert mark.h_m is not None
    found = item.estimate
    assert found.h_m is not None
    east, north, up = enu_difference((found.lat_deg, found.lon_deg, found.h_m), (mark.lat_deg, mark.lon_deg, mark.h_m))
    assert (east, north, up) == pytest.approx((0.0003, -0.0005, -(1.5 + 0.0873)), abs=2e-6)


def test_reported_mark_is_left_where_it_is() -> None:
    item = reduced({"setup": {"reported_point": "mark", "receiver_height_m": "1.5"}})
    assert item.reduction.receiver.h_m == pytest.approx(item.estimate.h_m, abs=1e-9)
    wrong = reduced({"setup": {"reported_point": "mark", "receiver_height_m": "1.6"}})
    assert wrong.reduction.receiver.h_m == pytest.approx(wrong.estimate.h_m, abs=1e-9)
    assert "receiver_height_differs" in codes(wrong)


def test_reported_arp_leaves_the_phase_centre_out() -> None:
    item = reduced({"setup": {"reported_point": "ARP"}})
    assert item.estimate.h_m is not None
    assert item.reduction.receiver.h_m == pytest.approx(item.estimate.h_m - 1.5, abs=1e-6)
    assert not any("phase centre" in line.source for line in item.reduction.uncertainty.budget)


def test_without_separation_there_is_no_height_and_no_client() -> None:
    """Contract section 3: h unknown, then h, xyz and height are null, client null unless both frames are the same."""
    item = reduced(rows=epochs(separation_e5m=None, separation_decimals=None))
    assert item.reduction.receiver.h_m is None
    assert item.reduction.client is None
    assert item.reduction.uncertainty.vertical95_m is None
    assert item.reduction.uncertainty_client is None
    assert item.reduction.without_height == item.reduction.kept
    same = reduced(
        {"frame": {"receiver": "EPSG:7843", "receiver_epoch": "2020.0"}},
        epochs(separation_e5m=None, separation_decimals=None),
    )
    assert same.reduction.client is not None
    assert same.reduction.client.h_m is None
    assert same.reduction.height is None


def test_without_a_reading_the_mark_has_no_height() -> None:
    item = reduced(heights=[])
    assert item.reduction.receiver.h_m is None
    assert "height_reading_missing" in codes(item)


def test_identity_computes_nothing() -> None:
    item = reduced({"frame": {"receiver": "EPSG:7843", "receiver_epoch": "observation"}})
    client = item.reduction.client
    assert client is not None
    assert (client.lat_deg, client.lon_deg) == (item.reduction.receiver.lat_deg, item.reduction.receiver.lon_deg)
    assert item.reduction.operation.steps == []


@pytest.mark.parametrize("code", ["EPSG:4326", "EPSG:4979", "EPSG:7842", "EPSG:7855", "EPSG:9999999", "ESRI:1"])
def test_frames_refused_by_kind(code: str) -> None:
    with pytest.raises(UsageError):
        reduced({"frame": {"receiver": code}})


def test_nothing_usable_says_why() -> None:
    with pytest.raises(ReductionError, match="quality 300") as caught:
        reduced(rows=epochs(quality=1))
    assert caught.value.code == "no_usable_fix"
    with pytest.raises(ReductionError, match="No position was heard"):
        reduced(rows=[])


def test_an_unknown_date_refuses_and_a_decision_mends_it() -> None:
    with pytest.raises(ReductionError, match="date_unknown"):
        reduced(day0=None)


def test_rollover_moves_the_epoch_by_whole_weeks() -> None:
    """1024 weeks = 7168 days: at this site 1.3 m in the client's frame if it goes unnoticed (GPS week rollover)."""
    late = reduced(day0=date(2007, 7, 19), rollover_weeks=1024)
    assert late.reduction.started is not None
    assert late.reduction.started.startswith("2027-03-04T01:00:01")
    early = reduced(day0=date(2007, 7, 19))
    assert early.reduction.client is not None
    assert late.reduction.client is not None
    gap = abs(early.reduction.client.lat_deg - late.reduction.client.lat_deg) * 111_000
    assert gap > 1.0


def test_another_datum_needs_to_be_confirmed() -> None:
    with pytest.raises(ReductionError, match="datum 300"):
        reduced(rows=epochs(datum="999"))
    assert reduced(rows=epochs(datum="999"), datum_confirmed="999").reduction.kept == 300


def test_a_field_test_of_the_receiver_replaces_the_class() -> None:
    narrow = {"class": {"horizontal_m": "0.004", "vertical_m": "0.008", "correlation_s": "100", "source": "field test"}}
    assert reduced({"receiver": narrow}).reduction.uncertainty.horizontal95_m < (
        reduced().reduction.uncertainty.horizontal95_m
    )


def test_the_operator_sets_an_initialisation_aside() -> None:
    rows = epochs(200)
    for row in rows[100:104]:
        row.quality = 5
    item = reduced(rows=rows, initialisation_decisions={1: (False, "base was moved")})
    assert [entry.used for entry in item.reduction.initialisations] == [False, True]
    assert item.reduction.set_aside["operator"] == 100
    with pytest.raises(ReductionError, match="all were set aside"):
        reduced(rows=rows, initialisation_decisions={1: (False, "x"), 2: (False, "y")})


def test_disagreeing_initialisations_widen_the_budget() -> None:
    rows = epochs(240)
    for row in rows[118:122]:
        row.quality = 5
    for row in rows[122:]:
        row.latitude_e8min = (row.latitude_e8min or 0) + 16_000  # 0.30 m north
    item = reduced(rows=rows)
    line = next(line for line in item.reduction.uncertainty.budget if line.source == "initialisations that disagree")
    assert line.u_enu_m[1] == pytest.approx(0.30 / 3**0.5, rel=0.03)
    assert item.reduction.uncertainty.horizontal95_m > 0.3


def test_the_recorded_operation_is_kept() -> None:
    item = reduced(operation=["EPSG:8049"])
    assert [step.code for step in item.reduction.operation.steps] == ["8049"]
    with pytest.raises(ReductionError) as caught:
        reduced(operation=["EPSG:1234"])
    assert caught.value.code == "operation_changed"


def test_missing_geoid_and_grid_of_another_place() -> None:
    with pytest.raises(ReductionError, match="national"):
        reduced({"frame": {"geoid": "national.gtx"}})
    with pytest.raises(ReductionError, match="area of use"):
        reduced({"frame": {"grid": "EPSG:7849"}})
    accepted = reduced({"frame": {"grid": "EPSG:7849"}}, outside_area_accepted=True)
    assert accepted.reduction.grid is not None


def test_live_equals_batch_to_the_last_bit() -> None:
    rows, one = epochs(700), occupation()
    for row in rows[300:303]:
        row.quality = 5
    batch = reduce_occupation(one, rows, []).reduction.to_json()
    live = OccupationReducer(one)
    chance = random.Random(1)
    start = 0
    while start < len(rows):
        end = start + chance.randint(1, 40)
        live.push(rows[start:end])
        if end > 10:
            live.evaluate(one, [])
        start = end
    assert live.evaluate(one, []).reduction.to_json() == batch


def test_coarse_output_is_not_a_sigma() -> None:
    """Four decimals of a minute: 0.185 m steps; s/sqrt(n) of frozen digits would be zero."""
    rows = epochs(600)
    for row in rows:
        row.latitude_decimals = row.longitude_decimals = 4
        row.latitude_e8min = round((row.latitude_e8min or 0) / 10_000) * 10_000
        row.longitude_e8min = round((row.longitude_e8min or 0) / 10_000) * 10_000
    assert reduced(rows=rows).reduction.uncertainty.horizontal95_m > 0.08


def test_what_the_correction_source_adds() -> None:
    """1 ppm of the distance (NGS single-base guidelines, p. 42, second-hand) and the station's stated 95 %."""
    plain = reduced().reduction.uncertainty
    far = reduced({"corrections": {"distance_m": "10000", "u95_m": "0.0196"}}).reduction.uncertainty
    lines = {line.source: line for line in far.budget}
    assert lines["distance to the correction station, 10.0 km"].u_enu_m == pytest.approx([0.010, 0.010, 0.010])
    assert lines["coordinates of station 0042"].u_enu_m == pytest.approx([0.0196 / 1.959964] * 3)
    assert lines["coordinates of station 0042"].common
    assert far.horizontal95_m > plain.horizontal95_m + 0.015
