"""One value of a session file: is it of its kind, and what is its canonical spelling.

Numbers stay as typed (decimal text), so that a stored session shows the digits the operator wrote.
"""

from __future__ import annotations

import datetime
import difflib
from collections.abc import Iterable
from decimal import Decimal, InvalidOperation
from typing import Any

from fieldbook.errors import UsageError
from fieldbook.model.canonical import decimal_text

LARGEST_INTEGER = 10**9
MOST_DIGITS = 40  # of a number; written out, 1e999999 would be a megabyte


class BadValue(ValueError):
    """A value that is not of its kind; the caller adds where it stands."""


def nearest(word: str, known: Iterable[str]) -> str:
    """` Did you mean "x"?` or an empty text."""
    close = difflib.get_close_matches(word, list(known), n=1, cutoff=0.5)
    return f' The nearest known one is "{close[0]}".' if close else ""


def number_text(value: Any) -> str:
    """Decimal text of a number: Decimal, int, or (in a stored tree) decimal text.

    Raises:
        BadValue: no finite number.
    """
    if isinstance(value, bool) or not isinstance(value, Decimal | int | str):
        raise BadValue(f"needs a number, not {_shown(value)}")
    try:
        number = Decimal(value)
    except InvalidOperation:
        raise BadValue(f"needs a number, not {_shown(value)}") from None
    if not number.is_finite():
        raise BadValue("needs a finite number")
    if abs(number.adjusted()) > MOST_DIGITS or len(number.as_tuple().digits) > MOST_DIGITS:
        raise BadValue(f"needs a number of a sensible size, of at most {MOST_DIGITS} digits")
    return decimal_text(number)


def checked(kind: str, value: Any, *, stored: bool) -> Any:
    """The canonical value of one key.

    Args:
        kind: a kind of `schema.TABLES` other than list: and inline:.
        value: as parsed from TOML (Decimal for numbers), or from a stored tree.
        stored: True for a stored tree, where numbers are texts.

    Raises:
        BadValue: not of that kind.
    """
    if kind.startswith("words:"):
        return _word(kind.removeprefix("words:").split("|"), value)
    return _KINDS[kind](value, stored)


def _shown(value: Any) -> str:
    try:
        text = f'"{value}"' if isinstance(value, str) else str(value)
    except (ValueError, RecursionError):  # Python writes no integer of more than some thousand digits
        return "that"
    return text if len(text) <= 60 else text[:57] + "..."


def _text(value: Any, stored: bool) -> str:  # noqa: ARG001
    if isinstance(value, datetime.datetime | datetime.date | datetime.time):
        return value.isoformat()
    if not isinstance(value, str):
        raise BadValue(f"needs a text in quotes, not {_shown(value)}")
    if not value.strip():
        raise BadValue("is empty; leave the key out if it is not known")
    return value


def _word(allowed: list[str], value: Any) -> str:
    if value not in allowed:
        hint = nearest(value, allowed) if isinstance(value, str) else ""
        raise BadValue(f"takes one of {', '.join(repr(word) for word in allowed)}, not {_shown(value)}.{hint}")
    return str(value)


def _number(value: Any, stored: bool) -> str:
    if isinstance(value, str) and not stored:
        raise BadValue(f"needs a number without quotes, not {_shown(value)}")
    return number_text(value)


def _positive(value: Any, stored: bool) -> str:
    text = _number(value, stored)
    if Decimal(text) <= 0:
        raise BadValue(f"needs a number above zero, not {text}")
    return text


def _integer(value: Any, stored: bool) -> int:
    if stored and isinstance(value, str) and value.isascii() and value.isdigit() and len(value) <= MOST_DIGITS:
        value = int(value)
    if isinstance(value, bool) or not isinstance(value, int):
        raise BadValue(f"needs a whole number, not {_shown(value)}")
    if value < 1:
        raise BadValue(f"needs a whole number of at least 1, not {_shown(value)}")
    if value > LARGEST_INTEGER:
        raise BadValue(f"needs a whole number of at most {LARGEST_INTEGER}, not {_shown(value)}")
    return value


def _flag(value: Any, stored: bool) -> bool:  # noqa: ARG001
    if not isinstance(value, bool):
        raise BadValue(f"takes true or false, not {_shown(value)}")
    return value


def _qualities(value: Any, stored: bool) -> list[int]:  # noqa: ARG001
    if not isinstance(value, list) or not value:
        raise BadValue("needs a list of NMEA GGA quality indicators, for example [4]")
    for item in value:
        if isinstance(item, bool) or not isinstance(item, int) or not 1 <= item <= 5:
            raise BadValue(
                "takes qualities 1 to 5 (1 autonomous, 2 differential, 3 PPS, 4 RTK fixed, 5 RTK float), "
                f"not {_shown(item)}; dead reckoning, manual and simulator fixes cannot make a mark"
            )
    return sorted(set(value))


def _epoch(value: Any, stored: bool) -> str:
    if value == "observation":
        return "observation"
    if isinstance(value, str) and not stored:
        raise BadValue(f'takes a decimal year such as 2020.0, or "observation", not {_shown(value)}')
    text = number_text(value)
    if not Decimal(1900) <= Decimal(text) <= Decimal(2200):
        raise BadValue(f"needs a decimal year between 1900 and 2200, not {text}")
    return text


def _vector3(value: Any, stored: bool) -> list[str]:
    if not isinstance(value, list) or len(value) != 3:
        raise BadValue("needs a list of three numbers (X, Y, Z)")
    return [_number(item, stored) for item in value]


_KINDS = {
    "text": _text,
    "number": _number,
    "positive": _positive,
    "integer": _integer,
    "flag": _flag,
    "qualities": _qualities,
    "epoch": _epoch,
    "vector3": _vector3,
}


def value_from_text(kind: str, text: str, where: str) -> Any:
    """A value typed on the command line (`--set key=value`), by the kind of its key.

    Raises:
        UsageError: not of that kind.
    """
    value: Any = text
    if kind == "flag":
        value = {"true": True, "false": False}.get(text.lower(), text)
    try:
        return checked(kind, value, stored=True)
    except BadValue as problem:
        raise UsageError(f"{where} {problem}.", "Correct the value and run the command again.") from None
