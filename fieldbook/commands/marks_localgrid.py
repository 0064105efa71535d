"""`fieldbook marks localgrid`: fit a local plane grid to reduced marks, keep it in the book, show it."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from fieldbook.commands.open_book import reading, writing
from fieldbook.commands.output import line, note, write_json
from fieldbook.errors import UsageError
from fieldbook.settings.values import nearest

if TYPE_CHECKING:
    from fieldbook.model.local_grid import LocalGrid
    from fieldbook.occupy.local_grids import Given

SCHEMA = "fieldbook.localgrid/1"
COLUMNS = ("mark", "east_m", "north_m", "u_m", "height_m", "u_height_m")
NEEDED = COLUMNS[:4]
MAX_BYTES = 1024 * 1024


@click.group("localgrid", help="A local plane grid of a site, fitted to marks known in both systems.")
def command() -> None:
    """The group."""


@command.command(
    "fit", help="Fit grid NAME to the marks of FILE, a CSV of mark, east_m, north_m, u_m, height_m, u_height_m."
)
@click.argument("book", type=click.Path(path_type=Path))
@click.argument("name")
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--source", required=True, help="Where the local coordinates come from; printed on certificates.")
@click.option("--tilt", is_flag=True, help="Also fit a tilt of the heights; four marks with heights are needed.")
@click.option("--keep", is_flag=True, help="Write it into the book; without it nothing is written.")
@click.option("--by", "observer", help="Name of who writes.")
@click.option("--json", "as_json", is_flag=True, help="JSON on stdout.")
def fit(
    book: Path, name: str, file: Path, source: str, observer: str | None, *, tilt: bool, keep: bool, as_json: bool
) -> None:
    """Reduce the marks, fit, tell, and keep it if asked to."""
    if keep and not (observer or "").strip():
        raise UsageError("An entry needs a name.", "Give --by NAME.")
    from fieldbook.occupy.local_grids import fit_from_book

    given = _given(file)
    entry = None
    if keep:
        with writing(book) as opened:
            made = fit_from_book(opened, name, given, tilt=tilt, source=source)
            entry = opened.append("local_grid", made.body, str(observer))
    else:
        with reading(book) as opened:
            made = fit_from_book(opened, name, given, tilt=tilt, source=source)
    if as_json:
        kept = None if entry is None else {"seq": entry.seq, "hash": entry.hash}
        write_json({"schema": SCHEMA, "book": str(book), "entry": kept, "grid": grid_tree(made.grid)})
        return
    for text in grid_lines(made.grid):
        line(text)
    if entry is None:
        note("Nothing was written. Add --keep --by NAME to keep it in the book.")
    else:
        line(f"{entry.seq} {entry.hash}")


@command.command("show", help="The local grids of BOOK.")
@click.argument("book", type=click.Path(path_type=Path))
@click.option("--json", "as_json", is_flag=True, help="JSON on stdout.")
def show(book: Path, *, as_json: bool) -> None:
    """Fit them again from what is kept, and tell."""
    from fieldbook.occupy.local_positions import grid_of

    with reading(book) as opened:
        entries = list(opened.state().local_grids.values())
    grids = [(entry, grid_of(entry)) for entry in entries]
    if as_json:
        rows = [{**grid_tree(grid), "entry": entry.seq, "source": entry.body["source"]} for entry, grid in grids]
        write_json({"schema": SCHEMA, "book": str(book), "grids": rows})
        return
    for entry, grid in grids:
        line(f"entry {entry.seq}, source: {entry.body['source']}")
        for text in grid_lines(grid):
            line(text)
    if not grids:
        note("This book has no local grid.")


def grid_tree(grid: LocalGrid) -> dict[str, Any]:
    """A fitted grid for JSON."""
    import dataclasses

    tree = dataclasses.asdict(grid)
    return {**tree, "scale": grid.scale, "rotation_deg": _rotation_deg(grid), "widened": grid.widened}


def grid_lines(grid: LocalGrid) -> Iterator[str]:
    """A fitted grid as text."""
    yield f"local grid {grid.name} of {grid.frame}, {len(grid.marks)} marks"
    yield (
        f"  plane: transverse Mercator about {grid.lat0_deg:.5f}, {grid.lon0_deg:.5f}, ground lengths at h "
        f"{grid.plane_height_m:.1f} m (scale {grid.scale0:.9f})"
    )
    yield (
        f"  E = {grid.east_m:.4f} + a x - b y, N = {grid.north_m:.4f} + b x + a y, a = {grid.a:.10f}, b = {grid.b:.10f}"
    )
    yield f"  rotation {_rotation_deg(grid):.6f}°, scale of the grid against the ground {(grid.scale - 1) * 1e6:+.2f} ppm"
    verdict = "worse than stated: uncertainties widened" if grid.widened else "as stated or better"
    yield f"  variance factor {grid.variance_factor:.2f} with {grid.dof} degrees of freedom: the marks fit {verdict}"
    if grid.height_parameters is not None:
        shift, *tilt = grid.height_parameters
        tilted = f", tilt {1e6 * tilt[0]:+.1f} mm/km east, {1e6 * tilt[1]:+.1f} mm/km north" if tilt else ", no tilt"
        yield (
            f"  heights: H = h {shift:+.4f} m{tilted}; variance factor {grid.height_variance_factor:.2f} with "
            f"{grid.height_dof} degrees of freedom"
        )
    yield "  mark          residual mm  E      N      H     left out, predicted mm  E      N      H   by chance"
    for item in grid.misfits:
        yield (
            f"  {item.mark:20} {_mm(item.residual_east_m)} {_mm(item.residual_north_m)} {_mm(item.residual_height_m)}"
            f"                    {_mm(item.predicted_east_m)} {_mm(item.predicted_north_m)} "
            f"{_mm(item.predicted_height_m)}   {100 * item.significance:5.1f} %"
        )


def _rotation_deg(grid: LocalGrid) -> float:
    import math

    return math.degrees(math.atan2(grid.b, grid.a))


def _mm(value_m: float | None) -> str:
    return "     –" if value_m is None else f"{1000 * value_m:+6.1f}"


def _given(file: Path) -> list[Given]:
    """The rows of the CSV."""
    from fieldbook.occupy.local_grids import Given

    if not file.is_file() or file.stat().st_size > MAX_BYTES:
        raise UsageError(f"There is no list of marks {file}.", f"Name a CSV with the columns {', '.join(COLUMNS)}.")
    try:
        text = file.read_bytes().decode("utf-8-sig")
        reader = csv.DictReader(io.StringIO(text, newline=""), delimiter=";" if ";" in text.partition("\n")[0] else ",")
        names = [name.strip() for name in reader.fieldnames or []]
        rows = list(reader) if names else []
    except (UnicodeDecodeError, csv.Error):
        raise UsageError(f"{file} is no proper CSV.", "Save it as CSV in UTF-8.") from None
    for name in names:
        if name not in COLUMNS:
            raise UsageError(
                f'{file}: there is no column "{name}".{nearest(name, COLUMNS)}', f"Use {', '.join(COLUMNS)}."
            )
    lacking = next((name for name in NEEDED if name not in names), None)
    if lacking is not None:
        raise UsageError(
            f"{file} has no column {lacking}.", "mark, east_m, north_m and u_m (their uncertainty) are needed."
        )
    found = []
    for number, row in enumerate(rows, start=2):
        cells = {key.strip(): (value or "").strip() for key, value in row.items() if isinstance(key, str)}
        where = f"{file}, line {number}"
        found.append(
            Given(
                _text(cells, "mark", where),
                _number(cells, "east_m", where),
                _number(cells, "north_m", where),
                _number(cells, "u_m", where),
                height_m=_number(cells, "height_m", where) if cells.get("height_m") else None,
                u_height_m=_number(cells, "u_height_m", where) if cells.get("u_height_m") else None,
            )
        )
    return found


def _text(cells: dict[str, str], key: str, where: str) -> str:
    if not cells.get(key):
        raise UsageError(f"{where}: {key} is missing.", "Write it.")
    return cells[key]


def _number(cells: dict[str, str], key: str, where: str) -> float:
    from fieldbook.settings.values import BadValue, number_text

    try:
        return float(number_text(_text(cells, key, where)))
    except BadValue as problem:
        raise UsageError(f"{where}: {key} {problem}.", "Write metres with a decimal point.") from None
