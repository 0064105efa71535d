"""From ARP to reported point with a calibration: what is taken off, what is not, and which lines the budget gets."""

from __future__ import annotations

import math
from dataclasses import replace
from datetime import datetime
from decimal import Decimal

import pytest
from invented_antex import OWN, TYPE_MEAN, WITH_DOME, Block, Frequency, dish
from test_pattern import sky

from fieldbook.model.calibration import FrozenCalibration
from fieldbook.model.session import Antenna, HeightReading, Setup
from fieldbook.reduce.antenna import reduce_antenna
from fieldbook.reduce.phase_centre import PhaseCentre, outside_validity, phase_centre
from fieldbook.settings.antex import block_calibration


def antenna(block: Block, **more: object) -> Antenna:
    kept = FrozenCalibration(block_calibration("\n".join(block.lines())), "invented.atx", "0" * 64)
    given = {
        "orientation_deg": 0.0,
        "offset_frequency": "L1",
        "receiver_applies": "nothing",
        "calibration": kept,
        **more,
    }
    return Antenna(model=kept.calibration.model, **given)  # type: ignore[arg-type]


FLAT = Block("DEMO-F", "NONE", (Frequency("G01", (0.5, -0.3, 87.3)), Frequency("G02", (0.2, 0.4, 92.1))))
CURVED = Block("DEMO-F", "NONE", (Frequency("G01", (0.5, -0.3, 87.3), dish(4.0, 2.0)),), dazi=5.0, zenith=(0, 90, 1))


def found(
    block: Block, point: str = "phase centre", *, pictures: bool = True, carrier: bool = True, **more: object
) -> PhaseCentre:
    return phase_centre(antenna(block, **more), point, sky() if pictures else None, carrier_phase=carrier)


def sources(centre: PhaseCentre) -> list[str]:
    return [line.source.removeprefix("phase centre of the antenna").removeprefix(": ") for line in centre.lines]


def test_offset_of_the_frequency() -> None:
    assert found(FLAT).offset_enu_m == pytest.approx((-0.0003, 0.0005, 0.0873), abs=1e-9)
    assert found(FLAT, offset_frequency="L2").offset_enu_m[2] == pytest.approx(0.0921, abs=1e-9)
    assert found(FLAT, orientation_deg=90.0).offset_enu_m[:2] == pytest.approx((0.0005, 0.0003), abs=1e-9)


def test_ionosphere_free_is_neither_of_the_two() -> None:
    """2.5457 x 87.3 - 1.5457 x 92.1 = 79.88 mm: 12 mm from L2, 7 mm from L1 (frequencies 1575.42 and 1227.60 MHz)."""
    centre = found(FLAT, offset_frequency="L1/L2 ionosphere-free")
    assert centre.offset_enu_m[2] == pytest.approx(0.0798806, abs=2e-7)
    assert centre.lines[0].u_enu_m[2] == pytest.approx(2.978 * 0.002, abs=1e-5), "errors grow with the combination"


def test_both_frequencies_carry_half_their_difference() -> None:
    centre = found(FLAT, offset_frequency="L1/L2")
    assert centre.offset_enu_m[2] == pytest.approx(0.0897, abs=1e-9)
    assert sources(centre) == ["", "pattern", "choice of frequency"]
    assert centre.lines[2].u_enu_m[2] == pytest.approx(0.0048 / 2 / math.sqrt(3), abs=1e-8)


def test_the_pattern_over_the_recorded_sky_replaces_2_and_5_mm() -> None:
    centre = found(CURVED)
    assert centre.offset_enu_m == pytest.approx((-0.0003, 0.0025, 0.0913), abs=3e-5)
    assert sources(centre) == ["", "pattern"]
    assert centre.lines[0].u_enu_m == (0.001, 0.001, 0.002)
    assert max(centre.lines[1].u_enu_m) < 3e-5
    assert [item.code for item in centre.findings] == ["antenna_calibration"]
    assert centre.figures is not None
    assert centre.figures["pattern"]["sky"] == "recorded"


def test_without_satellites_an_even_sky_and_a_caution() -> None:
    centre = found(TYPE_MEAN, pictures=False)
    assert [item.code for item in centre.findings] == ["pattern_sky_assumed", "antenna_calibration"]
    recorded = found(TYPE_MEAN)
    assert centre.lines[1].u_enu_m[2] > recorded.lines[1].u_enu_m[2]


