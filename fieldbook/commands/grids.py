"""Grid files of the operator's own: where they are put, their records, and transformation grids (`fieldbook frames add`)."""

from __future__ import annotations

import json
import shutil
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import click

from fieldbook.commands.output import line, note, write_json
from fieldbook.errors import FieldbookError, UsageError
from fieldbook.settings.grids import FOLDER_NAME, file_sha256, grid_folders, package_folder, user_grids_folder

SCHEMA = "fieldbook.grids/1"
SHIFT_ENDINGS = (".gsb", ".tif", ".tiff", ".gtx")
MAX_BYTES = 2 << 30

BOOK = click.option(
    "--book", type=click.Path(path_type=Path), help="grids/ beside this book instead of your own folder."
)
REPLACE = click.option("--replace", is_flag=True, help="Write over a file of the same name.")
JSON = click.option("--json", "as_json", is_flag=True, help="The result as JSON on stdout.")


def folders_of(book: Path | None) -> list[Path]:
    """Search folders: of a book, or without one the user's own."""
    return [user_grids_folder()] if book is None else grid_folders(book.resolve().parent)


def installed(book: Path | None, endings: Sequence[str]) -> list[Path]:
    """Grid files of these endings in the search folders and the package, in order of search; the first of a name counts."""
    found: dict[str, Path] = {}
    for folder in (*folders_of(book), package_folder()):
        if folder.is_dir():
            for path in sorted(folder.iterdir()):
                if path.suffix.lower() in endings and path.is_file():
                    found.setdefault(path.name, path)
    return list(found.values())


def record_text(what: str, keys: dict[str, Any]) -> str:
    """The TOML text of a record; texts, numbers and lists of texts."""
    rows = [f"# Record of the {what}, written by fieldbook."]
    rows += [f"{key} = {json.dumps(value)}" for key, value in keys.items()]  # JSON of these is TOML
    return "\n".join(rows) + "\n"


@contextmanager
def placed(file: Path, record: str, book: Path | None, *, replace: bool) -> Iterator[tuple[Path, Path]]:
    """Copy a grid and its record to their folder; taken away again when what follows refuses them.

    Raises:
        UsageError: a file of that name is there already, or it is larger than 2 GB.
    """
    folder = user_grids_folder() if book is None else book.resolve().parent / FOLDER_NAME
    target, beside = folder / file.name, folder / (file.stem + ".toml")
    if file.stat().st_size > MAX_BYTES:
        raise UsageError(f"{file} is larger than 2 GB.", "Cut it to the area of the job first.")
    same = target.exists() and target.samefile(file)
    if target.exists() and not replace and not same:
        raise UsageError(f"{target} is there already.", "Add --replace, or rename the file.", code="out_exists")
    folder.mkdir(parents=True, exist_ok=True)
    kept = {path: path.read_bytes() for path in (target, beside) if path.exists() and not (same and path == target)}
    try:
        if not same:
            half = target.with_name(target.name + ".part")
            shutil.copyfile(file, half)
            half.replace(target)
        beside.write_text(record, encoding="utf-8")
        yield target, beside
    except BaseException:
        for path in (target, beside):
            if path in kept:
                path.write_bytes(kept[path])
            elif not (same and path == target):
                path.unlink(missing_ok=True)
        raise


@click.command(
    "add",
    help="Copy the transformation grid FILE (NTv2 .gsb, GeoTIFF, GTX) into your grids folder, or with --book into grids/ "
    "beside a book. From which frame it leads to which must be said; then it is told whether PROJ uses it there. PROJ looks "
    "for a grid by the name its operation states: keep that name.",
)
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--from", "source_frame", required=True, help="EPSG code of the frame it leads from (3-D).")
@click.option("--to", "target_frame", required=True, help="EPSG code of the frame it leads to (3-D).")
@click.option("--source", required=True, help="Who published the file.")
@click.option("--licence", help="Its licence.")
@BOOK
@REPLACE
@JSON
def add(
    file: Path,
    source_frame: str,
    target_frame: str,
    source: str,
    licence: str | None,
    book: Path | None,
    *,
    replace: bool,
    as_json: bool,
) -> None:
    """Look into the file, copy it, and ask PROJ whether it is the one an operation wants."""
    from fieldbook.reduce.frames import forget_offers, frame_info, grid_facts, use_grid_folders

    if not file.is_file():
        raise UsageError(f"There is no file {file}.", "Check the path.")
    ends = [frame_info(code).code for code in (source_frame, target_frame)]
    grid_facts(file)
    keys = {"kind": "transformation", "from": ends[0], "to": ends[1], "source": source}
    keys |= {"sha256": file_sha256(file)} | ({"licence": licence} if licence else {})
    with placed(file, record_text(f"transformation grid {file.name}", keys), book, replace=replace) as (target, _):
        use_grid_folders([target.parent])
        forget_offers()
        tree = _facts(target)
        tree["used_by"], tree["wanted"] = _uses(target, ends, tree["bounds_deg"])
    if as_json:
        write_json({"schema": SCHEMA, "grid": tree})
        return
    note(f"written: {target}")
    for text in _lines(tree):
        line(text)
    line(_said(tree))


