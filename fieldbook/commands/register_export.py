"""`fieldbook register export`: the register as a file for others, its format by the ending."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from fieldbook.commands.open_register import reading
from fieldbook.commands.output import line, note
from fieldbook.errors import UsageError

if TYPE_CHECKING:
    from fieldbook.register.export_rows import ExportRow

LATER = (".xml", ".pdf", ".html")
ENDINGS = (".gpkg", ".csv", ".geojson", ".kml")


@click.command("export")
@click.argument("register", type=click.Path(path_type=Path))
@click.option("--out", type=click.Path(path_type=Path), help="File: .gpkg, .csv, .geojson or .kml.")
@click.option(
    "--for", "reader", type=click.Choice(["programs", "people"]), default="programs", help="Of CSV: for whom."
)
@click.option("--today", is_flag=True, help="What the evidence gives today, instead of what is published.")
@click.option("--replace", is_flag=True, help="Write over an existing file.")
@click.option("--columns", is_flag=True, help="Say what each column means, and write nothing.")
def command(register: Path, out: Path | None, reader: str, today: bool, replace: bool, columns: bool) -> None:
    """Write the values of REGISTER that are in force. Each file says frame, epoch and both accuracies of every mark."""
    from fieldbook.register.export_rows import COLUMNS, export_rows

    if columns:
        for name, meaning in COLUMNS.items():
            line(f"{name:<24} {meaning}".rstrip())
        return
    if out is None:
        raise UsageError("An export needs a file.", f"Give --out FILE with one of {', '.join(ENDINGS)}.")
    ending = _checked(out, reader, replace=replace)
    with reading(register) as opened:
        rows = export_rows(opened, today=today)
        marks = len(opened.state().marks())
        if ending == ".gpkg":
            from fieldbook.clock import SystemClock
            from fieldbook.register.export_geopackage import write_geopackage

            write_geopackage(out, rows, opened, SystemClock())
        else:
            out.write_bytes(_rendered(ending, rows, reader))
    line(f"{out}: {len(rows)} marks")
    if len(rows) < marks:
        why = "no coordinate" if today else "no published value in force (`register publish`, or --today)"
        note(f"{marks - len(rows)} marks are not in it: {why}.")


def _checked(out: Path, reader: str, *, replace: bool) -> str:
    ending = out.suffix.lower()
    if ending in LATER:
        raise UsageError(
            f"`register export` to {ending} is not in this version.", f"It writes {', '.join(ENDINGS)}.",
            code="not_in_this_version",
        )  # fmt: skip
    if ending not in ENDINGS:
        raise UsageError(f'"{out.name}" has no ending of an export.', f"The endings are {', '.join(ENDINGS)}.")
    if reader == "people" and ending != ".csv":
        raise UsageError("--for people is of CSV only.", "Leave it out.")
    if out.exists() and not replace:
        raise UsageError(f"{out} exists already.", "Name another file, or add --replace.", code="out_exists")
    return ending


def _rendered(ending: str, rows: list[ExportRow], reader: str) -> bytes:
    if ending == ".csv":
        from fieldbook.register.export_csv import for_people, for_programs

        return for_people(rows) if reader == "people" else for_programs(rows)
    if ending == ".geojson":
        from fieldbook.register.export_geojson import as_geojson

        return as_geojson(rows)
    from fieldbook.register.export_kml import as_kml

    return as_kml(rows)
