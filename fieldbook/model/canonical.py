"""Canonical bytes: the one spelling of a tree that is hashed, signed or compared (contract, section 4).

UTF-8, NFC, keys sorted by code point, no spaces, integers or decimal strings, no floats. A float in a tree is a
programming error and refused, because its spelling would depend on who wrote it.
"""

from __future__ import annotations

import hashlib
import json
import unicodedata
from collections.abc import Iterable
from decimal import Decimal
from typing import Any

Tree = dict[str, Any]


def normalised(value: Any) -> Any:
    """The tree with every text in NFC and every Decimal as plain decimal text.

    Raises:
        TypeError: a float, or any type that canonical bytes do not know.
    """
    if value is None or isinstance(value, bool | int):
        return value
    if isinstance(value, str):
        return unicodedata.normalize("NFC", value)
    if isinstance(value, Decimal):
        return decimal_text(value)
    if isinstance(value, dict):
        return {unicodedata.normalize("NFC", str(key)): normalised(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [normalised(item) for item in value]
    raise TypeError(f"{type(value).__name__} has no canonical spelling: {value!r}")


def canonical_json(tree: Any) -> str:
    """Canonical text of a tree of dicts, lists, texts, integers, Decimals, booleans and None."""
    return json.dumps(normalised(tree), ensure_ascii=False, sort_keys=True, separators=(",", ":"), allow_nan=False)


def canonical_bytes(tree: Any) -> bytes:
    """Canonical UTF-8 bytes of a tree."""
    return canonical_json(tree).encode("utf-8")


def digest(tree: Any) -> str:
    """SHA-256 of the canonical bytes, 64 lower-case hex digits."""
    return hashlib.sha256(canonical_bytes(tree)).hexdigest()


def chain_hash(items: Iterable[str]) -> str:
    """SHA-256 over texts, each as UTF-8 preceded by its length as 8 bytes big-endian."""
    total = hashlib.sha256()
    for text in items:
        data = text.encode("utf-8")
        total.update(len(data).to_bytes(8, "big"))
        total.update(data)
    return total.hexdigest()


def decimal_text(value: Decimal) -> str:
    """Plain decimal text, without exponent, digits as they are."""
    return format(value, "f")


def fixed(value: float | None, decimals: int) -> str | None:
    """A float as a decimal string with a fixed number of decimals; None stays None, minus zero becomes zero."""
    if value is None:
        return None
    text = f"{value:.{decimals}f}"
    return text.lstrip("-") if float(text) == 0.0 else text
