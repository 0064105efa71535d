"""Coordinates from elsewhere: published control and post-processed results, from a CSV file, on equal terms with occupations.

Columns (units in the names; * = needed):

    name*  kind* (published control, post-processed)  source*  date (of the source or observation, 2027-03-01)
    frame* (EPSG geographic 3-D code)  epoch (decimal year; needed in a frame that moves, and only there)
    lat_deg* lon_deg*  h_m (ellipsoidal; empty = not known)
    u_east_m* u_north_m* u_up_m (needed with h_m)  rho_en   one STANDARD uncertainty per axis, of what is this mark's alone
    common_u_east_m common_u_north_m common_u_up_m          the part that all coordinates of this source share; empty = 0
    id  inscription  description

Nothing has a default: a coordinate without uncertainty is refused, because it could only be taken as perfect. The file itself is kept
as evidence under its hash, and the same file is not taken in twice. Heights above a geoid and measured lines are not read here.
"""

from __future__ import annotations

import csv
import hashlib
import io
import math
import uuid
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree
from fieldbook.model.entry import Entry
from fieldbook.model.reduction import BudgetLine
from fieldbook.reduce import frames
from fieldbook.reduce.budget import Term, combine
from fieldbook.reduce.geodesy import geocentric
from fieldbook.settings.values import nearest

from .decisions import moment_of
from .evidence import Evidence, MeanLine, Place, Shares, Stated, covariance_parts
from .fold import prefix_of
from .from_book import line_of
from .store import Register, as_kept

KINDS = ("published control", "post-processed")
NEEDED = ("name", "kind", "source", "frame", "lat_deg", "lon_deg", "u_east_m", "u_north_m")
OTHERS = ("date", "epoch", "h_m", "u_up_m", "rho_en", "common_u_east_m", "common_u_north_m", "common_u_up_m", "id", "inscription", "description")  # fmt: skip
COLUMNS = (*NEEDED, *OTHERS)
MAX_BYTES = 16 * 1024 * 1024
NAMESPACE = uuid.UUID("5d0f6c1e-6c55-4f0e-9a55-0f1c2a7b9e31")  # made up; ids of lists follow from their bytes
NO_SHARES = Shares("none", None, "", None, None)


def add_elsewhere(register: Register, file: Path, *, by: str) -> tuple[Entry | None, int]:
    """Take in a list. Returns (its entry, number of coordinates); the entry is None where the same file is in already.

    Raises:
        UsageError: no such file, no CSV, or a row that is not complete; nothing is written then.
        BookError: the register cannot be written.
    """
    data = _bytes(file)
    rows = _rows(data, file)
    evidence = [_evidence(row, number, place) for number, (place, row) in enumerate(rows, 1)]
    book = str(uuid.uuid5(NAMESPACE, hashlib.sha256(data).hexdigest()))
    state = register.state()
    if book in state.books:
        return None, len(evidence)
    if any(held.prefix == prefix_of(book) for held in state.books.values()):
        raise UsageError(
            f"The list {file} would bear the prefix of a book.", "Add a line to it; its id follows from its bytes."
        )
    names = list(dict.fromkeys(item.mark for item in evidence))
    with register.transaction():
        body: Tree = {
            "book": book,
            "path": str(file),
            "head_seq": 0,
            "head_hash": hashlib.sha256(data).hexdigest(),
            "hashes": register.keep(data),
            "versions": {},
            "occupations": [_line(register, item) for item in evidence],
            "failed": [],
            "marks": {name: _described(name, rows) for name in names},
            "numbers": {name: state.next_number + place for place, name in enumerate(names)},
            "certificates": [],
            "changes": [],
        }
        return register.append("elsewhere", body, by), len(evidence)


def _line(register: Register, item: Evidence) -> Tree:
    kept = register.keep(as_kept(item.to_tree()))
    return line_of(item, kept, kept)  # there is no reduction: the evidence is all there is


