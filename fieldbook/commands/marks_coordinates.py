"""`fieldbook marks coordinates`: one mark's coordinates in every form the trade writes them in."""

from __future__ import annotations

from pathlib import Path

import click

from fieldbook.commands.open_book import reading
from fieldbook.commands.output import line, write_json
from fieldbook.model.coordinates import FORMS


@click.command("coordinates", help="MARK's coordinates in degrees, DMS, DM, gon, geocentric and grid.")
@click.argument("book", type=click.Path(path_type=Path))
@click.argument("mark")
@click.option("--form", "forms", multiple=True, type=click.Choice(FORMS), help="Only this form; repeatable.")
@click.option("--grid", help="EPSG code of a grid, or of a conversion such as EPSG:16032; else the session's own.")
@click.option("--json", "as_json", is_flag=True, help="JSON on stdout.")
def command(book: Path, mark: str, forms: tuple[str, ...], grid: str | None, *, as_json: bool) -> None:
    """Reduce the mark and print it, digits by its 95 % figure."""
    from fieldbook.model.rounding import decimals_for, rounded_up
    from fieldbook.occupy.mark_results import mark_position
    from fieldbook.reduce.frames import printed

    with reading(book) as opened:
        found = mark_position(opened, mark)
    client = found.client
    place = (client.lat_deg, client.lon_deg, client.h_m)
    grid = grid or (found.result.grid.crs if found.result.grid else None)
    decimals = decimals_for(found.uncertainty.horizontal95_m, most=4)
    possible = [form for form in FORMS if (form != "grid" or grid) and (form != "geocentric" or client.h_m is not None)]
    accepted = found.result.grid is not None and grid == found.result.grid.crs  # judged in the reduction
    texts = {
        form: printed(place, client.frame, form, decimals, grid=grid, outside_area_accepted=accepted)
        for form in forms or possible
    }
    if as_json:
        tree = {
            "frame": client.frame,
            "frame_name": client.frame_name,
            "epoch": client.epoch,
            "horizontal95_m": found.uncertainty.horizontal95_m,
            "vertical95_m": found.uncertainty.vertical95_m,
        }
        write_json({"schema": "fieldbook.coordinates/1", "book": str(book), "mark": mark, **tree, "forms": texts})
        return
    epoch = "static frame" if client.epoch is None else f"epoch {client.epoch:.4f}"
    stated = f"95 % {rounded_up(found.uncertainty.horizontal95_m, decimals)} m in plan"
    if found.uncertainty.vertical95_m is not None:
        stated += f", {rounded_up(found.uncertainty.vertical95_m, decimals)} m in height"
    line(f"{mark}: {client.frame_name} ({client.frame}), {epoch}; {stated}")
    for form, text in texts.items():
        line(f"  {form:11} {text}")
