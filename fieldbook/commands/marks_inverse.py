"""`fieldbook marks inverse`: direction and distances between two marks of a book, with their 95 % figures."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import click

from fieldbook.commands.open_book import reading
from fieldbook.commands.output import line, write_json
from fieldbook.errors import UsageError
from fieldbook.model.angles import dms_parts
from fieldbook.model.inverse import Inverse
from fieldbook.model.rounding import decimals_for, rounded, rounded_up


@click.command("inverse", help="Azimuths, distances and height difference from mark FIRST to mark SECOND.")
@click.argument("book", type=click.Path(path_type=Path))
@click.argument("first")
@click.argument("second")
@click.option("--taped", type=float, help="A slope distance measured mark to mark, metres: compared.")
@click.option("--taped-u", type=float, help="Its standard uncertainty, metres.")
@click.option("--json", "as_json", is_flag=True, help="JSON on stdout.")
def command(book: Path, first: str, second: str, taped: float | None, taped_u: float | None, *, as_json: bool) -> None:
    """Reduce both, tell the line."""
    if (taped is None) != (taped_u is None):
        raise UsageError("A measured distance goes with its standard uncertainty.", "Give --taped M and --taped-u M.")
    from fieldbook.occupy.between import inverse

    with reading(book) as opened:
        found = inverse(opened, first, second, None if taped is None or taped_u is None else (taped, taped_u))
    if as_json:
        write_json({"schema": "fieldbook.inverse/1", "book": str(book), **found.to_json()})
        return
    for text in inverse_lines(found):
        line(text)


def inverse_lines(found: Inverse) -> Iterator[str]:
    """The line as text, every figure with the digits its 95 % deserves."""
    epoch = "static frame" if found.epoch is None else f"epoch {found.epoch:.4f}"
    yield f"{found.first} to {found.second}, {found.frame_name} ({found.frame}), {epoch}"
    metres = decimals_for(found.distance95_m, most=4)
    plan = f"± {rounded_up(found.distance95_m, metres)} m"
    if found.azimuth_deg is None or found.reverse_azimuth_deg is None or found.azimuth95_arcsec is None:
        yield "  azimuth             none: the marks coincide"
    else:
        seconds = decimals_for(found.azimuth95_arcsec, most=2)
        wide = rounded_up(found.azimuth95_arcsec, seconds)
        yield f"  azimuth             {_bearing(found.azimuth_deg, seconds)}  ± {wide}″"
        yield f"  reverse azimuth     {_bearing(found.reverse_azimuth_deg, seconds)}  ± {wide}″"
    yield f"  on the ellipsoid    {rounded(found.geodesic_m, metres)} m  {plan}  (geodesic)"
    yield f"  ellipsoidal chord   {rounded(found.chord_m, metres)} m"
    if found.ground_m is not None and found.mean_height_m is not None:
        yield f"  on the ground       {rounded(found.ground_m, metres)} m  at h {rounded(found.mean_height_m, 1)} m"
    if found.slope_m is not None and found.slope95_m is not None:
        yield f"  slope, mark to mark {rounded(found.slope_m, metres)} m  ± {rounded_up(found.slope95_m, metres)} m"
    if found.grid is not None:
        bearing = "" if found.grid.bearing_deg is None else f"  bearing {_bearing(found.grid.bearing_deg, 1)}"
        factor = "" if found.grid.factor is None else f"  = ground x {found.grid.factor:.8f}"
        yield f"  grid {found.grid.crs:14} {rounded(found.grid.distance_m, metres)} m{factor}{bearing}"
    if found.height_difference_m is not None:
        up = decimals_for(found.height95_m, most=4)
        wide = "not known" if found.height95_m is None else f"± {rounded_up(found.height95_m, up)} m"
        yield f"  height difference   {_signed(found.height_difference_m, up)} m  {wide}  (ellipsoidal)"
        if found.physical_difference_m is not None:
            yield f"                      {_signed(found.physical_difference_m, up)} m  by {found.height_model}"
    if found.taped is not None:
        word = "agrees" if found.taped.agrees else "DOES NOT AGREE"
        yield (
            f"  taped {rounded(found.taped.measured_m, 4)} m, u {found.taped.measured_u_m:g} m: "
            f"{_signed(found.taped.difference_m, 4)} m from the coordinates, limit {rounded_up(found.taped.limit_m, 4)} m: {word}"
        )
    yield "  ± are 95 %. " + " ".join(found.assumed)


def _bearing(degrees: float, decimals: int) -> str:
    _, whole, minute, second = dms_parts(degrees, decimals)
    return f"{whole % 360:03d}°{minute:02d}′{second}″"


def _signed(value: float, decimals: int) -> str:
    text = rounded(value, decimals)
    return text if text.startswith("-") else f"+{text}"
