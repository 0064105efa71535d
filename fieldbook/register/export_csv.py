"""CSV, two kinds: for programs (every column, all digits, RFC 4180) and for people (fewer, rounded with their uncertainty).

Names and descriptions come from anybody, and a spreadsheet runs a cell that begins with =, +, -, @ or a control character as a
formula. Such a TEXT gets an apostrophe in front; so does one that begins with an apostrophe, so that taking one off gives
the text back. Numbers are left alone.
"""

from __future__ import annotations

import csv
import io
from collections.abc import Sequence
from decimal import ROUND_HALF_EVEN, ROUND_UP, Decimal

from fieldbook.model.angles import latitude_text, longitude_text
from fieldbook.model.visible import visible

from .export_rows import COLUMNS, NUMBERS, ExportRow

RISKY = ("=", "+", "-", "@", "\t", "\r", "\n", "'", "＝", "＋", "－", "＠")
PEOPLE = (
    "Mark", "Name", "Number", "Published", "Frame and epoch", "Latitude", "Longitude", "Ellipsoidal height (m)", "Grid",
    "Easting (m)", "Northing (m)", "Height by geoid model (m)", "Geoid model",
    "To the datum, 95 %: plan (m)", "To the datum, 95 %: height (m)",
    "To neighbouring marks, 95 %: plan (m)", "To neighbouring marks, 95 %: height (m)", "Occupations", "Description",
)  # fmt: skip


def guarded(text: str | None) -> str:
    """A text that no spreadsheet takes for a formula, without characters that cannot be seen."""
    if text is None:
        return ""
    shown = visible(text)
    return f"'{shown}" if shown.lstrip(" ").startswith(RISKY) else shown


def unguarded(text: str) -> str:
    """The text before `guarded`, for who reads the file."""
    return text[1:] if text.startswith("'") else text


def for_programs(rows: Sequence[ExportRow]) -> bytes:
    """Every column of `export_rows.COLUMNS`, comma, CR LF, UTF-8 without a mark; empty = not known."""
    return _written(list(COLUMNS), [[_cell(name, row.cells[name]) for name in COLUMNS] for row in rows], bom=False)


def for_people(rows: Sequence[ExportRow]) -> bytes:
    """What a list on a desk needs, with headings in words; UTF-8 with a byte order mark, so that spreadsheets read it."""
    return _written(list(PEOPLE), [_for_people(row.cells) for row in rows], bom=True)


def _written(head: list[str], rows: list[list[str]], *, bom: bool) -> bytes:
    text = io.StringIO(newline="")
    table = csv.writer(text, lineterminator="\r\n")
    table.writerow(head)
    table.writerows(rows)
    return text.getvalue().encode("utf-8-sig" if bom else "utf-8")


def _cell(name: str, value: str | None) -> str:
    return (value or "") if name in NUMBERS else guarded(value)


def _for_people(cells: dict[str, str | None]) -> list[str]:
    epoch = "" if cells["epoch"] is None else f" at {cells['epoch']}"
    lat, lon = cells["lat_deg"], cells["lon_deg"]
    return [
        cells["mark"] or "",
        guarded(cells["name"]),
        guarded(cells["number"] or "not published"),
        (cells["published_utc"] or "")[:10],
        guarded(f"{cells['frame_name']} ({cells['frame']}){epoch}"),
        "" if lat is None else latitude_text(float(lat)),
        "" if lon is None else longitude_text(float(lon)),
        _rounded(cells["h_m"], 3),
        guarded(cells["grid"]),
        _rounded(cells["easting_m"], 3),
        _rounded(cells["northing_m"], 3),
        _rounded(cells["orthometric_m"], 3),
        guarded(cells["geoid_model"]),
        _rounded(cells["datum_horizontal95_m"], 3, up=True),
        _rounded(cells["datum_vertical95_m"], 3, up=True),
        _rounded(cells["between_horizontal95_m"], 3, up=True),
        _rounded(cells["between_vertical95_m"], 3, up=True),
        cells["occupations"] or "",
        guarded(cells["description"]),
    ]


def _rounded(text: str | None, decimals: int, *, up: bool = False) -> str:
    """To so many decimals; an uncertainty away from zero, so that no printed figure claims more than was found."""
    if text is None:
        return ""
    step = Decimal(1).scaleb(-decimals)
    return format(Decimal(text).quantize(step, rounding=ROUND_UP if up else ROUND_HALF_EVEN), "f")
