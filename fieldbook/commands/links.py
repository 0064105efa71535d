"""`fieldbook links`: serial ports without opening any, or what one link sends in three seconds.

Opening a port resets some boards and takes bytes from whoever reads it, so the list opens nothing. `--listen` opens one
link, because it was named, and counts its sentences; pynmea2 names their fields.
"""

from __future__ import annotations

import time
from pathlib import Path
from typing import Any

import click

from fieldbook.commands.output import line, note, write_json
from fieldbook.errors import LinkError

LISTEN_S = 3.0
# titles of the sentences as NMEA 0183 has them; the type alone is shown where none is here
TITLES = {
    "DTM": "datum reference",
    "GBS": "satellite fault detection",
    "GGA": "fix data",
    "GLL": "geographic position",
    "GNS": "fix data of all systems",
    "GRS": "range residuals",
    "GSA": "DOP and active satellites",
    "GST": "pseudorange error statistics",
    "GSV": "satellites in view",
    "HDT": "true heading",
    "RMC": "recommended minimum data",
    "TXT": "text",
    "VTG": "course and speed over ground",
    "ZDA": "time and date",
}
USED = ("GGA", "GNS", "RMC", "GST", "GSA", "GSV", "ZDA", "DTM", "GLL")


@click.command(
    "links",
    help="List serial ports without opening any. --listen opens one link for 3 s and says what it sends.",
)
@click.option("--listen", "link_text", metavar="LINK", help="serial:..., tcp://..., udp://..., file:... or sim:...")
@click.option("--json", "as_json", is_flag=True, help="JSON on stdout.")
def command(link_text: str | None, *, as_json: bool) -> None:
    """List or listen."""
    if link_text is None:
        _list(as_json=as_json)
        return
    tree = listen(link_text)
    if as_json:
        write_json(tree)
        return
    for text in _lines(tree):
        line(text)


def _list(*, as_json: bool) -> None:
    from fieldbook.links import list_ports

    rows = list_ports()
    if as_json:
        ports = [
            {
                "device": row.device,
                "description": row.description,
                "stable_device": row.stable_device,
                "usb": None if row.identity is None else vars(row.identity),
                "link": row.address,
            }
            for row in rows
        ]
        write_json({"schema": "fieldbook.links/1", "ports": ports})
        return
    for row in rows:
        line(f"{row.address}SPEED  {row.description}".rstrip())
    if not rows:
        note("No serial port is known to this system. TCP, UDP and files need none: tcp://host:port, file:PATH.")


def listen(link_text: str, seconds: float = LISTEN_S) -> dict[str, Any]:
    """What one link sends within some seconds (a file: its first megabyte).

    Raises:
        UsageError: no link address.
        LinkError: it cannot be opened, or is lost while listening.
    """
    from fieldbook.links import open_link, parse_link
    from fieldbook.links.base import EndOfLink
    from fieldbook.model.item import Item, ItemKind
    from fieldbook.nmea.decoder import Decoder, DecoderOptions

    address = parse_link(link_text, Path.cwd())
    decoder, heard = Decoder(DecoderOptions()), 0
    link = open_link(address)
    began = time.monotonic()
    try:
        while time.monotonic() - began < seconds and (address.live or heard < 1 << 20):
            data = link.read(0.1)
            heard += len(data)
            if data:
                decoder.feed(Item(ItemKind.BYTES, data))
    except EndOfLink:
        pass
    finally:
        link.close()
    took_s = time.monotonic() - began
    if heard == 0:
        raise LinkError(
            f"{address.text} sent nothing within {took_s:.0f} s.",
            "Switch the receiver's NMEA output on for this port, or try another one.",
            code="silent",
        )
    return {
        "schema": "fieldbook.links/1",
        "link": address.text,
        "seconds": round(took_s, 3),
        "bytes": heard,
        "sentences": [
            _row(word, count, took_s if address.live else None) for word, count in sorted(decoder.sentences.items())
        ],
        "counters": {key: value for key, value in decoder.counters.items() if value},
    }


def _row(word: str, count: int, seconds: float | None) -> dict[str, Any]:
    kind = word[-3:]
    return {
        "sentence": word,
        "title": TITLES.get(kind),
        "count": count,
        "rate_hz": None if seconds is None else round(count / seconds, 2),
        "used": kind in USED,
        "fields": _fields(kind),
    }


def _fields(kind: str) -> list[str]:
    """Names of the fields as pynmea2 has them; empty for a sentence it does not know."""
    from pynmea2.types import talker

    known = getattr(talker, kind, None)
    return [field[0] for field in known.fields] if known is not None and kind.isalpha() else []


def _lines(tree: dict[str, Any]) -> list[str]:
    said = [f"{tree['link']}: {tree['bytes']} bytes in {tree['seconds']:.1f} s"]
    for row in tree["sentences"]:
        rate = "" if row["rate_hz"] is None else f"  {row['rate_hz']:.1f} a second"
        said.append(f"  {row['sentence']:6} {row['count']:5}{rate}  {row['title'] or 'not used'}")
    if not tree["sentences"]:
        said.append("  no valid NMEA 0183 sentence: wrong speed, or another format?")
    elif not any(row["sentence"][-3:] in ("GGA", "GNS", "RMC") for row in tree["sentences"]):
        said.append("  no position sentence: switch on GGA (or GNS), better with RMC, GST, GSA and GSV")
    return said
