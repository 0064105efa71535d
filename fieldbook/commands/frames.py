"""`fieldbook frames`: find a frame, see what a pair of frames does at a place, and be led to what must be recorded."""

from __future__ import annotations

import sys
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from fieldbook.clock import SystemClock
from fieldbook.commands import grids
from fieldbook.commands.output import line, note, write_json
from fieldbook.errors import UsageError

if TYPE_CHECKING:
    from fieldbook.model.session import FrameChoice, Motion

SCHEMA = "fieldbook.frames/1"
AT = click.option("--at", help='Where, e.g. --at "-34.27 146.05"; any form of a position.')
BOOK = click.option("--book", type=click.Path(path_type=Path), help="Where the receiver of this book stands.")
JSON = click.option("--json", "as_json", is_flag=True, help="JSON on stdout.")


@dataclass(frozen=True)
class _Place:
    lat_deg: float
    lon_deg: float
    h_m: float
    epoch: float
    said: str
    frame: FrameChoice | None = None

    def to_json(self) -> dict[str, Any]:
        return {
            "lat_deg": self.lat_deg,
            "lon_deg": self.lon_deg,
            "h_m": self.h_m,
            "epoch": self.epoch,
            "said": self.said,
        }


@click.group("frames", help="Find a frame; what a pair of frames does at a place; which frame to record.")
def command() -> None:
    """The group."""


@command.command("search", help="Frames whose name, code or area holds every word, and whose area holds the place.")
@click.argument("words", nargs=-1)
@AT
@BOOK
@click.option("--grids", "of_frame", help="Instead: conformal grids of this frame (EPSG code) at the place.")
@JSON
def search(words: tuple[str, ...], at: str | None, book: Path | None, of_frame: str | None, *, as_json: bool) -> None:
    """List them, smallest area first."""
    from fieldbook.commands.frames_json import frame_tree
    from fieldbook.occupy.frame_words import search_lines
    from fieldbook.reduce.frames import frames_by, grids_of

    place = _place(at, book)
    if of_frame is not None:
        if place is None:
            raise UsageError("Grids are listed for a place.", 'Say where: --at "-34.27 146.05", or --book BOOK.')
        wanted = [word.casefold() for word in words]
        listed = [
            item
            for item in grids_of(of_frame, place.lat_deg, place.lon_deg)
            if all(word in f"{item.code} {item.name}".casefold() for word in wanted)
        ]
        if as_json:
            rows = [{"code": item.code, "name": item.name, "area": item.area_name} for item in listed]
            write_json({"schema": SCHEMA, "place": place.to_json(), "frame": of_frame, "grids": rows})
            return
        for item in listed:
            line(f"{item.code:11} {item.name}")
        note("" if listed else f"No conformal grid of {of_frame} is known at this place.")
        return
    found = frames_by(words, None if place is None else (place.lat_deg, place.lon_deg))
    if as_json:
        where = None if place is None else place.to_json()
        write_json({"schema": SCHEMA, "place": where, "frames": [frame_tree(item) for item in found]})
        return
    for text in search_lines(found):
        line(text)
    if not found:
        note("No frame fits. Areas are named in English, as the EPSG data set has them; fewer words find more.")


@command.command(
    "show", help="What leads from the frame RECEIVER to the frame CLIENT at a place, and what it does there."
)
@click.argument("receiver", required=False)
@click.argument("client", required=False)
@AT
@BOOK
@click.option("--epoch", type=float, help="Decimal year of the observation; else the book's day, else today.")
@click.option(
    "--receiver-epoch", type=float, help="Decimal year of the receiver's coordinates; else the observation's."
)
@click.option("--client-epoch", type=float, help="Decimal year of the client's coordinates; else the observation's.")
@click.option("--plate", help='How the mark moves between two epochs: model and plate, e.g. "ITRF2020 AUST".')
@click.option("--plate-sigma", type=float, help="Its standard uncertainty, metres a year.")
@JSON
def show(
    receiver: str | None,
    client: str | None,
    at: str | None,
    book: Path | None,
    epoch: float | None,
    receiver_epoch: float | None,
    client_epoch: float | None,
    plate: str | None,
    plate_sigma: float | None,
    *,
    as_json: bool,
) -> None:
    """Ask the gateway as a reduction would, and tell all of it."""
    from fieldbook.commands.frames_json import pair_tree
    from fieldbook.model.session import FrameChoice
    from fieldbook.occupy.frame_words import pair_lines
    from fieldbook.reduce.frames import frame_info, pair_at

    place = _place(at, book)
    if place is None:
        raise UsageError(
            "A pair of frames is judged at a place.", 'Say where: --at "-34.27 146.05 h 200", or --book BOOK.'
        )
    if receiver is None and client is None and place.frame is not None:
        choice = place.frame
    elif receiver is None or client is None:
        raise UsageError(
            "Two frames are needed.", "Give RECEIVER and CLIENT, e.g. EPSG:7912 EPSG:7843; or --book BOOK."
        )
    else:
        epochs = [
            (given if given is not None else "observation") if frame_info(code).dynamic else None
            for code, given in ((receiver, receiver_epoch), (client, client_epoch))
        ]
        motion = _motion(plate, plate_sigma)
        choice = FrameChoice(receiver, client, receiver_epoch=epochs[0], client_epoch=epochs[1], motion=motion)
    pair = pair_at(choice, place.lat_deg, place.lon_deg, place.h_m, place.epoch if epoch is None else epoch)
    if as_json:
        write_json({"schema": SCHEMA, "place": place.to_json(), "pair": pair_tree(pair)})
        return
    for text in pair_lines(pair):
        line(text)
    note(f"at {place.said}")


