"""Typed positions: every form read exactly, what is ambiguous refused at its character, printing and reading undo each other."""

from __future__ import annotations

import re
from decimal import Decimal
from fractions import Fraction

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fieldbook.model.coordinates import (
    ANGULAR_FORMS,
    Angular,
    Geocentric,
    Plane,
    Typed,
    angular_text,
    decimals_of_angle,
    text_of,
)
from fieldbook.settings.coordinates import CoordinateError, parse_position

SOUTH = "23°40′12.41″ S  133°53′07.88″ E"


@pytest.mark.parametrize(
    "typed",
    [
        "23°40′12.41″ S 133°53′07.88″ E",
        "23°40'12.41\"S,  133°53'07.88\"E",
        "23º40’12.41” s; 133º53’07.88” e",
        "23°40'12.41 S 133 53 07.88 E",
        "-23 40 12.41, 133 53 7.88",
        "-23 40 12.41 133 53 7.88",
        "−23 40 12.41 +133 53 7.88",
        "S 23 40 12.41 E 133 53 07.88",
        "133 53 07.88 E 23 40 12.41 S",
        "E133°53′7.88″ S23°40′12.41″",
    ],
)
def test_dms_in_many_hands(typed: str) -> None:
    assert text_of(parse_position(typed)) == SOUTH


@pytest.mark.parametrize(
    ("typed", "canonical"),
    [
        ("-23.670114 133.885522", "23.670114° S  133.885522° E"),
        ("23.670114 S 133.885522 E", "23.670114° S  133.885522° E"),
        ("-23.670114°, 133.885522° h 603.25 m", "23.670114° S  133.885522° E  h 603.25 m"),
        ("-23.670114 133.885522; h -3.5", "23.670114° S  133.885522° E  h -3.5 m"),
        ("23 40.2069 S 133 53.1313 E", "23°40.2069′ S  133°53.1313′ E"),
        ("-23 40.2069 133 53.1313", "23°40.2069′ S  133°53.1313′ E"),
        ("26.300127 gon S 148.761691 gon E", "26.300127 gon S  148.761691 gon E"),
        ("-26.300127 gon, 148.761691 gon", "26.300127 gon S  148.761691 gon E"),
        ("x -4052051.764 y 4212836.202 z -2545106.024", "X -4052051.764 m  Y 4212836.202 m  Z -2545106.024 m"),
        ("-4052051.764 X 4212836.202 Y -2545106.024 Z", "X -4052051.764 m  Y 4212836.202 m  Z -2545106.024 m"),
        ("EPSG:7853 E 386353.234 N 7381852.299", "EPSG:7853  E 386353.234 m  N 7381852.299 m"),
        ("7381852.299 N 386353.234 E epsg:7853", "EPSG:7853  E 386353.234 m  N 7381852.299 m"),
        ("UTM 53 south E 386353.234 m N 7381852.299 m h 603 m", "EPSG:16153  E 386353.234 m  N 7381852.299 m  h 603 m"),
        ("utm 32 North N 5549792.3 E 478544.5", "EPSG:16032  E 478544.5 m  N 5549792.3 m"),
        ("EPSG:2048 E -55496.13 N -3752731.37", "EPSG:2048  E -55496.13 m  N -3752731.37 m"),
        ("0 0", "00° N  000° E"),
        ("90 180", "90° N  180° E"),
    ],
)
def test_every_form(typed: str, canonical: str) -> None:
    read = parse_position(typed)
    assert text_of(read) == canonical
    assert parse_position(canonical) == read


def test_values_are_exact() -> None:
    """Alice Springs, GDA2020 Technical Manual v1.3, 3.1.1: -23 40 12.446019, 133 53 07.847844."""
    read = parse_position("-23 40 12.446019 133 53 07.847844 h 603.3466")
    assert isinstance(read, Angular)
    assert read.lat_deg == -(23 + Fraction(40, 60) + Fraction("12.446019") / 3600)
    assert read.h_m == Decimal("603.3466")
    assert (read.form, read.decimals) == ("dms", 6)
    gon = parse_position("100 gon N 200 gon E")
    assert isinstance(gon, Angular)
    assert (gon.lat_deg, gon.lon_deg) == (90, 180)


