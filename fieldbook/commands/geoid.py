"""`fieldbook geoid`: add geoid models to a search folder with what is known of them, list them, show one."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from fieldbook.commands.grids import BOOK, JSON, REPLACE, folders_of, installed, placed, record_text
from fieldbook.commands.output import line, note, write_json
from fieldbook.errors import FieldbookError, UsageError

SCHEMA = "fieldbook.geoid/1"
ENDINGS = (".gtx", ".tif", ".tiff")


@click.group("geoid", help="Geoid models: add a GTX or GeoTIFF file with its record, list them, show one.")
def command() -> None:
    """The group."""


@command.command(
    "add",
    help="Copy the geoid grid FILE and its record into your grids folder, or with --book into grids/ beside a book. The "
    "record may stand beside FILE (same name, ending .toml); else name, kind and frame must be given: a model belongs to a "
    "frame, which is never guessed.",
)
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--name", help="What is printed, with edition.")
@click.option("--kind", type=click.Choice(["national", "global"]), help="National: goes with its frame only.")
@click.option("--frame", help="EPSG code of the frame a national model belongs to; words for a global one.")
@click.option("--frames", multiple=True, metavar="EPSG", help="Further frame of a national model; repeatable.")
@click.option("--vertical-datum", help="Height datum it leads to; absent: 'no national height datum' is printed.")
@click.option("--u-m", type=float, help="One standard uncertainty of N, metres; without it H has no stated 95 %.")
@click.option("--u-source", help="Where that figure is from.")
@click.option("--interpolation-u-m", type=float, help="One standard uncertainty of interpolating it, where known.")
@click.option("--source", help="Who published the file.")
@click.option("--licence", help="Its licence.")
@BOOK
@REPLACE
@JSON
def add(file: Path, book: Path | None, *, replace: bool, as_json: bool, **stated: Any) -> None:
    """Check the file by two readers, then copy it with its record."""
    from fieldbook.reduce.geoid import check_geoid_file, read_record

    if file.suffix.lower() not in ENDINGS:
        raise UsageError(
            f"{file.name} is neither a GTX nor a GeoTIFF file.",
            "Convert it first; transformation grids: `fieldbook frames add`.",
        )
    if not file.is_file():
        raise UsageError(f"There is no file {file}.", "Check the path.")
    sha256 = check_geoid_file(file)
    given = {key: value for key, value in stated.items() if value not in (None, ())}
    beside = file.with_suffix(".toml")
    if given:
        keys = {key: list(value) if isinstance(value, tuple) else value for key, value in given.items()}
        text = record_text(f"geoid model {file.name}", {**keys, "sha256": sha256})
    elif beside.is_file():
        read_record(beside)
        text = beside.read_text(encoding="utf-8")
    else:
        raise UsageError(
            f"Nothing is known of {file.name}: there is no record {beside.name} beside it.",
            "Give --name, --kind and --frame, and --u-m with --u-source where a 95 % of H shall be stated.",
            code="geoid_record",
        )
    with placed(file, text, book, replace=replace) as (target, record):
        read_record(record)  # what was written is judged by the reader that will use it
        tree = _facts(target, folders_of(book))
    if as_json:
        write_json({"schema": SCHEMA, "model": tree})
        return
    note(f"written: {target} and {record.name}")
    for text in _lines(tree):
        line(text)
    line(f'in a session write frame.geoid = "{target.name}"')


@command.command("list", help="Models in the search folders: beside a book, your own, the program's.")
@BOOK
@JSON
def list_models(book: Path | None, *, as_json: bool) -> None:
    """Each by name, frame, area, spacing, hash; a broken one says why."""
    rows: list[dict[str, Any]] = []
    for path in installed(book, ENDINGS):
        try:
            rows.append(_facts(path, folders_of(book)))
        except FieldbookError as problem:
            rows.append({"file": path.name, "path": str(path), "problem": problem.text})
    if as_json:
        write_json({"schema": SCHEMA, "models": rows})
        return
    for row in rows:
        if "problem" in row:
            line(f"{row['file']}: not usable: {row['problem']}")
        else:
            line(
                f"{row['file']}: {row['name']}; {row['kind']}, {row['frame']}; {_area(row)}; SHA-256 {row['sha256'][:16]}..."
            )


@command.command("show", help="One model: its record, area, spacing and hash; with --at the undulation there.")
@click.argument("name")
@click.option("--at", help='Where, e.g. --at "-34.27 146.05"; any form of a position.')
@BOOK
@JSON
def show(name: str, at: str | None, book: Path | None, *, as_json: bool) -> None:
    """All that is known, and N at a place with how it was interpolated."""
    from fieldbook.reduce.geoid import find_model, undulation_at

    folders = folders_of(book)
    model = find_model(name, folders)
    tree = _facts(model.path, folders)
    if at is not None:
        from fieldbook.reduce.frames import ITRF2020, located
        from fieldbook.settings.coordinates import parse_position

        lat, lon, _ = located(parse_position(at), ITRF2020)
        found = undulation_at(model, lat, lon)
        tree["at"] = {
            "lat_deg": lat,
            "lon_deg": lon,
            "undulation_m": found.value_m,
            "method": found.method,
            "interpolation_u_m": found.interpolation_u_m,
        }
    if as_json:
        write_json({"schema": SCHEMA, "model": tree})
        return
    for text in _lines(tree):
        line(text)


def _facts(path: Path, folders: list[Path]) -> dict[str, Any]:
    from fieldbook.reduce.geoid import find_model, grid_area

    model = find_model(path.name, [path.parent, *folders])
    record, area = model.record, grid_area(model.path)
    return {
        "file": path.name,
        "path": str(path),
        "name": record.name,
        "kind": record.kind,
        "frame": record.frame,
        "frames": list(record.frames),
        "vertical_datum": record.vertical_datum,
        "u_m": record.u_m,
        "u_source": record.u_source or None,
        "interpolation_u_m": record.interpolation_u_m,
        "sha256": model.sha256,
        "bounds_deg": None if area is None else list(area[0]),
        "step_deg": None if area is None else list(area[1]),
        "source": record.source or None,
        "licence": record.licence or None,
    }


def _area(tree: dict[str, Any]) -> str:
    if tree["bounds_deg"] is None:
        return "area not known"
    south, west, north, east = (f"{value:g}" for value in tree["bounds_deg"])
    return f"latitude {south} to {north}, longitude {west} to {east}, every {60 * tree['step_deg'][0]:g}′"


def _lines(tree: dict[str, Any]) -> list[str]:
    frames = ", ".join([tree["frame"], *tree["frames"]])
    u = (
        "not stated: H has no 95 %"
        if tree["u_m"] is None
        else f"{tree['u_m']:g} m; {tree['u_source'] or 'source not stated'}"
    )
    rows = [
        f"model     {tree['name']} ({tree['kind']})",
        f"frame     {frames}",
        f"datum     {tree['vertical_datum'] or 'none: height above the model, no national height datum'}",
        f"area      {_area(tree)}",
        f"u of N    {u}",
        f"source    {tree['source'] or 'not stated'}; licence {tree['licence'] or 'not stated'}",
        f"file      {tree['path']}",
        f"SHA-256   {tree['sha256']}",
    ]
    if "at" in tree:
        place = tree["at"]
        error = place["interpolation_u_m"]
        said = "its error not known" if error is None else f"u {1000 * error:.1f} mm"
        rows.append(
            f"N         {place['undulation_m']:.4f} m at {place['lat_deg']:.5f}, {place['lon_deg']:.5f}; {place['method']}, {said}"
        )
    return rows