def _uses(path: Path, ends: list[str], bounds: list[float]) -> tuple[list[str], list[str]]:
    """Operations between the two frames that would run through this file in the middle of it, and grids they lack."""
    from fieldbook.clock import SystemClock
    from fieldbook.model.session import FrameChoice
    from fieldbook.reduce.frames import decimal_year, frame_info, pair_at

    south, west, north, east = bounds
    infos = [frame_info(code) for code in ends]
    epochs = ["observation" if info.dynamic else None for info in infos]
    choice = FrameChoice(ends[0], ends[1], receiver_epoch=epochs[0], client_epoch=epochs[1])
    from datetime import UTC, datetime

    now = decimal_year(datetime.fromtimestamp(SystemClock().utc_ms() / 1000, UTC))
    lon = ((west + east) / 2 + 180.0) % 360.0 - 180.0
    pair = pair_at(choice, (south + north) / 2, lon, 0.0, now)
    uses = []
    if pair.operation is not None and any(grid.name == path.name for grid in pair.operation.grids):
        uses = [f"{step.authority}:{step.code} {step.name}" for step in pair.operation.steps]
    wanted = sorted({name for item in pair.considered for name in item.missing})
    return uses, wanted


@click.command("grids", help="Transformation grids in the search folders: beside a book, and your own.")
@BOOK
@JSON
def list_grids(book: Path | None, *, as_json: bool) -> None:
    """Those with a record; a broken one says why."""
    rows: list[dict[str, Any]] = []
    for path in installed(book, SHIFT_ENDINGS):
        if _record(path).get("kind") != "transformation":
            continue
        try:
            rows.append(_facts(path))
        except FieldbookError as problem:
            rows.append({"file": path.name, "path": str(path), "problem": problem.text})
    if as_json:
        write_json({"schema": SCHEMA, "grids": rows})
        return
    for row in rows:
        if "problem" in row:
            line(f"{row['file']}: not usable: {row['problem']}")
            continue
        line(f"{row['file']}: {row['from']} to {row['to']}; {_area(row)}; SHA-256 {row['sha256'][:16]}...")
    if not rows:
        note("No transformation grid is installed; `fieldbook frames add FILE` adds one.")


def _record(path: Path) -> dict[str, Any]:
    from fieldbook.settings.toml_text import BadToml, toml_tree

    try:
        return toml_tree(path.with_suffix(".toml").read_text(encoding="utf-8"))
    except (OSError, BadToml, UnicodeDecodeError):
        return {}


def _facts(path: Path) -> dict[str, Any]:
    from fieldbook.reduce.frames import grid_facts

    facts, record = grid_facts(path), _record(path)
    sha256 = file_sha256(path)
    if record.get("sha256") not in (None, sha256):
        raise UsageError(f"{path.name} is not the file its record describes.", "Add it again.", code="grid_changed")
    return {
        "file": path.name,
        "path": str(path),
        "format": facts.kind,
        "from": record.get("from"),
        "to": record.get("to"),
        "bounds_deg": list(facts.bounds_deg),
        "step_deg": list(facts.step_deg),
        "subgrids": facts.subgrids,
        "shift_en_arcsec": list(facts.shift_en_arcsec),
        "shift_up_m": facts.shift_up_m,
        "sha256": sha256,
        "source": record.get("source"),
        "licence": record.get("licence"),
    }


def _area(tree: dict[str, Any]) -> str:
    south, west, north, east = (f"{value:g}" for value in tree["bounds_deg"])
    return f"latitude {south} to {north}, longitude {west} to {east}, every {60 * tree['step_deg'][0]:g}′"


def _lines(tree: dict[str, Any]) -> list[str]:
    east, north = tree["shift_en_arcsec"]
    more = f", first of {tree['subgrids']} sub-grids" if tree["subgrids"] > 1 else ""
    return [
        f"grid      {tree['file']} ({tree['format']}), {tree['from']} to {tree['to']}",
        f"area      {_area(tree)}{more}",
        f"middle    moves east {east:+.5f}″, north {north:+.5f}″, up {tree['shift_up_m']:+.4f} m",
        f"source    {tree['source']}; licence {tree['licence'] or 'not stated'}",
        f"file      {tree['path']}",
        f"SHA-256   {tree['sha256']}",
    ]


def _said(tree: dict[str, Any]) -> str:
    if tree["used_by"]:
        return f"PROJ uses it: {' + '.join(tree['used_by'])}"
    if tree["wanted"]:
        return f"PROJ does not use it between these frames; it looks for {', '.join(tree['wanted'])}"
    return "PROJ does not use it between these frames: no operation there names a grid of this name, or a better one needs none"
