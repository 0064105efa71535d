"""Conventions of ANTEX 1.4 (M. Rothacher, R. Schmid, 15 September 2010), each a check on an invented block.

Millimetres, from the ARP, north / east / up, azimuth from north to east: read (format description, section 3); columns:
from memory, high. Coefficients of the ionosphere-free combination: computed from 1575.42 and 1227.60 MHz.
"""

from __future__ import annotations

import pytest
from invented_antex import Block, Frequency, antex

from fieldbook.model.frequencies import combination
from fieldbook.settings.antenna_rules import combined_offset
from fieldbook.settings.antex import block_calibration


def test_ionosphere_free_coefficients() -> None:
    """2.5457 and -1.5457; tolerance half of the last digit. Their sum is 1."""
    free = combination("L1/L2 ionosphere-free")
    assert free.coefficients == pytest.approx((2.5457, -1.5457), abs=5e-5)
    assert sum(free.coefficients) == pytest.approx(1.0, abs=1e-12)
    assert free.amplification == pytest.approx(2.978, abs=5e-4)


def test_ionosphere_free_against_the_integers() -> None:
    """The GPS carriers are 154 and 120 times 10.23 MHz: 154^2/(154^2 - 120^2) exactly. Tolerance 1e-12."""
    assert combination("L1/L2 ionosphere-free").coefficients[0] == pytest.approx(154**2 / (154**2 - 120**2), abs=1e-12)


def test_offset_of_the_combination() -> None:
    """L1 87.3, L2 92.1 mm: 2.5457 x 87.3 - 1.5457 x 92.1 = 79.88 mm, not the mean and not L1. Tolerance 0.01 mm."""
    block = Block("DEMO-F", "NONE", (Frequency("G01", (0.0, 0.0, 87.3)), Frequency("G02", (0.0, 0.0, 92.1))))
    made = block_calibration("\n".join(block.lines()))
    assert combined_offset(made, combination("L1/L2 ionosphere-free"))[2] == pytest.approx(0.07988, abs=1e-5)


def test_columns_of_the_format() -> None:
    """TYPE / SERIAL NO A20 (radome in 17-20), A20; NORTH / EAST / UP 3F10.2; labels in columns 61-80; rows 3X,A5,nF8.2."""
    text = antex([Block("DEMO-F", "NONE", (Frequency("G01", (1.25, -0.5, 60.0)),), serial="S-9")])
    lines = text.splitlines()
    kind = next(line for line in lines if line[60:] == "TYPE / SERIAL NO")
    assert (kind[:16].rstrip(), kind[16:20], kind[20:40].rstrip()) == ("DEMO-F", "NONE", "S-9")
    offset = next(line for line in lines if line[60:] == "NORTH / EAST / UP")
    assert offset[:30] == "      1.25     -0.50     60.00"
    begin = next(index for index, line in enumerate(lines) if line[60:] == "START OF ANTENNA")
    made = block_calibration("\n".join(lines[begin:]))
    assert made.frequencies[0].offset_neu_m == pytest.approx((0.00125, -0.0005, 0.06), abs=1e-12)