def _described(name: str, rows: Sequence[tuple[str, dict[str, str]]]) -> Tree:
    tree: Tree = {"name": name}
    for _, row in rows:
        if row["name"] == name:
            tree |= {key: row[key] for key in ("id", "inscription", "description") if row.get(key)}
    return tree


def _bytes(file: Path) -> bytes:
    if not file.is_file():
        raise UsageError(f"There is no file {file}.", "Name a CSV file with a header line.", code="missing")
    if file.stat().st_size > MAX_BYTES:
        raise UsageError(f"{file} is larger than 16 MB.", "A list of coordinates is shorter; is it the right file?")
    return file.read_bytes()


def _rows(data: bytes, file: Path) -> list[tuple[str, dict[str, str]]]:
    takes = f"The columns are {', '.join(COLUMNS)}; needed are {', '.join(NEEDED)}."
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError:
        raise UsageError(f"{file} is no UTF-8 text.", "Save it as CSV in UTF-8.") from None
    head = text.partition("\n")[0]
    reader = csv.DictReader(io.StringIO(text, newline=""), delimiter=";" if ";" in head else ",", strict=True)
    try:
        names = [name.strip() for name in reader.fieldnames or []]
        for name in names:
            if name not in COLUMNS:
                raise UsageError(f'{file}: there is no column "{name}".{nearest(name, COLUMNS)}', takes)
        missing = [name for name in NEEDED if name not in names]
        if missing or len(set(names)) < len(names):
            raise UsageError(
                f"{file} lacks the column {', '.join(missing)}." if missing else f"{file} has a column twice.", takes
            )
        reader.fieldnames = names
        rows: list[tuple[str, dict[str, str]]] = []
        for row in reader:
            place = f"{file}, line {reader.line_num}"
            if None in row or any(value is None for value in row.values()):
                raise UsageError(f"{place}: fields and columns do not match.", "Put quotes around a text with commas.")
            rows.append((place, {key: value.strip() for key, value in row.items()}))
    except csv.Error as problem:
        raise UsageError(f"{file} is no proper CSV: {problem}.", "Correct it or save it again.") from None
    if not rows:
        raise UsageError(f"{file} holds no coordinate.", "Write one line per mark under the header.")
    return rows


def _evidence(row: dict[str, str], number: int, where: str) -> Evidence:
    for key in NEEDED:
        if not row[key]:
            raise UsageError(f"{where}: {key} is empty.", "Nothing has a default here: write it, or take the line out.")
    if row["kind"] not in KINDS:
        raise UsageError(f'{where}: kind takes one of {", ".join(KINDS)}, not "{row["kind"]}".', "Correct it.")
    place = _place(row, where)
    east, north = _number(row, "u_east_m", where), _number(row, "u_north_m", where)
    up = _number(row, "u_up_m", where) if place.h_m is not None else None
    u = (_positive(east, "u_east_m", where), _positive(north, "u_north_m", where), None)
    if place.h_m is not None:
        u = (u[0], u[1], _positive(up, "u_up_m", where))  # type: ignore[assignment]
    rho = _number(row, "rho_en", where) or 0.0
    if not -1.0 < rho < 1.0:
        raise UsageError(f"{where}: rho_en {rho} is no correlation.", "Write a number between -1 and 1.")
    common = [_number(row, f"common_u_{axis}_m", where) or 0.0 for axis in ("east", "north", "up")]
    if min(common) < 0.0:
        raise UsageError(f"{where}: an uncertainty is below zero.", "Correct it.")
    stated = Stated(row["kind"], row["source"], (common[0], common[1], None if u[2] is None else common[2]))
    mean = MeanLine(u, (math.inf, math.inf, None), rho)
    name = f"{stated.kind}, {stated.source}"
    terms = [
        Term(f"stated: {name}", "B", "as stated", u, rho_en=rho),
        Term(f"common to the source: {name}", "B", "as stated", stated.common_u_enu_m, common=True),
    ]
    figures = combine(terms)
    # covariance_parts takes the mean's line by itself: only the common line is given to it
    common_line = terms[1].line()
    own, shared = covariance_parts(mean, [common_line], place)
    date = row.get("date") or None
    moment = None if date is None else moment_of(date)
    return Evidence(
        mark=row["name"], occupation=number, open=False, started=moment, ended=moment, kept_s=0.0,
        epoch_of_observation=None if moment is None else _year(moment), observer=None, party=row["source"], receiver=None,
        antenna_height_m=None, tribrach=None, place=place, observed=place, operation=(), height=None, grid=None,
        fix_class="stated", governed_by="data", sigma_plan_m=max(u[0], u[1]), sigma_height_m=u[2] or 0.0,
        prior_u_enu_m=(u[0], u[1], u[2] or 1.0), mean=mean, budget=_budget(terms), cov_own_m2=own, cov_common_m2=shared,
        plan_u95_m=figures.horizontal95_m, height_u95_m=figures.vertical95_m,
        measured_u95_m=(figures.horizontal95_m, figures.vertical95_m), shares=NO_SHARES, asked=None, simulated=False,
        stops=(), findings=(), received_sha256=None, stated=stated,
    )  # fmt: skip


