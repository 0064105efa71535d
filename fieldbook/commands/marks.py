"""`fieldbook marks`: the marks of a book as a list, from CSV or GeoJSON, to CSV or GeoJSON.

Columns: name, id, description, inscription, access, condition, lat_deg, lon_deg, or position instead of the last two: a
text in any form of `settings.coordinates`. The position is the approximate one (for finding the mark and for judging a
receiver's 0,0); it is never a coordinate of the mark.

A text that a spreadsheet would take for a formula (`=1+1`, `@SUM(...)`) is exported with an apostrophe before it, which the
import takes off again.
"""

from __future__ import annotations

import csv
import io
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import click

from fieldbook.commands import assignments, marks_coordinates, marks_geojson, marks_inverse, marks_localgrid
from fieldbook.commands.open_book import reading, writing
from fieldbook.commands.output import line, write_json
from fieldbook.commands.signing import chosen, key_option, say_unsigned, signed_tree
from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree, normalised
from fieldbook.settings.values import nearest
from fieldbook.signing.in_book import signed_by

TEXTS = ("name", "id", "description", "inscription", "access", "condition")
COLUMNS = (*TEXTS, "lat_deg", "lon_deg")
READ = (*COLUMNS, "position")
GEOJSON = (".geojson", ".json")
MAX_BYTES = 4 * 1024 * 1024


@click.group("marks", help="List, import or export the marks of a book; their coordinates, and lines between.")
def command() -> None:
    """The group."""


@command.command("list", help="The marks of BOOK with their occupations.")
@click.argument("book", type=click.Path(path_type=Path))
@click.option("--json", "as_json", is_flag=True, help="JSON on stdout.")
def list_marks(book: Path, *, as_json: bool) -> None:
    """Read and tell."""
    with reading(book) as opened:
        state = opened.state()
    marks = [
        {
            **tree,
            "name": name,
            "occupations": [
                {"occupation": item.number, "open": item.open, "started_utc": item.started_utc}
                for item in state.of_mark(name)
            ],
        }
        for name, tree in sorted(state.marks.items())
    ]
    if as_json:
        write_json({"schema": "fieldbook.marks/1", "book": str(book), "marks": marks})
        return
    for mark in marks:
        numbers = ", ".join(str(item["occupation"]) for item in mark["occupations"]) or "none yet"
        line(f"{mark['name']}: {mark.get('description', 'no description')}; occupations: {numbers}")


@command.command("import", help="Read marks from a CSV or GeoJSON file; one entry per new mark, all of them or none.")
@click.argument("book", type=click.Path(path_type=Path))
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--by", "observer", required=True, help="Name of who writes.")
@key_option
@click.option("--update", is_flag=True, help="Also change marks that are described differently in the book.")
@click.option("--json", "as_json", is_flag=True, help="The result as JSON on stdout.")
def import_marks(book: Path, file: Path, observer: str, key_path: Path | None, *, update: bool, as_json: bool) -> None:
    """Check every row, then write."""
    rows = _read(file)
    choice = chosen(observer, key_path)
    with writing(book) as opened:
        state = opened.state()
        known, frame = state.marks, state.session.frame.client if state.session is not None else None
        wanted = [(row, _tree(_located(row, place, frame), place, known)) for place, row in rows]
        changed = [tree for _, tree in wanted if known.get(tree["name"]) != tree]
        differing = [tree["name"] for tree in changed if tree["name"] in known]
        if differing and not update:
            raise UsageError(
                f"Already in the book with another description: {', '.join(differing)}.",
                "Nothing was written. Add --update to change them.",
                code="marks_differ",
            )
        with signed_by(opened, choice.signer), opened.transaction():
            written = [opened.append("mark", tree, observer) for tree in changed]
        say_unsigned(opened, observer, choice)
    tree = {
        "written": [{"seq": entry.seq, "hash": entry.hash, "name": entry.body["name"]} for entry in written],
        "unchanged": len(wanted) - len(changed),
        "signed": signed_tree(choice.signer),
    }
    if as_json:
        write_json({"schema": "fieldbook.marks/1", "book": str(book), **tree})
    else:
        line(f"{len(written)} marks written, {tree['unchanged']} unchanged")


@command.command("export", help="Write the marks of BOOK as CSV or, by its ending, GeoJSON.")
@click.argument("book", type=click.Path(path_type=Path))
@click.option("--out", required=True, type=click.Path(path_type=Path), help="File to write.")
@click.option("--replace", is_flag=True, help="Write over an existing file.")
def export_marks(book: Path, out: Path, *, replace: bool) -> None:
    """Make the text, then write it."""
    if (out.exists() or out.is_symlink()) and not replace:
        raise UsageError(f"{out} exists already.", "Name another file, or add --replace.", code="out_exists")
    with reading(book) as opened:
        marks = opened.state().marks
    if out.suffix.lower() in GEOJSON:
        out.write_bytes(marks_geojson.text_of(marks, TEXTS).encode("utf-8"))
    else:
        out.write_bytes(_csv_text(marks).encode("utf-8"))
    line(f"{out}: {len(marks)} marks")


