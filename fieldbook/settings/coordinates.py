"""A typed position to its exact value: every form the trade uses, nothing guessed, errors that point at the character.

    23.670114 S 133.885522 E          -23.670114 133.885522           -23.670114° 133.885522°   h 603.25 m
    23°40′12.41″ S 133°53′07.88″ E    S 23 40 12.41  E 133 53 07.88   -23 40 12.41, 133 53 07.88
    23°40.2069′ S 133°53.1313′ E      -23 40.2069 133 53.1313
    26.300127 gon S 148.761691 gon E
    X -4052051.764 Y 4212836.202 Z -2545106.024
    EPSG:7853 E 386353.234 N 7381852.299        UTM 53 south E 386353.234 N 7381852.299

Plain numbers are latitude and longitude in degrees, in this order; gon, geocentric and grid always say what they are. A
comma between two digits is refused (decimal comma or thousands?), so are O (east in German, west in Spanish), a zone
such as 32N (northern half or latitude band?), a sign together with a hemisphere letter, and numbers of a grid without E
and N, whose order differs from country to country.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from decimal import Decimal
from fractions import Fraction

from fieldbook.errors import UsageError
from fieldbook.model.coordinates import MOST_DECIMALS, Angular, Geocentric, Plane, Typed

MOST_CHARACTERS = 200
_MOST_DIGITS = 25

_TOKEN = re.compile(
    r"(?P<space>\s+)|(?P<code>EPSG:\d+)|(?P<number>\d+(?:\.\d*)?|\.\d+)|(?P<sign>[+\-−])|(?P<separator>[,;])"
    r"|(?P<degree>[°º])|(?P<second>″|\"|”|''|′′)|(?P<minute>['′’])|(?P<word>[^\W\d_]+)",
    re.IGNORECASE | re.ASCII,
)
_UNITS = ("degree", "minute", "second")
_LETTERS = {"N": (0, 1), "S": (0, -1), "E": (1, 1), "W": (1, -1)}
_EXAMPLE = "Write for example 23°40′12.41″ S 133°53′07.88″ E, or -23.670114 133.885522."
_HEIGHT = "A height is written h 603.25 m."


class CoordinateError(UsageError):
    """A position that cannot be read. `typed` is the whole text, `column` the first character that is wrong (from 0)."""

    default_code = "coordinate"

    def __init__(self, typed: str, column: int, text: str, remedy: str) -> None:
        super().__init__(f"{text} (character {column + 1}).", remedy)
        self.typed = typed
        self.column = column


@dataclass(frozen=True)
class _Token:
    kind: str
    text: str
    at: int


@dataclass
class _Part:
    """One number with its sign before and its unit behind."""

    number: _Token
    sign: _Token | None = None
    unit: _Token | None = None

    @property
    def at(self) -> int:
        return (self.sign or self.number).at

    @property
    def negative(self) -> bool:
        return self.sign is not None and self.sign.text != "+"

    @property
    def decimal(self) -> Decimal:
        value = Decimal(self.number.text)
        return -value if self.negative else value

    @property
    def closes(self) -> bool:
        """No further part of this angle can follow."""
        unit = "" if self.unit is None else self.unit.kind
        return "." in self.number.text or unit in ("second", "gon")


@dataclass
class _Angle:
    """Parts of one angle and its hemisphere letter."""

    parts: list[_Part] = field(default_factory=list)
    letter: _Token | None = None

    @property
    def at(self) -> int:
        return self.parts[0].at if self.parts else (self.letter.at if self.letter else 0)

    @property
    def gon(self) -> bool:
        return any(part.unit is not None and part.unit.kind == "gon" for part in self.parts)

    @property
    def axis(self) -> int | None:
        """0 = latitude, 1 = longitude, None = no letter says."""
        return None if self.letter is None else _LETTERS[self.letter.text.upper()][0]


_Item = _Part | _Token  # a number with what belongs to it, a word, or a separator


def parse_position(typed: str) -> Typed:
    """The position a text states.

    Raises:
        CoordinateError: with the character it fails at and what to write instead.
    """
    return _Reader(typed).position()


class _Reader:
    """One text, so that every error can point into it."""

    def __init__(self, typed: str) -> None:
        self.typed = typed
        self.end = len(typed.rstrip())

    def fail(self, at: int, text: str, remedy: str) -> CoordinateError:
        return CoordinateError(self.typed, min(at, self.end), text, remedy)

    def position(self) -> Typed:
        tokens = self._tokens()
        words = {token.text.upper() for token in tokens if token.kind == "word"}
        if any(token.kind == "code" for token in tokens) or "UTM" in words:
            grid, rest = self._grid_code(tokens)
            numbers = self._labelled(
                self._items(rest), ("E", "N"), "Write E before the easting, N before the northing."
            )
            return Plane(grid, numbers["E"], numbers["N"], numbers.get("H"))
        items = self._items(tokens)
        if words & {"X", "Y", "Z"}:
            numbers = self._labelled(items, ("X", "Y", "Z"), "Write X, Y and Z, each with its letter.")
            return Geocentric(numbers["X"], numbers["Y"], numbers["Z"])
        return self._angular(items)

    # -- characters to items ---------------------------------------------------------------------------------------

    def _tokens(self) -> list[_Token]:
        if len(self.typed) > MOST_CHARACTERS:
            raise self.fail(MOST_CHARACTERS, "The text is too long for a position", "Write one position.")
        found: list[_Token] = []
        at = 0
        while at < len(self.typed):
            match = _TOKEN.match(self.typed, at)
            if match is None:
                raise self.fail(at, f"{self.typed[at]!r} has no place in a position", _EXAMPLE)
            if match.lastgroup != "space":
                found.append(_Token(str(match.lastgroup), match.group(), at))
            at = match.end()
        if not found:
            raise self.fail(0, "There is no position", _EXAMPLE)
        self._check_numbers(found)
        return found

    def _check_numbers(self, tokens: list[_Token]) -> None:
        """What means different things in different countries, and what is no number."""
        for token, after in zip(tokens, [*tokens[1:], None], strict=True):
            end = token.at + len(token.text)
            touching = after is not None and after.at == end
            if token.kind != "number":
                continue
            if touching and after is not None and after.text == "," and self.typed[end + 1 : end + 2].isdigit():
                text = "A comma between two digits can be a decimal comma, a thousands comma or the end of a number"
                remedy = "Write decimals with a point, no thousands marks, and a space after a separating comma."
                raise self.fail(end, text, remedy)
            if touching and after is not None and after.kind == "number":
                raise self.fail(end, "A number has two decimal points", "Write one point.")
            if token.text.endswith("."):
                raise self.fail(end - 1, "The point has no digits after it", "Write the digits, or no point.")
            if len(token.text) > _MOST_DIGITS or len(token.text.partition(".")[2]) > MOST_DECIMALS:
                raise self.fail(token.at, "The number has too many digits", f"Write at most {MOST_DECIMALS} decimals.")

    def _items(self, tokens: list[_Token]) -> list[_Item]:
        """Signs and units attached to their numbers."""
        items: list[_Item] = []
        sign: _Token | None = None
        for token in tokens:
            if sign is not None and token.kind != "number":
                raise self.fail(sign.at, f"{sign.text} has no number behind it", _EXAMPLE)
            last = items[-1] if items else None
            if token.kind == "sign":
                sign = token
            elif token.kind == "number":
                items.append(_Part(token, sign))
                sign = None
            elif token.kind in _UNITS or token.text in ("gon", "m"):
                unit = token if token.kind in _UNITS else _Token("gon" if token.text == "gon" else "metre", *_of(token))
                if not isinstance(last, _Part) or last.unit is not None:
                    raise self.fail(token.at, f"{token.text} has no number before it", _EXAMPLE)
                last.unit = unit
            else:
                items.append(token)
        if sign is not None:
            raise self.fail(sign.at, f"{sign.text} has no number behind it", _EXAMPLE)
        return items

    # -- grid and geocentric ---------------------------------------------------------------------------------------

    def _grid_code(self, tokens: list[_Token]) -> tuple[str, list[_Token]]:
        """The grid's code, or that of the UTM zone, and the other tokens."""
        named = [i for i, token in enumerate(tokens) if token.kind == "code" or token.text.upper() == "UTM"]
        if len(named) > 1:
            raise self.fail(tokens[named[1]].at, "The grid is named twice", "Name one grid.")
        start = named[0]
        if tokens[start].kind == "code":
            return tokens[start].text.upper(), tokens[:start] + tokens[start + 1 :]
        remedy = "Write for example UTM 32 north or UTM 55 south: the letter N or S also names a latitude band."
        none = _Token("end", "", self.end)
        zone, half = [*tokens[start + 1 : start + 3], none, none][:2]
        if zone.kind != "number" or not zone.text.isdigit() or not 1 <= int(zone.text) <= 60:
            raise self.fail(zone.at, "UTM needs a zone from 1 to 60", remedy)
        if half.text.lower() not in ("north", "south"):
            raise self.fail(half.at, "The zone needs the word north or south", remedy)
        number = (16000 if half.text.lower() == "north" else 16100) + int(zone.text)
        return f"EPSG:{number}", tokens[:start] + tokens[start + 3 :]

    def _labelled(self, items: list[_Item], letters: tuple[str, ...], remedy: str) -> dict[str, Decimal]:
        """Numbers with a letter before or behind each; a height has its h before it, and stands last or first."""
        rest = [item for item in items if not (isinstance(item, _Token) and item.kind == "separator")]
        for item in rest:
            if isinstance(item, _Part) and item.unit is not None and item.unit.kind != "metre":
                raise self.fail(item.unit.at, f"{item.unit.text} has no place here", "Write plain metres.")
        first = rest[0] if rest else _Token("end", "", self.end)
        before = isinstance(first, _Token)
        allowed = (*letters, "H") if letters == ("E", "N") else letters
        found: dict[str, Decimal] = {}
        for one, two in zip(rest[::2], [*rest[1::2], _Token("end", "", self.end)], strict=False):
            label, part = (one, two) if before or _is_height(one) else (two, one)
            if isinstance(label, _Part):
                raise self.fail(one.at, "This number has no letter", remedy)
            if not isinstance(part, _Part):
                raise self.fail(part.at, "A number is missing here", remedy)
            if label.kind == "end":
                raise self.fail(part.at, "This number has no letter", remedy)
            name = label.text.upper()
            if name not in allowed:
                raise self.fail(label.at, f"{label.text!r} has no place here", remedy)
            if name in found:
                raise self.fail(label.at, f"{name} stands twice", "Write each once.")
            found[name] = part.decimal
        for letter in letters:
            if letter not in found:
                raise self.fail(self.end, f"{letter} is missing", remedy)
        return found

    # -- latitude and longitude ------------------------------------------------------------------------------------

    def _angular(self, items: list[_Item]) -> Angular:
        items, h_m = self._without_height(items)
        first, second = self._two(self._angles(items))
        if (first.letter is None) != (second.letter is None):
            lacking = first if first.letter is None else second
            raise self.fail(lacking.at, "This angle has no hemisphere letter", "Write a letter with both or with none.")
        if first.letter and second.letter and first.axis == second.axis:
            raise self.fail(second.letter.at, "Both letters are of the same axis", "One is N or S, the other E or W.")
        if first.gon != second.gon or len(first.parts) != len(second.parts):
            raise self.fail(second.at, "Latitude and longitude are written in different forms", "Write both alike.")
        lat, lon = (second, first) if first.axis == 1 else (first, second)
        form = "gon" if first.gon else ("degrees", "dm", "dms")[len(first.parts) - 1]
        decimals = max(len(one.parts[-1].number.text.partition(".")[2]) for one in (first, second))
        values = self._value(lat, 90, "latitude"), self._value(lon, 180, "longitude")
        return Angular(*values, form, decimals, h_m)

    def _without_height(self, items: list[_Item]) -> tuple[list[_Item], Decimal | None]:
        place = next((i for i, item in enumerate(items) if _is_height(item)), None)
        if place is None:
            return items, None
        remedy = "A height stands last, in metres: h 603.25 m."
        behind = items[place + 1 :]
        if not behind or not isinstance(behind[0], _Part):
            raise self.fail(items[place].at, "h has no number", remedy)
        part = behind[0]
        if part.unit is not None and part.unit.kind != "metre":
            raise self.fail(part.unit.at, f"{part.unit.text} is no unit of a height", remedy)
        if len(behind) > 1:
            raise self.fail(behind[1].at, "Something stands after the height", remedy)
        before = items[:place]
        if before and isinstance(before[-1], _Token) and before[-1].kind == "separator":
            before.pop()
        return before, part.decimal

    def _angles(self, items: list[_Item]) -> list[_Angle]:
        """Cut into angles: at separators, signs, letters, degree signs, and after decimals, seconds and gon."""
        found: list[_Angle] = []
        leading = bool(items) and isinstance(items[0], _Token) and items[0].kind == "word"
        fresh, separated = True, True
        for item in items:
            if isinstance(item, _Part):
                here = found[-1] if found else None
                begins = item.sign is not None or (item.unit is not None and item.unit.kind in ("degree", "gon"))
                if here is None or fresh or (here.parts and (begins or here.parts[-1].closes)):
                    here = _Angle()
                    found.append(here)
                here.parts.append(item)
                fresh = False
            elif item.kind == "separator":
                if separated:
                    raise self.fail(item.at, f"{item.text!r} separates nothing here", _EXAMPLE)
                fresh = separated = True
                continue
            else:
                self._letter(item)
                if leading:
                    found.append(_Angle(letter=item))
                elif fresh:
                    raise self.fail(item.at, f"{item.text} has no angle before it", "Write all letters on one side.")
                else:
                    found[-1].letter = item
                fresh = not leading
            separated = False
        return found

    def _letter(self, token: _Token) -> None:
        if token.text.upper() == "O":
            raise self.fail(token.at, "O is east in one language and west in another", "Write E or W.")
        if token.text.upper() not in _LETTERS:
            raise self.fail(token.at, f"{token.text!r} is no hemisphere", "Write N, S, E or W.")

    def _two(self, angles: list[_Angle]) -> tuple[_Angle, _Angle]:
        for one in angles:
            if not one.parts:
                raise self.fail(one.at, "A letter stands without an angle", _EXAMPLE)
        if len(angles) == 1 and angles[0].letter is None and len(angles[0].parts) in (4, 6):
            parts = angles[0].parts
            angles = [_Angle(parts[: len(parts) // 2]), _Angle(parts[len(parts) // 2 :])]
        elif (
            len(angles) == 1 and angles[0].letter is None and len(angles[0].parts) == 2 and not _has_minutes(angles[0])
        ):
            angles = [_Angle(angles[0].parts[:1]), _Angle(angles[0].parts[1:])]
        if len(angles) == 1:
            remedy = "Write letters, or a comma and a space, between the angles; a height is h 603.25 m."
            raise self.fail(self.end, "This cannot be told apart into latitude and longitude", remedy)
        if len(angles) > 2 and any(one.letter for one in angles):
            for one in angles[:-1]:
                if one.letter is None and "." in one.parts[-1].number.text:
                    raise self._early_decimals(one.parts[-1])
        if len(angles) != 2:
            at = angles[2].at if angles else 0
            raise self.fail(at, "There is a third angle" if angles else "There is no angle", _HEIGHT)
        return angles[0], angles[1]

    def _early_decimals(self, part: _Part) -> CoordinateError:
        at = part.number.at + part.number.text.index(".")
        return self.fail(at, "Only the last part of an angle can have decimals", "Write whole degrees and minutes.")

    def _value(self, angle: _Angle, limit_deg: int, name: str) -> Fraction:
        sign = next((part.sign for part in angle.parts if part.sign is not None), None)
        if sign is not None and angle.letter is not None:
            raise self.fail(sign.at, "A sign and a hemisphere letter together", "Write one of them.")
        if len(angle.parts) > (1 if angle.gon else 3):
            raise self.fail(angle.parts[1 if angle.gon else 3].at, "The angle has too many parts", _EXAMPLE)
        total = Fraction(0)
        for place, part in enumerate(angle.parts):
            kind = "" if part.unit is None else part.unit.kind
            if kind not in ("", "gon", _UNITS[place]):
                at = part.unit.at if part.unit is not None else part.at
                raise self.fail(at, f"{self.typed[at]} is out of order", "The order is ° ′ ″, each once.")
            number = part.number
            if place < len(angle.parts) - 1 and "." in number.text:
                raise self._early_decimals(part)
            if place and Fraction(number.text) >= 60:
                what = ("degrees", "minutes", "seconds")[place]
                raise self.fail(number.at, f"{number.text} {what} are 60 or more", f"Whole {what} end at 59.")
            total += Fraction(number.text) / 60**place
        degrees = total * 9 / 10 if angle.gon else total
        if degrees > limit_deg:
            hint = (
                "Latitude comes first, unless letters say otherwise."
                if limit_deg == 90
                else "Write west as W or minus."
            )
            raise self.fail(angle.parts[0].at, f"The {name} is over {limit_deg} degrees", hint)
        west_or_south = angle.letter is not None and _LETTERS[angle.letter.text.upper()][1] < 0
        return -degrees if west_or_south or angle.parts[0].negative else degrees


def _of(token: _Token) -> tuple[str, int]:
    return token.text, token.at


def _is_height(item: _Item) -> bool:
    return isinstance(item, _Token) and item.text.lower() == "h"


def _has_minutes(angle: _Angle) -> bool:
    """`23° 40′` is one angle, `23 40` may be two."""
    return any(part.unit is not None for part in angle.parts)
