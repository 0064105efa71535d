"""A recorded NMEA log at another place and hour, checksums made anew."""

from __future__ import annotations

from functools import reduce


def shifted(log: bytes, *, minutes: float, hours: int, north_minutes: float = 0.0) -> bytes:
    """Longitudes `minutes` of arc further, southern latitudes `north_minutes` less, times `hours` later (the same day)."""
    return b"".join(_line(line, minutes, hours, north_minutes) for line in log.splitlines(keepends=True))


def _line(line: bytes, minutes: float, hours: int, north_minutes: float) -> bytes:
    text = line.decode("ascii").strip()
    if not text.startswith("$") or "*" not in text:
        return line
    fields = text[1 : text.rindex("*")].split(",")
    kind = fields[0][2:]
    if kind in ("GGA", "GNS", "RMC", "GST", "ZDA", "GBS") and fields[1]:
        fields[1] = f"{int(fields[1][:2]) + hours:02d}{fields[1][2:]}"
    place = {"GGA": 4, "GNS": 4, "RMC": 5}.get(kind)
    if place is not None and fields[place]:
        decimals = len(fields[place].partition(".")[2])
        fields[place] = f"{float(fields[place]) + minutes:0{6 + decimals}.{decimals}f}"
        south = fields[place - 2]
        decimals = len(south.partition(".")[2])
        fields[place - 2] = f"{float(south) - north_minutes:0{5 + decimals}.{decimals}f}"
    body = ",".join(fields)
    return f"${body}*{reduce(lambda a, b: a ^ b, body.encode()):02X}\r\n".encode()
