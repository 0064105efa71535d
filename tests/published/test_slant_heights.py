"""Slant heights. Rows of the table "slant to vertical" of the trade's own arithmetic, v = sqrt(s^2 - r^2).

Row 1: inputs and formula from a UNAVCO mailing-list note of 2019 (antenna of 0.3810 m diameter, ARP 0.0350 m below the
measuring plane), result computed; the other rows are round figures, computed. Tolerance: half of the last digit given.
"""

from __future__ import annotations

import pytest

from fieldbook.model.session import Antenna
from fieldbook.reduce.antenna import arp_height_m

ROWS = [
    # slant, radius, slant plane above ARP, ARP height above mark
    (1.8527, 0.1905, 0.0350, 1.80788),
    (1.500, 0.100, 0.0, 1.49666),
    (1.500, 0.170, 0.035, 1.45534),
    (2.000, 0.0981, -0.040, 2.03759),
]


@pytest.mark.parametrize(("slant_m", "radius_m", "above_arp_m", "expected_m"), ROWS)
def test_slant_to_arp(slant_m: float, radius_m: float, above_arp_m: float, expected_m: float) -> None:
    antenna = Antenna(model="any", slant_radius_m=radius_m, slant_mark_above_arp_m=above_arp_m)
    assert arp_height_m("slant", slant_m, antenna) == pytest.approx(expected_m, abs=6e-6)


def test_diameter_as_radius_is_29_8_mm_too_low() -> None:
    """The same row with the diameter taken as radius: 29.8 mm, three times the whole correction."""
    right = Antenna(model="any", slant_radius_m=0.1905, slant_mark_above_arp_m=0.0350)
    wrong = Antenna(model="any", slant_radius_m=0.3810, slant_mark_above_arp_m=0.0350)
    error_m = arp_height_m("slant", 1.8527, right) - arp_height_m("slant", 1.8527, wrong)
    assert error_m == pytest.approx(0.0298, abs=5e-5)