@pytest.mark.parametrize(
    ("point", "applies", "offset_up_m", "lines"),
    [
        ("phase centre", "nothing", 0.0913, ["", "pattern"]),
        ("phase centre", "pattern", 0.0873, [""]),
        ("ARP", "offset", 0.0040, ["", "pattern"]),
        ("ARP", "offset and pattern", 0.0, [""]),
        ("mark", "offset", 0.0, ["", "pattern"]),
        ("mark", "offset and pattern", 0.0, [""]),
    ],
)
def test_nothing_is_taken_off_twice(point: str, applies: str, offset_up_m: float, lines: list[str]) -> None:
    centre = found(CURVED, point, receiver_applies=applies)
    assert centre.offset_enu_m[2] == pytest.approx(offset_up_m, abs=2e-5)
    assert sources(centre) == lines


def test_the_reported_mark_never_moves() -> None:
    """Nor by a pattern: the whole way to the mark is the receiver's."""
    setup = Setup("mark", "optical plummet", 0.001, receiver_height_m=1.5)
    result = reduce_antenna(setup, antenna(CURVED, receiver_applies="offset"), [], pictures=sky())
    assert result.offset_enu_m == (0.0, 0.0, 0.0)


def test_arp_reported_by_a_receiver_that_ignores_the_pattern() -> None:
    setup = Setup("ARP", "optical plummet", 0.001, reading_sigma_m=0.001)
    reading = HeightReading("vertical", Decimal("1.500"), "m", "before")
    result = reduce_antenna(setup, antenna(CURVED, receiver_applies="offset"), [reading], pictures=sky())
    assert result.offset_enu_m[2] == pytest.approx(-1.504, abs=2e-5)


def test_code_positions_keep_2_and_5_mm() -> None:
    centre = found(CURVED, carrier=False)
    assert centre.offset_enu_m[2] == pytest.approx(0.0873, abs=1e-9)
    assert centre.lines[1].u_enu_m == (0.002, 0.002, 0.005)


def test_unknown_orientation_turns_azimuths_into_uncertainty() -> None:
    centre = found(CURVED, orientation_deg=None)
    assert centre.offset_enu_m[:2] == pytest.approx((0.0, 0.0), abs=3e-5)
    assert centre.offset_enu_m[2] == pytest.approx(0.0913, abs=3e-5)
    spread = math.hypot(0.0005, 0.0003) / math.sqrt(2)
    assert centre.lines[0].u_enu_m[0] == pytest.approx(math.hypot(0.001, spread), abs=1e-9)
    # 2 mm north in an unknown direction: 2/sqrt(2) mm per axis
    assert centre.lines[1].u_enu_m[:2] == pytest.approx((0.002 / math.sqrt(2),) * 2, abs=3e-5)


def test_own_calibration_is_better_than_the_mean_of_the_type_and_said() -> None:
    own, mean = found(OWN, serial="0001"), found(TYPE_MEAN, serial="0002")
    assert own.lines[0].u_enu_m == (0.0005, 0.0005, 0.001)
    assert mean.lines[0].u_enu_m == (0.001, 0.001, 0.002)
    assert "of this antenna, serial 0001" in own.findings[-1].text
    assert "mean of the type; none of serial 0002 in the file" in mean.findings[-1].text


def test_the_choice_of_signals_is_told_with_its_effect() -> None:
    text = found(WITH_DOME).findings[-1].text
    assert "Offset for L1: up 87.3 mm" in text
    assert "L2 +4.8 mm" in text
    assert "L1/L2 ionosphere-free -7.4 mm" in text


def test_a_calibration_taken_over_from_elsewhere_is_a_caution() -> None:
    centre = found(replace(FLAT, method="COPIED FROM ABOVE"))
    assert "calibration_taken_over" in [item.code for item in centre.findings]


def test_typed_offset_with_what_the_receiver_applies() -> None:
    typed = Antenna("DEMO-A1 NONE", orientation_deg=0.0, arp_to_phase_centre_up_m=0.0873)
    assert phase_centre(typed, "ARP", None, carrier_phase=True).lines == [], (
        "not stated: nothing is known to be missing"
    )
    offset_only = phase_centre(replace(typed, receiver_applies="offset"), "ARP", None, carrier_phase=True)
    assert offset_only.lines[0].u_enu_m == (0.002, 0.002, 0.005)
    assert offset_only.offset_enu_m == (0.0, 0.0, 0.0)
    both = phase_centre(replace(typed, receiver_applies="offset and pattern"), "ARP", None, carrier_phase=True)
    assert both.lines[0].u_enu_m == (0.001, 0.001, 0.002)


def test_validity() -> None:
    block = replace(
        FLAT, valid=("  2026     1     1     0     0    0.0000000", "  2026    12    31    23    59   59.0000000")
    )
    kept = antenna(block).calibration
    assert outside_validity(kept, datetime(2026, 6, 1)) == []  # noqa: DTZ001
    assert [item.severity for item in outside_validity(kept, datetime(2027, 3, 4))] == ["stop"]  # noqa: DTZ001
    assert outside_validity(None, datetime(2027, 3, 4)) == []  # noqa: DTZ001