@pytest.mark.parametrize("typed", ["-0 0 30.5, -0 0 10", "-0.5 -0.25", "0 30 S 0 15 W", "-0 30.0 -0 15.0"])
def test_minus_zero_degrees_is_south_and_west(typed: str) -> None:
    read = parse_position(typed)
    assert isinstance(read, Angular)
    assert read.lat_deg < 0
    assert read.lon_deg < 0
    assert text_of(read).count("S") == text_of(read).count("W") == 1


@pytest.mark.parametrize(
    ("typed", "under", "said"),
    [
        ("23,5 133.5", 2, "comma between two digits"),
        ("-23.67,133.88", 6, "comma between two digits"),
        ("EPSG:7853 E 386,353 N 7381852", 15, "comma between two digits"),
        ("2'600'000 E 1'200'000 N EPSG:2056", 1, "has no place"),
        ("23 61 12 S 133 53 7 E", 3, "61 minutes are 60 or more"),
        ("23 40 60 S 133 53 7 E", 6, "60 seconds are 60 or more"),
        ("23 60 S 133 53 E", 3, "60 minutes are 60"),
        ("23.5 40 12 S 133 53 7 E", 2, "Only the last part"),
        ("23 40.5 12 S 133 53 7 E", 5, "Only the last part"),
        ("23°40″ S 133°53′ E", 5, "out of order"),
        ("23°40°12 S 133°53′ E", 11, "third angle"),
        ("23°° S 133° E", 3, "no number before"),
        ("23.5 O 3.5 N", 5, "east in one language"),
        ("23.5 Q 3.5 N", 5, "no hemisphere"),
        ("23.5 N 3.5 S", 11, "same axis"),
        ("23.5 N 3.5", 7, "no hemisphere letter"),
        ("-23.5 S 133 E", 0, "sign and a hemisphere letter"),
        ("S -23.5 E 133", 2, "sign and a hemisphere letter"),
        ("91 3", 0, "latitude is over 90"),
        ("133.885 -23.67", 0, "latitude is over 90"),
        ("3 181", 2, "longitude is over 180"),
        ("90 0 0.001 N 3 0 0 E", 0, "latitude is over 90"),
        ("101 gon, 3 gon", 0, "latitude is over 90"),
        ("26.3 gon 40 12 S 3 gon E", 2, "Only the last part"),
        ("26.3 gon S 148.7 E", 11, "different forms"),
        ("23 40 12 S 133 53.1 E", 11, "different forms"),
        ("23 40 12.1 133 53", 11, "different forms"),
        ("-23.67 133.88 603.25", 14, "third angle"),
        ("23 40 133", 9, "told apart"),
        ("23.67", 5, "told apart"),
        ("23.67 S", 7, "told apart"),
        ("23.67 S,, 133 E", 8, "separates nothing"),
        ("-23.67 133.88 h", 14, "h has no number"),
        ("-23.67 133.88 h 5 ft", 18, "after the height"),
        ("-23.67 133.88 h 5°", 17, "no unit of a height"),
        ("1.2.3 4", 3, "two decimal points"),
        ("5. 6", 1, "no digits after it"),
        ("- 5 6 -", 6, "no number behind"),
        ("--5 6", 0, "no number behind"),
        ("5 6 1e3", 6, "no hemisphere letter"),
        ("nan nan", 0, "no hemisphere"),
        ("", 0, "no position"),
        ("   ", 0, "no position"),
        ("47.1 @ 8", 5, "has no place"),
        ("٣ ٤", 0, "has no place"),
        ("UTM 32N E 478544.5 N 5549792.3", 6, "north or south"),
        ("UTM 61 north E 1 N 2", 4, "zone from 1 to 60"),
        ("UTM", 3, "zone from 1 to 60"),
        ("EPSG:7853 386353.2 7381852.2", 10, "no letter"),
        ("EPSG:7853 E 386353.2 7381852.2", 21, "no letter"),
        ("EPSG:7853 E 386353.2", 20, "N is missing"),
        ("EPSG:7853 E 386353.2 N", 22, "number is missing"),
        ("EPSG:7853 E 1 E 2", 14, "E stands twice"),
        ("EPSG:7853 E 1 N 2 Z 3", 18, "no place here"),
        ("EPSG:7853 EPSG:7854 E 1 N 2", 10, "named twice"),
        ("X 1 Y 2", 7, "Z is missing"),
        ("1." + "0" * 30 + " 2", 0, "too many digits"),
        ("1 " * 200, 200, "too long"),
    ],
)
def test_what_is_refused_points_at_its_character(typed: str, under: int, said: str) -> None:
    with pytest.raises(CoordinateError) as refused:
        parse_position(typed)
    assert said in refused.value.text
    assert refused.value.column == under, refused.value.text
    assert f"(character {under + 1})" in refused.value.text
    assert refused.value.remedy
    assert refused.value.typed == typed


