"""Findings end to end: epochs as received, with one thing planted each, through reduction to the finding's words.

Errors are made here (Gauss-Markov by its recursion, white noise), from seeds. Every finding must carry a code, a severity,
figures, and text that says what to do; sound sessions must raise none of those that accuse.
"""

from __future__ import annotations

import dataclasses
import math
import time
import tomllib
from datetime import date
from decimal import Decimal
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from fieldbook.check.findings import findings_of
from fieldbook.model.canonical import Tree
from fieldbook.model.epoch import Epoch
from fieldbook.model.reduction import Finding
from fieldbook.model.session import HeightReading
from fieldbook.model.state import Occupation
from fieldbook.reduce.occupation import OccupationReducer, reduce_occupation
from fieldbook.settings.session import merged, session_from_tree

SAMPLE = Path(__file__).parents[1] / "settings" / "contract_sample.toml"
LAT_E8MIN, LON_E8MIN = round(-34.2743 * 6e9), round(146.0518 * 6e9)
E8_PER_M_LAT, E8_PER_M_LON = 1e8 / 1849.0, 1e8 / 1536.0  # good to 0.2 %, plenty here
START_MS = 3_600_000  # 01:00:00
ACCUSING = {
    "step", "drift", "periodic", "bursts", "smoothed", "gst_scatter", "gst_contradicts", "altitude_coarse",
    "resolution_coarse", "station_changed", "height_changed", "frozen", "many_outliers", "wrong_initialisation",
    "initialisations_disagree",
}  # fmt: skip


def occupation(changes: Tree | None = None, before: str = "1.5000", after: str = "1.5000") -> Occupation:
    raw = tomllib.loads(SAMPLE.read_text(encoding="utf-8"), parse_float=Decimal)
    raw["setup"].pop("height")
    session = session_from_tree(merged(session_from_tree(raw).tree, changes or {}))
    return Occupation(
        number=1, mark="KR-07", session=session, entry_seq=2, started_utc="2027-03-04T01:00:00.000Z",
        observer="R. Kell", link="file:receiver.nmea", simulated=False, ended_by="end of file",
        heights=[HeightReading("vertical", Decimal(v), "m", w) for v, w in ((before, "before"), (after, "after"))],
        day0=date(2027, 3, 4), day0_source="RMC",
    )  # fmt: skip


def errors(seed: int, count: int) -> np.ndarray:
    """(n, 3): white 2, 2, 4 mm on a Gauss-Markov process of 6, 6, 11 mm and 150 s."""
    rng = np.random.default_rng(seed)
    fade, size = math.exp(-1 / 150), np.array([0.006, 0.006, 0.011])
    slow = np.empty((count, 3))
    slow[0] = rng.normal(size=3) * size
    for k in range(1, count):
        slow[k] = fade * slow[k - 1] + math.sqrt(1 - fade**2) * size * rng.normal(size=3)
    return slow + rng.normal(size=(count, 3)) * [0.002, 0.002, 0.004]


def epochs(enu: np.ndarray, *, altitude_decimals: int = 4, **fields: Any) -> list[Epoch]:
    step = 10 ** (5 - altitude_decimals)
    rows = [
        Epoch(
            number, "GGA", "GN", day=0, time_ms=START_MS + 1000 * number,
            latitude_e8min=LAT_E8MIN + round(north * E8_PER_M_LAT),
            longitude_e8min=LON_E8MIN + round(east * E8_PER_M_LON),
            latitude_decimals=8, longitude_decimals=8,
            altitude_e5m=21_837_000 + round(up * 1e5 / step) * step, altitude_decimals=altitude_decimals,
            separation_e5m=1_348_200, separation_decimals=4, quality=4, satellites=18,
            hdop_milli=700, pdop_milli=1200, age_ms=1000, station="0042",
        )
        for number, (east, north, up) in enumerate(enu.tolist())
    ]  # fmt: skip
    return [dataclasses.replace(row, **fields) for row in rows] if fields else rows


def findings(rows: list[Epoch], changes: Tree | None = None, **heights: str) -> dict[str, Finding]:
    held = occupation(changes, **heights)
    found = findings_of(reduce_occupation(held, rows, []), held)
    ranks = [("stop", "caution", "info").index(item.severity) for item in found]
    assert ranks == sorted(ranks), "worst first"
    for item in found:
        assert item.text.rstrip().endswith((".", "independent", "reason")), item.text
        assert len(item.text) > 20
    return {item.code: item for item in found}


@pytest.fixture(scope="module")
def sound() -> list[Epoch]:
    return epochs(errors(1, 1800))


def test_a_sound_session_is_not_accused(sound: list[Epoch]) -> None:
    for seed in range(1, 9):
        rows = sound if seed == 1 else epochs(errors(seed, 1200))
        assert set(findings(rows)) & ACCUSING == set(), seed


def test_what_a_short_session_is_told() -> None:
    found = findings(epochs(errors(2, 600)))
    assert {"class_governs", "single_initialisation"} <= set(found)
    assert found["not_settled"].severity == "info"
    assert found["not_settled"].figures["index"] > 0.7
    assert found["class_governs"].figures["ratio"] < 5


def test_a_long_session_is_told_to_come_back() -> None:
    found = findings(epochs(errors(3, 9000)))
    assert "Staying longer" in found["floor_governs"].text
    assert "not_settled" not in found
    assert "class_governs" not in found


