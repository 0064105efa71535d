"""Registers without books: the evidence of one sample occupation, moved, dated and equipped as a test wants it.

Only the door is short-cut: what is written is an `added` entry like any other, made by the same functions.
"""

from __future__ import annotations

import hashlib
import uuid
from collections.abc import Iterable
from dataclasses import replace
from pathlib import Path
from typing import Any

from fieldbook.clock import FakeClock, utc_ms_of, utc_text
from fieldbook.reduce.geodesy import geocentric, moved_by_enu
from fieldbook.register.evidence import Evidence, Place
from fieldbook.register.from_book import line_of
from fieldbook.register.store import Register, as_kept

CLOCK = FakeClock(1000, 1_804_122_600_000)
OFFICE = "O. Desk"


def new_register(path: Path) -> Register:
    """An empty register, open for writing."""
    return Register.create(path, clock=CLOCK, by=OFFICE)


def book_id(number: int) -> str:
    """Ids whose first eight digits differ."""
    return str(uuid.UUID(int=(number + 1) << 96, version=4))


def moved(place: Place | None, enu_m: tuple[float, float, float]) -> Place:
    """A place east, north and up of another."""
    assert place is not None
    assert place.h_m is not None
    lat, lon, h = moved_by_enu((place.lat_deg, place.lon_deg, place.h_m), enu_m)
    x, y, z = (float(value) for value in geocentric(lat, lon, h))
    return replace(place, lat_deg=lat, lon_deg=lon, h_m=h, xyz_m=(x, y, z))


def later(text: str | None, hours: float) -> str:
    """A time so many hours later."""
    assert text is not None
    return utc_text(utc_ms_of(text) + round(hours * 3_600_000))


def occupied(
    base: Evidence,
    number: int = 1,
    *,
    mark: str = "KR-07",
    enu_m: tuple[float, float, float] = (0.0, 0.0, 0.0),
    hours: float = 0.0,
    station: str | None = "0042",
    antenna_serial: str | None = "0001",
    receiver: str | None = "DR2-0417",
    arp_m: float | None = None,
    **more: Any,
) -> Evidence:
    """The base occupation elsewhere, later, with other equipment."""
    shares = replace(base.shares, station=station, antenna_serial=antenna_serial, receiver_serial=receiver)
    height = None if base.height is None else replace(base.height, orthometric_m=base.height.orthometric_m + enu_m[2])
    return replace(
        base,
        mark=mark,
        occupation=number,
        place=moved(base.place, enu_m),
        started=later(base.started, hours),
        ended=later(base.ended, hours),
        shares=shares,
        height=height,
        antenna_height_m=base.antenna_height_m if arp_m is None else arp_m,
        received_sha256=hashlib.sha256(f"{uuid.uuid4()}".encode()).hexdigest(),
        **more,
    )


def add(
    register: Register,
    number: int,
    evidence: Iterable[Evidence],
    *,
    marks: dict[str, dict[str, Any]] | None = None,
    certificates: list[dict[str, Any]] | None = None,
) -> str:
    """An `added` entry of an invented book; its id."""
    own = list(evidence)
    book, state = book_id(number), register.state()
    held = state.books.get(book)
    names = list(dict.fromkeys([*(marks or {}), *(item.mark for item in own)]))
    known = {} if held is None else held.numbers
    new = [name for name in names if name not in known]
    hashes = hashlib.sha256(f"{book} {state.head_seq}".encode()).digest()
    with register.transaction():
        register.append(
            "added",
            {
                "book": book,
                "path": f"party-{number}.book",
                "head_seq": 20 + state.head_seq,
                "head_hash": hashes.hex(),
                "hashes": register.keep(hashes),
                "versions": {"fieldbook": "0", "proj": "0", "epsg": "0", "pyproj": "0"},
                "occupations": [
                    line_of(
                        item, register.keep(as_kept(item.to_tree())), register.keep(as_kept({"n": item.occupation}))
                    )
                    for item in own
                ],
                "failed": [],
                "marks": {name: {"name": name, **(marks or {}).get(name, {})} for name in names},
                "numbers": {name: state.next_number + place for place, name in enumerate(new)},
                "certificates": certificates or [],
                "changes": [],
            },
            OFFICE,
        )
    return book