# --- properties ---------------------------------------------------------------------------------------------------

latitudes = st.fractions(min_value=-90, max_value=90, max_denominator=10**12)
longitudes = st.fractions(min_value=-180, max_value=180, max_denominator=10**12)
forms = st.sampled_from(ANGULAR_FORMS)
metres = st.decimals(min_value=-(10**8), max_value=10**8, allow_nan=False, allow_infinity=False, places=4)


@settings(max_examples=500, deadline=None)
@given(latitudes, longitudes, forms, st.integers(0, 12))
def test_printed_read_and_printed_again_is_the_same(lat: Fraction, lon: Fraction, form: str, decimals: int) -> None:
    text = angular_text(lat, lon, form, decimals)
    read = parse_position(text)
    assert isinstance(read, Angular)
    assert (read.form, read.decimals) == (form, decimals)
    assert text_of(read) == text
    last = Fraction(1, 10**decimals) / {"degrees": 1, "dm": 60, "dms": 3600, "gon": Fraction(10, 9)}[form]
    assert abs(read.lat_deg - lat) <= last / 2
    assert abs(read.lon_deg - lon) <= last / 2
    assert not re.search(r"[°′]60", text)


@settings(max_examples=300, deadline=None)
@given(latitudes, longitudes, forms, st.integers(0, 12), st.none() | metres)
def test_a_typed_position_is_its_canonical_text(lat, lon, form: str, decimals: int, height) -> None:
    read = parse_position(angular_text(lat, lon, form, decimals) + ("" if height is None else f" h {height:f}"))
    assert parse_position(text_of(read)) == read


@settings(max_examples=200, deadline=None)
@given(metres, metres, metres)
def test_metres_keep_their_digits(x: Decimal, y: Decimal, z: Decimal) -> None:
    for typed in (Geocentric(x, y, z), Plane("EPSG:7855", x, y, z), Plane("EPSG:7855", x, y)):
        text = text_of(typed)
        assert parse_position(text) == typed
        assert text_of(parse_position(text)) == text


@settings(max_examples=500, deadline=None)
@given(st.text(alphabet="0123456789 .,;-+−°'′\"″NSEWOgonhmUTMEPSG:XYZ", max_size=40))
def test_any_text_is_read_or_refused_inside_itself(typed: str) -> None:
    read, refused = read_or_refused(typed)
    if refused is not None:
        assert 0 <= refused.column <= len(typed)
        assert refused.remedy
    else:
        assert read is not None
        assert parse_position(text_of(read)) == read


def read_or_refused(typed: str) -> tuple[Typed | None, CoordinateError | None]:
    try:
        return parse_position(typed), None
    except CoordinateError as refused:
        return None, refused


def test_forms_that_are_not_there() -> None:
    for form, decimals in (("dmsx", 2), ("dms", -1), ("dms", 16)):
        with pytest.raises(ValueError, match="no angular form"):
            angular_text(1, 2, form, decimals)


def test_digits_of_an_angle() -> None:
    """0.001 m: a second of latitude is 31 m (5 decimals 0.3 mm), a minute 1.9 km, a degree 111 km, a gon 100 km."""
    assert [decimals_of_angle(3, form) for form in ("dms", "dm", "degrees", "gon")] == [5, 7, 8, 8]