def _csv_text(marks: Mapping[str, Tree]) -> str:
    text = io.StringIO(newline="")
    table = csv.DictWriter(text, COLUMNS, extrasaction="ignore", lineterminator="\r\n")
    table.writeheader()
    for name, tree in sorted(marks.items()):
        place = tree.get("approximate", {})
        texts = {key: _no_formula(str(tree[key])) for key in TEXTS if key in tree}
        table.writerow({**texts, "name": _no_formula(name), **place})
    return text.getvalue()


_FORMULA = tuple("=+-@＝＋－＠'")  # the wide ones too: some spreadsheets read them alike


def _no_formula(text: str) -> str:
    return "'" + text if text.lstrip().startswith(_FORMULA) else text


def _as_typed(text: str) -> str:
    return text[1:] if text[:1] == "'" and text[1:].lstrip().startswith(_FORMULA) else text


def _read(file: Path) -> list[tuple[str, dict[str, Any]]]:
    """Rows with the place they stand at, for errors."""
    if not file.is_file():
        raise UsageError(f"There is no file {file}.", "Name a CSV file with a header line, or a .geojson file.")
    if file.stat().st_size > MAX_BYTES:
        raise UsageError(f"{file} is larger than 4 MB.", "A list of marks is shorter; is it the right file?")
    try:
        text = file.read_bytes().decode("utf-8-sig")
    except UnicodeDecodeError:
        raise UsageError(f"{file} is no UTF-8 text.", "Save it as CSV in UTF-8.") from None
    if file.suffix.lower() in GEOJSON:
        return marks_geojson.rows_of(file, text, READ)
    head = text.partition("\n")[0]
    reader = csv.DictReader(io.StringIO(text, newline=""), delimiter=";" if ";" in head else ",", strict=True)
    try:
        names = [name.strip() for name in reader.fieldnames or []]
        for name in names:
            if name not in READ:
                raise UsageError(f'{file}: there is no column "{name}".{nearest(name, READ)}', _TAKES)
        if "name" not in names:
            raise UsageError(f"{file} has no column name.", _TAKES)
        reader.fieldnames = names
        rows = [(f"{file}, line {reader.line_num}", row) for row in reader]
    except csv.Error as problem:
        raise UsageError(f"{file} is no proper CSV: {problem}.", "Correct it or save it again.") from None
    if not rows:
        raise UsageError(f"{file} holds no mark.", "Write one line per mark under the header.")
    return rows


_TAKES = f"The columns are {', '.join(READ)}; name is needed, the others are optional."


def _located(row: dict[str, Any], place: str, frame: str | None) -> dict[str, Any]:
    """The row with its `position` as lat_deg and lon_deg; a grid or X, Y, Z is taken in the client's frame."""
    typed = (row.get("position") or "").strip()
    others = {key: value for key, value in row.items() if key != "position"}
    if not typed:
        return others
    if others.get("lat_deg") or others.get("lon_deg"):
        raise UsageError(f"{place}: the position is given twice.", "Give position, or lat_deg and lon_deg.")
    from fieldbook.model.coordinates import Angular
    from fieldbook.settings.coordinates import CoordinateError, parse_position

    try:
        position = parse_position(typed)
    except CoordinateError as slip:
        slip.text = f"{place}: {slip.text}"
        raise
    if isinstance(position, Angular):
        lat, lon = float(position.lat_deg), float(position.lon_deg)
    elif frame is None:
        raise UsageError(
            f"{place}: a grid or X, Y, Z needs a frame, and this book's session names none yet.",
            "Write latitude and longitude.",
        )
    else:
        from fieldbook.reduce.frames import located

        lat, lon, _ = located(position, frame)
    return {**others, "lat_deg": f"{lat:.8f}", "lon_deg": f"{lon:.8f}"}


def _tree(row: dict[str, Any], place: str, known: dict[str, Tree]) -> Tree:
    if None in row:
        raise UsageError(f"{place}: more fields than columns.", "Put quotes around a text with commas.")
    cells = {key: value.strip() for key, value in row.items() if value and value.strip()}
    cells = {key: _as_typed(value) if key in TEXTS else value for key, value in cells.items()}
    if "name" not in cells:
        raise UsageError(f"{place}: the mark has no name.", "Write it in the column name.")
    if ("lat_deg" in cells) != ("lon_deg" in cells):
        raise UsageError(f"{place}: only one of lat_deg and lon_deg is given.", "Give both or neither.")
    tree: Tree = dict(known.get(cells["name"], {}))
    for key, value in cells.items():
        dotted = f"approximate.{key}" if key in ("lat_deg", "lon_deg") else key
        try:
            assignments.put(tree, "mark", dotted, value)
        except UsageError as slip:
            raise UsageError(f"{place}: {slip.text}", slip.remedy) from None
    _within(tree, place)
    result: Tree = normalised(tree)
    return result


def _within(tree: Tree, place: str) -> None:
    for key, limit in (("lat_deg", 90), ("lon_deg", 180)):
        value = tree.get("approximate", {}).get(key)
        if value is not None and abs(float(value)) > limit:
            raise UsageError(f"{place}: {key} {value} is not within {limit} degrees.", "Write decimal degrees.")


command.add_command(marks_coordinates.command)
command.add_command(marks_inverse.command)
command.add_command(marks_localgrid.command)
