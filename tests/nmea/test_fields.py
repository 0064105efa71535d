"""Strict readers: grammar, exactness, half-even rounding."""

from __future__ import annotations

from decimal import ROUND_HALF_EVEN, Decimal

import pytest
from hypothesis import given
from hypothesis import strategies as st

from fieldbook.nmea import fields


@pytest.mark.parametrize(
    "text", ["", "nan", "inf", "1e3", "1_0", "12x", "--5", ".", "+", "-", " 1", "1 ", "٣", "1.2.3", "1234567890"]
)
def test_what_is_no_number(text: str) -> None:
    assert fields.read_decimal(text, 5) is None


@pytest.mark.parametrize(
    ("text", "value", "decimals"),
    [
        ("-2.5", -250_000, 1),
        ("00038", 3_800_000, 0),
        ("-0028", -2_800_000, 0),
        ("+12.3", 1_230_000, 1),
        (".5", 50_000, 1),
        ("5.", 500_000, 0),
    ],
)
def test_forms_of_a_number(text: str, value: int, decimals: int) -> None:
    assert fields.read_decimal(text, 5) == (value, decimals)


@given(st.from_regex(r"[+-]?[0-9]{1,9}(\.[0-9]{0,12})?", fullmatch=True))
def test_numbers_agree_with_the_decimal_module(text: str) -> None:
    want = int(Decimal(text).scaleb(5).to_integral_value(rounding=ROUND_HALF_EVEN))
    found = fields.read_decimal(text, 5)
    assert found is not None
    assert found[0] == want


@given(st.integers(0, 89), st.integers(0, 59), st.text("0123456789", max_size=12))
def test_angles_agree_with_the_decimal_module(degrees: int, minutes: int, fraction: str) -> None:
    text = f"{degrees:02d}{minutes:02d}.{fraction}"
    want = int(
        (Decimal(60 * degrees) + Decimal(f"{minutes}.{fraction or '0'}"))
        .scaleb(8)
        .to_integral_value(rounding=ROUND_HALF_EVEN)
    )
    assert fields.read_latitude(text, "S") == (-want, len(fraction))
    assert fields.read_longitude("0" + text, "E") == (want, len(fraction))


def test_beyond_eight_decimals_it_is_half_to_even() -> None:
    assert fields.read_latitude("0000.000000005", "N") == (0, 9)
    assert fields.read_latitude("0000.000000015", "N") == (2, 9)
    assert fields.read_latitude("0000.0000000051", "N") == (1, 10)


@pytest.mark.parametrize(
    ("text", "half"),
    [
        ("1260.0", "N"),
        ("9000.0000001", "N"),
        ("1234.5", ""),
        ("1234.5", "n"),
        ("1234.5", "E"),
        ("12345.6", "N"),
        ("-1234.5", "N"),
        ("12 4.5", "N"),
        ("1234.x", "N"),
        ("", "N"),
        (".5", "N"),
        ("1234.5.6", "N"),
    ],
)
def test_what_is_no_latitude(text: str, half: str) -> None:
    assert fields.read_latitude(text, half) is None


def test_what_is_still_an_angle() -> None:
    assert fields.read_longitude("507.5", "E") == (307_50000000, 1)
    assert fields.read_latitude("9000.0", "N") == (5400 * 10**8, 1)
    assert fields.read_longitude("18000", "W") == (-10800 * 10**8, 0)


@pytest.mark.parametrize(
    ("text", "time_ms"),
    [
        ("100202", 36_122_000),
        ("100202.0", 36_122_000),
        ("100202.", 36_122_000),
        ("100219.379", 36_139_379),
        ("235960", 86_400_000),
        ("235960.50", 86_400_500),
        ("235959.9999", 86_399_999),
        ("100000.0995", 36_000_100),
        ("246000.00", None),
        ("100060.00", None),
        ("10000", None),
        ("|19322|1.00", None),
        ("-10000", None),
        ("1000002", None),
        ("100000.x", None),
        ("", None),
    ],
)
def test_times(text: str, time_ms: int | None) -> None:
    assert fields.read_time(text) == time_ms


@pytest.mark.parametrize(
    ("text", "iso"),
    [
        ("040531", "2031-05-04"),
        ("311299", "1999-12-31"),
        ("010180", "1980-01-01"),
        ("311279", "2079-12-31"),
        ("290228", "2028-02-29"),
        ("290227", None),
        ("320531", None),
        ("310231", None),
        ("2208-1", None),
        ("04053", None),
        ("", None),
    ],
)
def test_dates(text: str, iso: str | None) -> None:
    found = fields.read_date(text)
    assert (found.isoformat() if found else None) == iso
