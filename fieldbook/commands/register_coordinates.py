"""`fieldbook register coordinates`: what the evidence gives today, mark by mark, with both accuracies and classes."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from fieldbook.commands.open_register import reading
from fieldbook.commands.output import line, write_json

if TYPE_CHECKING:
    from fieldbook.register.results import Row


@click.command("coordinates")
@click.argument("register", type=click.Path(path_type=Path))
@click.argument("marks", nargs=-1)
@click.option("--classes", type=click.Path(path_type=Path), help="TOML file with the office's accuracy classes.")
@click.option("--json", "as_json", is_flag=True, help="Result as JSON.")
def command(register: Path, marks: tuple[str, ...], classes: Path | None, as_json: bool) -> None:
    """Coordinates of MARKS (numbers or names; all without) from all evidence in REGISTER. Nothing is published by this."""
    from fieldbook.register.classes import load_classes
    from fieldbook.register.decisions import find_mark
    from fieldbook.register.results import rows_of, tree_of

    known = [] if classes is None else load_classes(classes)
    with reading(register) as opened:
        state = opened.state()
        only = [find_mark(state, text).number for text in marks] or None
        rows = rows_of(opened, known, only)
    if as_json:
        write_json({"schema": "fieldbook.register.coordinates/1", "marks": [tree_of(row) for row in rows]})
        return
    for row in rows:
        for text in lines_of(row):
            line(text)


def lines_of(row: Row) -> list[str]:
    """A mark for people. The two accuracies never share a line."""
    value, mark = row.value, row.value.mark
    found = [f"{mark.number}  {mark.name}: {value.method}, {len(value.members)} occupations"]
    place, datum = value.place, value.datum
    if place is not None and datum is not None:
        at = "" if place.epoch is None else f" at {place.epoch:.3f}"
        h = "height not known" if place.h_m is None else f"h {place.h_m:.4f} m"
        found.append(f"   {place.lat_deg:.10f} {place.lon_deg:.10f} {h}, {place.frame_name} ({place.frame}){at}")
        if value.height is not None:
            wide = value.height.vertical95_m
            how_well = "95 % not known" if wide is None else f"95 % {wide:.3f} m"
            found.append(f"   {value.height.orthometric_m:.3f} m above {value.height.model}, {how_well}")
        plan, up = row.datum_class
        found.append(
            f"   relative to the datum, 95 %: plan {_mm(datum.horizontal95_m)} ({plan}), "
            f"height {_mm(datum.vertical95_m)} ({up or '-'})"
        )
        found.append(f"   {_between(row)}")
        if row.office is not None:
            found.append(f"   office class {row.office}")
    found += [f"   {item.severity}: {item.text}" for item in value.findings]
    return found


def _between(row: Row) -> str:
    local = row.local
    if not local.lines:
        return "relative to neighbours: none within 20 km in this frame"
    numbers = ", ".join(str(line.second if line.first == row.value.mark.number else line.first) for line in local.lines)
    return (
        f"relative to neighbours {numbers}, 95 %: plan {_mm(local.horizontal_mean_m)} on average, worst "
        f"{_mm(local.horizontal_worst_m)}; height {_mm(local.vertical_mean_m)}, worst {_mm(local.vertical_worst_m)}"
    )


def _mm(value_m: float | None) -> str:
    return "not known" if value_m is None else f"{1000 * value_m:.1f} mm"