def _budget(terms: Sequence[Term]) -> tuple[BudgetLine, ...]:
    return tuple(term.line() for term in terms)


def _year(moment: str) -> float:
    from datetime import UTC, datetime

    return frames.decimal_year(datetime.strptime(moment, "%Y-%m-%dT%H:%M:%S.%fZ").replace(tzinfo=UTC))


def _place(row: dict[str, str], where: str) -> Place:
    try:
        info = frames.frame_info(row["frame"])
    except UsageError as error:
        raise UsageError(f"{where}: {error.text}", error.remedy, code=error.code) from None
    if info.ensemble:
        raise UsageError(
            f"{where}: {info.name} is an ensemble of realisations.", "Name the realisation.", code="frame_ensemble"
        )
    epoch = _number(row, "epoch", where)
    if info.dynamic != (epoch is not None):
        what = "moves: its coordinates need an epoch" if info.dynamic else "is static: its coordinates have no epoch"
        raise UsageError(f"{where}: {info.name} {what}.", "Correct the column epoch.", code="epoch")
    if epoch is not None and not 1980.0 <= epoch <= 2100.0:
        raise UsageError(f"{where}: {epoch} is no decimal year.", "Write one such as 2020.0.", code="epoch")
    lat, lon, h = (_number(row, key, where) for key in ("lat_deg", "lon_deg", "h_m"))
    if lat is None or lon is None or abs(lat) > 90.0 or abs(lon) > 360.0:
        raise UsageError(f"{where}: {lat}, {lon} is no place.", "Write decimal degrees.")
    lon = (lon + 180.0) % 360.0 - 180.0 if abs(lon) > 180.0 else lon
    if h is None:
        return Place(info.code, info.name, epoch, lat, lon, None, None)
    x, y, z = (float(value) for value in geocentric(lat, lon, h, info.ellipsoid))
    return Place(info.code, info.name, epoch, lat, lon, h, (x, y, z))


def _number(row: dict[str, Any], key: str, where: str) -> float | None:
    text = row.get(key) or ""
    if not text:
        return None
    try:
        value = float(text)
    except ValueError:
        value = math.nan
    if not math.isfinite(value):
        raise UsageError(f'{where}: {key} "{text}" is no number.', "Write it with a point, as 0.012.")
    return value


def _positive(value: float | None, key: str, where: str) -> float:
    if value is None or not 0.0 < value < 1e4:
        raise UsageError(
            f"{where}: {key} must be a standard uncertainty above zero.", "A coordinate without one cannot be combined.",
            code="uncertainty",
        )  # fmt: skip
    return value
