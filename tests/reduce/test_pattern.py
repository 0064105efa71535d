"""Patterns moved into positions: an offset in disguise comes back exactly, and an independent least squares agrees."""

from __future__ import annotations

import math
import random

import numpy as np
import pytest
from invented_antex import Block, Frequency, Variation, dish, wavy

from fieldbook.model.calibration import AntennaCalibration
from fieldbook.model.frequencies import combination
from fieldbook.model.sky import Direction, Picture
from fieldbook.reduce.pattern import pattern_of, shift_over_assumed_sky, shift_over_recorded_sky
from fieldbook.settings.antex import block_calibration


def calibration(
    variation: Variation, *, dazi: float = 5.0, zenith: tuple[float, float, float] = (0.0, 90.0, 1.0)
) -> AntennaCalibration:
    block = Block("DEMO-A1", "NONE", (Frequency("G01", (0.0, 0.0, 50.0), variation),), dazi=dazi, zenith=zenith)
    return block_calibration("\n".join(block.lines()))


def sky(count: int = 14, minutes: int = 12, *, north_hole: bool = True, seed: int = 7) -> list[Picture]:
    rng = random.Random(seed)
    pictures = []
    for _ in range(minutes):
        picture: list[Direction] = []
        while len(picture) < count:
            elevation, azimuth = round(math.degrees(math.asin(rng.uniform(0.17, 1.0)))), rng.randrange(360)
            if not (north_hole and elevation < 60 and (azimuth < 40 or azimuth > 320)):
                picture.append(Direction(("GPS", "Galileo")[len(picture) % 2], elevation, azimuth))
        pictures.append(tuple(picture))
    return pictures


L1 = combination("L1")


@pytest.mark.parametrize("turned", [0.0, 35.0, 180.0, 270.0])
def test_an_offset_in_disguise_comes_back(turned: float) -> None:
    """ANTEX 1.4, section 3 (as read): observed distance = distance to the mean phase centre + variation. A centre c higher
    shortens every distance by c cos z, so a pattern of -c cos z is an offset of c upwards; -n sin z cos a one northwards.
    Whatever the sky and the receiver's weights, it must come back. Tolerance 0.02 mm: linear between nodes of 1 and 5
    degrees, rows printed to 0.01 mm."""
    pattern = pattern_of(calibration(dish(5.0, 3.0)), L1)
    angle = math.radians(turned)
    for found in (shift_over_recorded_sky(pattern, sky(), turned), shift_over_assumed_sky(pattern, turned)):
        assert found is not None
        expected = (0.003 * math.sin(angle), 0.003 * math.cos(angle), 0.005)
        assert found.shift_enu_m == pytest.approx(expected, abs=2e-5)
        assert max(found.u_enu_m) < 2e-5, "what is an offset does not depend on weights or sky"


def test_a_constant_is_the_clock() -> None:
    pattern = pattern_of(calibration(lambda zenith, azimuth: 4.0), L1)
    found = shift_over_recorded_sky(pattern, sky(), 0.0)
    assert found is not None
    assert found.shift_enu_m == pytest.approx((0.0, 0.0, 0.0), abs=1e-9)


def test_against_an_independent_adjustment() -> None:
    """The receiver's side, simulated: true distances to satellites 20,000 km away plus the variation, a position solved
    iteratively from distances by numpy.linalg.lstsq (not by the linear formula under test). Tolerance 0.01 mm."""
    made = calibration(wavy)
    pattern = pattern_of(made, L1)
    pictures = sky(minutes=6)
    errors = []
    for picture in pictures:
        satellites, observed = [], []
        for item in picture:
            e, a = math.radians(item.elevation_deg), math.radians(item.azimuth_deg)
            place = 2e7 * np.array([math.cos(e) * math.sin(a), math.cos(e) * math.cos(a), math.sin(e)])
            variation = float(pattern.at(np.array([90.0 - item.elevation_deg]), np.array([float(item.azimuth_deg)]))[0])
            satellites.append(place)
            observed.append(np.linalg.norm(place) + variation + 12.5)
        unknown = np.zeros(4)
        for _ in range(5):
            vectors = np.array(satellites) - unknown[:3]
            distances = np.linalg.norm(vectors, axis=1)
            design = np.hstack([-vectors / distances[:, None], np.ones((len(satellites), 1))])
            unknown += np.linalg.lstsq(design, np.array(observed) - distances - unknown[3], rcond=None)[0]
        errors.append(unknown[:3])
    mean = np.mean(errors, axis=0)
    found = shift_over_recorded_sky(pattern, pictures, 0.0)
    assert found is not None
    # one of the four solutions is this one; the middle lies within half their range of it
    assert np.all(np.abs(mean - np.array(found.shift_enu_m)) <= np.array(found.u_enu_m) * math.sqrt(3) + 1e-5)
    assert abs(mean[2]) > 0.002, "a pattern worth taking off"


def test_one_clock_or_one_per_system_is_the_range() -> None:
    found = shift_over_recorded_sky(pattern_of(calibration(wavy), L1), sky(), 0.0)
    assert found is not None
    assert found.sky == "recorded"
    assert found.pictures == 12
    assert 0 < found.u_enu_m[2] < 0.005


def test_values_at_nodes_between_and_beyond() -> None:
    made = calibration(wavy, dazi=30.0, zenith=(0.0, 80.0, 5.0))
    pattern = pattern_of(made, L1)
    row = made.frequencies[0]
    assert pattern.at(np.array([25.0]), np.array([60.0]))[0] == row.grid_m[2][5]
    assert pattern.at(np.array([80.0]), np.array([360.0]))[0] == row.grid_m[0][-1]
    middle = (row.grid_m[2][5] + row.grid_m[2][6] + row.grid_m[3][5] + row.grid_m[3][6]) / 4
    assert pattern.at(np.array([27.5]), np.array([75.0]))[0] == pytest.approx(middle, abs=1e-12)
    assert pattern.at(np.array([27.5]), np.array([-285.0]))[0] == pytest.approx(middle, abs=1e-12)
    assert np.isnan(pattern.at(np.array([81.0]), np.array([0.0]))[0]), "nothing beyond the last zenith angle"
    flat = pattern_of(made, L1, azimuths=False)
    assert flat.at(np.array([25.0]), np.array([123.0]))[0] == row.noazi_m[5]


def test_too_few_satellites_fix_nothing() -> None:
    pattern = pattern_of(calibration(wavy), L1)
    assert shift_over_recorded_sky(pattern, sky(count=4), 0.0) is None, "five unknowns with two clocks"
    assert shift_over_recorded_sky(pattern, sky(minutes=2), 0.0) is None
    assert shift_over_recorded_sky(pattern, [], 0.0) is None
    row = tuple(Direction("GPS", 30, azimuth) for azimuth in (0, 0, 1, 1, 0, 1))
    assert shift_over_recorded_sky(pattern, [row] * 5, 0.0) is None, "all in one place"


def test_combinations_of_patterns() -> None:
    block = Block("D", "NONE", (Frequency("G01", (0, 0, 0), dish(5.0)), Frequency("G02", (0, 0, 0), dish(2.0))), dazi=0)
    made = block_calibration("\n".join(block.lines()))
    free = combination("L1/L2 ionosphere-free")
    found = shift_over_assumed_sky(pattern_of(made, free), 0.0)
    assert found.shift_enu_m[2] == pytest.approx(0.001 * (2.5457 * 5.0 - 1.5457 * 2.0), abs=6e-5)
