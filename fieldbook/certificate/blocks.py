"""The blocks a certificate is made of, and the small texts shared by its sections."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from fieldbook.certificate.words import NOT_STATED


@dataclass(frozen=True)
class Pairs:
    """Label and value, one a line."""

    rows: list[list[str]]


@dataclass(frozen=True)
class Table:
    """A table; `align` has one letter a column: l, r or c. Units stand in the heads."""

    heads: list[str]
    align: str
    rows: list[list[str]]
    caption: str = ""
    last_rows: int = 0  # so many rows at the end are totals


@dataclass(frozen=True)
class Sentences:
    """Paragraphs."""

    items: list[str]


@dataclass(frozen=True)
class Bullets:
    """A list."""

    items: list[str]


Block = Pairs | Table | Sentences | Bullets


@dataclass(frozen=True)
class Section:
    """A titled run of blocks."""

    title: str
    blocks: list[Block]


def said(value: Any) -> str:
    """A statement, or 'not stated'."""
    return NOT_STATED if value in (None, "", []) else str(value)


def utc(text: str | None) -> str:
    """`2027-03-04 01:10:00 UTC` from a stored time."""
    return NOT_STATED if not text else f"{text[:10]} {text[11:19]} UTC"


def clock(text: str | None) -> str:
    """`01:10:00` from a stored time."""
    return "–" if not text else text[11:19]


def duration(seconds: str | None) -> str:
    """`19 min 23 s`."""
    if seconds is None:
        return NOT_STATED
    whole = round(float(seconds))
    hours, minutes = whole // 3600, whole % 3600 // 60
    return (f"{hours} h " if hours else "") + (f"{minutes} min " if hours or minutes else "") + f"{whole % 60} s"


def trimmed(value: str | None, unit: str = "", decimals: int | None = None) -> str:
    """A stored decimal without trailing zeros (or at so many decimals), with its unit; null is 'not stated'."""
    if value is None:
        return NOT_STATED
    if decimals is not None:
        value = f"{float(value):.{decimals}f}"
    elif "." in value:
        value = value.rstrip("0").rstrip(".")
    return f"{value} {unit}".strip()
