"""A position as it stands on paper: degrees, D M S, D M, gon, geocentric, grid. Values are exact, text is canonical.

A typed angle is kept as the fraction it is (12.4 seconds have no finite decimal in degrees), so that printing a position
and reading it again gives the same digits, whatever the form. `settings.coordinates` reads; this module prints. What
either means on the ground is the gateway's question (`reduce.frames.located`).

    degrees      23.670114° S  133.885522° E
    dms          23°40′12.41″ S  133°53′07.88″ E
    dm           23°40.2069′ S  133°53.1313′ E
    gon          26.300127 gon S  148.761691 gon E        400 gon in the turn
    geocentric   X -4052051.764 m  Y 4212836.202 m  Z -2545106.024 m
    grid         EPSG:7853  E 386353.234 m  N 7381852.299 m
"""

from __future__ import annotations

from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction

ANGULAR_FORMS = ("degrees", "dms", "dm", "gon")
FORMS = (*ANGULAR_FORMS, "geocentric", "grid")
MOST_DECIMALS = 15

_GON_PER_DEGREE = Fraction(10, 9)


@dataclass(frozen=True)
class Angular:
    """Latitude and longitude, exact fractions of a degree, with the form and the decimals they were typed with.

    decimals: of the last part of the angle. h_m: ellipsoidal height in metres with its digits, None = not given.
    """

    lat_deg: Fraction
    lon_deg: Fraction
    form: str
    decimals: int
    h_m: Decimal | None = None


@dataclass(frozen=True)
class Geocentric:
    """X, Y, Z in metres with their digits."""

    x_m: Decimal
    y_m: Decimal
    z_m: Decimal


@dataclass(frozen=True)
class Plane:
    """Easting and northing in metres of a grid named by its EPSG code, with their digits."""

    grid: str
    easting_m: Decimal
    northing_m: Decimal
    h_m: Decimal | None = None


Typed = Angular | Geocentric | Plane


def text_of(typed: Typed) -> str:
    """The canonical text of a typed position: reading it gives the same value, form and digits."""
    if isinstance(typed, Geocentric):
        return geocentric_text(typed.x_m, typed.y_m, typed.z_m)
    if isinstance(typed, Plane):
        return grid_text(typed.grid, typed.easting_m, typed.northing_m) + _height(typed.h_m)
    return angular_text(typed.lat_deg, typed.lon_deg, typed.form, typed.decimals) + _height(typed.h_m)


def angular_text(lat_deg: Fraction | float, lon_deg: Fraction | float, form: str, decimals: int) -> str:
    """Latitude and longitude in one of `ANGULAR_FORMS`; `decimals` of the last part. A zero is north or east.

    Raises:
        ValueError: another form, or decimals outside 0 to 15.
    """
    if form not in ANGULAR_FORMS or not 0 <= decimals <= MOST_DECIMALS:
        raise ValueError(f"no angular form {form} with {decimals} decimals")
    return f"{_angle(lat_deg, form, decimals, 'NS', 2)}  {_angle(lon_deg, form, decimals, 'EW', 3)}"


def geocentric_text(x_m: Decimal, y_m: Decimal, z_m: Decimal) -> str:
    """X, Y, Z with the digits given."""
    return f"X {_plain(x_m)} m  Y {_plain(y_m)} m  Z {_plain(z_m)} m"


def grid_text(grid: str, easting_m: Decimal, northing_m: Decimal) -> str:
    """Easting and northing with the digits given, the grid's code in front."""
    return f"{grid}  E {_plain(easting_m)} m  N {_plain(northing_m)} m"


def decimals_of_angle(metre_decimals: int, form: str) -> int:
    """Decimals of an angle's last part that carry as much as `metre_decimals` of a metre on the ground.

    A degree is 111 km, a gon 100 km, a minute 1.9 km, a second 31 m (of latitude).
    """
    more = {"degrees": 5, "gon": 5, "dm": 4, "dms": 2}[form]
    return max(0, min(MOST_DECIMALS, metre_decimals + more))


def _angle(degrees: Fraction | float, form: str, decimals: int, letters: str, width: int) -> str:
    value = Fraction(degrees)
    factor = {"degrees": Fraction(1), "gon": _GON_PER_DEGREE, "dm": Fraction(60), "dms": Fraction(3600)}[form]
    units = round(abs(value) * factor * 10**decimals)  # half to even, exact: 59.99999 never prints as 60
    letter = letters[1] if value < 0 and units else letters[0]
    if form in ("degrees", "gon"):
        sign = "°" if form == "degrees" else " gon"
        return f"{_digits(units, decimals, width)}{sign} {letter}"
    minute = 60 * 10**decimals
    if form == "dm":
        return f"{units // minute:0{width}d}°{_digits(units % minute, decimals, 2)}′ {letter}"
    whole = units // minute
    return f"{whole // 60:0{width}d}°{whole % 60:02d}′{_digits(units % minute, decimals, 2)}″ {letter}"


def _digits(units: int, decimals: int, width: int) -> str:
    """An integer of the last digit as a decimal number whose whole part has at least `width` digits."""
    if decimals == 0:
        return f"{units:0{width}d}"
    return f"{units // 10**decimals:0{width}d}.{units % 10**decimals:0{decimals}d}"


def _height(h_m: Decimal | None) -> str:
    return "" if h_m is None else f"  h {_plain(h_m)} m"


def _plain(value: Decimal) -> str:
    """Digits as typed; a negative zero loses its sign."""
    return format(abs(value) if value.is_zero() else value, "f")