@command.command("ask", help="What corrects this receiver? Leads to the frame and epoch to record, and whom to ask.")
@click.argument("kind", required=False)
@AT
@BOOK
@JSON
def ask(kind: str | None, at: str | None, book: Path | None, *, as_json: bool) -> None:
    """Ask, or take the answer given; never assume one."""
    from fieldbook.commands.frames_json import answer_tree
    from fieldbook.occupy.frame_words import answer_lines
    from fieldbook.reduce.frames import ANSWERS, QUESTION, answer, plausible

    place = _place(at, book)
    if kind is None:
        if as_json:
            rows = [{"kind": item.kind, "words": item.words} for item in ANSWERS]
            write_json({"schema": SCHEMA, "question": QUESTION, "answers": rows})
            return
        line(QUESTION)
        for number, item in enumerate(ANSWERS, start=1):
            line(f"  {number}  {item.words}")
        if not sys.stdin.isatty():
            note("Run it again with the answer, e.g. `fieldbook frames ask network`.")
            return
        kind = str(click.prompt("Number", type=click.IntRange(1, len(ANSWERS)), err=True))
    chosen = ANSWERS[int(kind) - 1] if kind in {str(n) for n in range(1, len(ANSWERS) + 1)} else answer(kind)
    listed = plausible(chosen, None if place is None else (place.lat_deg, place.lon_deg))
    if as_json:
        where = None if place is None else place.to_json()
        write_json({"schema": SCHEMA, "place": where, "question": QUESTION, "answer": answer_tree(chosen, listed)})
        return
    for text in answer_lines(chosen, listed, place_known=place is not None):
        line(text)


command.add_command(grids.add)
command.add_command(grids.list_grids)


def _motion(plate: str | None, sigma: float | None) -> tuple[Motion, ...]:
    """The stated plate motion; whether there is such a plate is the gateway's question."""
    if plate is None and sigma is None:
        return ()
    parts = (plate or "").split()
    if len(parts) != 2 or sigma is None:
        raise UsageError(
            "A plate motion is a model, a plate and a standard uncertainty.",
            'Give e.g. --plate "ITRF2020 AUST" --plate-sigma 0.0003.',
        )
    from fieldbook.model.session import Motion

    return (Motion(model=parts[0], plate=parts[1], sigma_m_per_year=sigma),)


def _place(at: str | None, book: Path | None) -> _Place | None:
    """The place asked for, from a text or a book; None if neither is given.

    Raises:
        UsageError: both given, a text that cannot be read, or a book that knows no place.
    """
    if at is not None and book is not None:
        raise UsageError("The place is given twice.", "Give --at or --book.")
    from fieldbook.reduce.frames import ITRF2020, decimal_year, located
    from fieldbook.settings.coordinates import parse_position

    now = decimal_year(_now())
    if at is not None:
        lat, lon, h_m = located(parse_position(at), ITRF2020)
        return _Place(
            lat, lon, h_m or 0.0, now, f"{lat:.5f}, {lon:.5f}, h {h_m or 0.0:.0f} m, epoch {now:.2f} unless stated"
        )
    if book is None:
        return None
    from fieldbook.commands.open_book import reading
    from fieldbook.occupy.where import whereabouts
    from fieldbook.reduce.frames import use_grid_folders
    from fieldbook.settings.grids import grid_folders

    use_grid_folders(grid_folders(book.resolve().parent))
    with reading(book) as opened:
        where = whereabouts(opened)
    epoch = now if where.day is None else decimal_year(where.day)
    said = f"{where.lat_deg:.5f}, {where.lon_deg:.5f} ({where.said}), h 0 m, epoch {epoch:.2f} unless stated"
    return _Place(
        where.lat_deg, where.lon_deg, 0.0, epoch, said, None if where.session is None else where.session.frame
    )


def _now() -> Any:
    from datetime import UTC, datetime

    return datetime.fromtimestamp(SystemClock().utc_ms() / 1000, UTC)