def test_step_is_a_stop_with_its_time_and_size() -> None:
    enu = errors(4, 1800)
    enu[900:, 2] += 0.25
    found = findings(epochs(enu))["step"]
    assert found.severity == "stop"
    assert found.figures["size_m"] == pytest.approx(0.25, abs=0.03)
    assert found.figures["axis"] == "height"
    assert found.figures["utc"][11:16] in {"01:14", "01:15"}
    assert "mm in height about 01:1" in found.text
    assert "occupy again" in found.text


def test_drift_names_axis_and_change() -> None:
    enu = errors(5, 2400)
    enu[:, 0] += np.linspace(0, 0.12, 2400)
    found = findings(epochs(enu))["drift"]
    assert (found.severity, found.figures["axis"]) == ("caution", "east")
    assert found.figures["change_m"] == pytest.approx(0.12, rel=0.3)
    assert found.figures["p"] < 0.01


def test_periodic_names_period_and_amplitude() -> None:
    enu = errors(6, 5400)
    enu[:, 2] += 0.015 * np.sin(2 * np.pi * np.arange(5400) / 240)
    found = findings(epochs(enu))["periodic"]
    assert found.figures["period_s"] == pytest.approx(240, rel=0.03)
    assert found.figures["amplitude_m"] == pytest.approx(0.015, rel=0.25)
    assert "whole periods, at least three" in found.text


def test_bursts_are_counted() -> None:
    enu = errors(7, 1800)
    enu[600:650, 0] += 0.12
    enu[1200:1250, 1] -= 0.12
    found = findings(epochs(enu))
    assert found["bursts"].figures["blocks"] >= 6
    assert found["bursts"].figures["largest_m"] == pytest.approx(0.12, abs=0.03)
    assert "step" not in found


def test_smoothed_output_is_named() -> None:
    enu = errors(8, 1800)
    for k in range(1, 1800):
        enu[k] = enu[k - 1] + (enu[k] - enu[k - 1]) / 40
    found = findings(epochs(enu))["smoothed"]
    assert found.severity == "caution"
    assert found.figures["ratio"] < 0.14
    assert "Switch" in found.text


@pytest.mark.parametrize(
    ("sigma_e5m", "count", "expected"), [(100, 900, True), (800, 900, False), (1200, 900, False), (7000, 9000, True)]
)
def test_the_receivers_own_estimate_against_its_scatter(sigma_e5m: int, count: int, expected: bool) -> None:
    """Scatter of 6 mm: 1 mm claimed is disproved, 8 and 12 mm are not; 70 mm in 150 minutes hides something."""
    own = {"sigma_latitude_e5m": sigma_e5m, "sigma_longitude_e5m": sigma_e5m, "sigma_altitude_e5m": 2 * sigma_e5m}
    found = findings(epochs(errors(9, count), **own))
    assert ("gst_scatter" in found) is expected
    if expected:
        assert found["gst_scatter"].figures["sigma_m"] == pytest.approx(sigma_e5m * 2e-5, rel=0.51)


def test_coarse_altitude(sound: list[Epoch]) -> None:
    found = findings(epochs(errors(1, 1800), altitude_decimals=1))
    assert found["altitude_coarse"].figures["step_m"] == pytest.approx(0.1)
    assert "resolution_coarse" not in found, "the coordinates are fine"
    assert "altitude_coarse" not in findings(epochs(errors(1, 900), altitude_decimals=3))


@pytest.mark.parametrize(("after", "expected"), [("1.5000", False), ("1.5009", False), ("1.4960", True)])
def test_antenna_height_changed(sound: list[Epoch], after: str, expected: bool) -> None:
    found = findings(sound, after=after)
    assert ("height_changed" in found) is expected
    if expected:
        item = found["height_changed"]
        assert item.severity == "info"
        assert item.figures["change_m"] == pytest.approx(-0.0040)
        assert 0 < item.figures["share"] < 1


def test_beyond_the_limit_the_readings_disagree_and_this_finding_is_silent(sound: list[Epoch]) -> None:
    assert "height_changed" not in findings(sound, after="1.4900")


def test_station_changed(sound: list[Epoch]) -> None:
    rows = [dataclasses.replace(row, station="0042" if row.number < 900 else "0043") for row in sound]
    own = findings(rows)["station_changed"]
    assert (own.severity, own.figures) == ("caution", {"changes": 1, "stations": ["0042", "0043"]})
    network = findings(rows, {"corrections": {"kind": "network"}})["station_changed"]
    assert network.severity == "info"


def test_gates_without_fields_are_said(sound: list[Epoch]) -> None:
    rows = [dataclasses.replace(row, pdop_milli=None) for row in sound]
    found = findings(rows, {"requirement": {"max_pdop": "4.0"}})["gate_not_applied"]
    assert found.figures == {"gate": "max_pdop", "epochs": 1800}


def test_a_live_look_gives_the_same_findings(sound: list[Epoch]) -> None:
    held = occupation()
    reducer = OccupationReducer(held)
    for start in range(0, 1800, 37):
        reducer.push(sound[start : start + 37])
    assert findings_of(reducer.evaluate(held, []), held) == findings_of(reduce_occupation(held, sound, []), held)


def test_a_look_costs_little(sound: list[Epoch], capsys: pytest.CaptureFixture[str]) -> None:
    """Printed, with a limit far above what it takes: the goal (15 ms in all) is a benchmark's."""
    held = occupation()
    done = reduce_occupation(held, sound, [])
    costs = []
    for _ in range(9):
        begun = time.perf_counter()
        findings_of(done, held)
        costs.append(1000 * (time.perf_counter() - begun))
    with capsys.disabled():
        print(f"\nfindings of 30 min: {sorted(costs)[4]:.1f} ms")
    assert sorted(costs)[0] < 100
