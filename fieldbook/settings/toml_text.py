"""TOML text to a tree, whatever the text: numbers as Decimal, and one kind of error.

`tomllib` raises its own error for wrong TOML only. Nesting of thousands of levels, a whole number of thousands of
digits and an exponent that no Decimal has come out of it as RecursionError, ValueError and decimal.InvalidOperation.
"""

from __future__ import annotations

import tomllib
from decimal import Decimal

from fieldbook.model.canonical import Tree


class BadToml(ValueError):
    """No TOML, or nothing a settings file holds; the text says what, and where if that is known."""


def toml_tree(text: str) -> Tree:
    """The tree of a TOML text, its fractions as Decimal.

    Raises:
        BadToml: no TOML, nested too deeply, or a number no Decimal or int can be made of.
    """
    try:
        return tomllib.loads(text, parse_float=Decimal)
    except tomllib.TOMLDecodeError as problem:
        raise BadToml(str(problem)) from None
    except RecursionError:
        raise BadToml("tables or lists are nested too deeply") from None
    except (ArithmeticError, ValueError):
        raise BadToml("a number in it is larger or longer than any number of a settings file") from None
