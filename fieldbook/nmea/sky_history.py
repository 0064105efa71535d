"""Which satellites were used, and where they stood, through an occupation: one picture a minute from the received bytes.

In: the received bytes, piece by piece. Out: for each minute of the receiver's clock the satellites that GSA says were
used (all in view where no GSA is sent), with the elevation and azimuth of GSV. A pure function of the bytes: live,
later and on another computer the same. Sentences with a wrong checksum are left out; a minute without a complete set of
GSV is no picture.
"""

from __future__ import annotations

from collections.abc import Iterable

from fieldbook.model.sky import Direction, Picture
from fieldbook.nmea.framing import Framer
from fieldbook.nmea.satellites import Sky
from fieldbook.nmea.sentences import Counts

MOST_PICTURES = 3000  # two days; a longer occupation is thinned
_POSITIONS = (b"GGA", b"GNS")


def sky_history(received: Iterable[bytes]) -> list[Picture]:
    """One picture per minute, in order; empty where the receiver sends no GSV.

    Args:
        received: the received bytes of an occupation, in pieces of any size.
    """
    framer, sky = Framer(), Sky(Counts(int))
    pictures: list[Picture] = []
    minute, epoch = b"", 0
    for data in received:
        for frame in framer.feed_plain(data):
            text, checksum = frame[0], frame[1]
            if not checksum or not isinstance(checksum, bytes):
                continue  # damaged, or without a checksum
            kind = text[3:6]
            if kind == b"GSV":
                sky.held.append(text)
                sky.tidy()
            elif kind == b"GSA":
                sky.gsa(text, epoch)
            elif kind in _POSITIONS:
                now = text[7:11]
                if now != minute and minute:
                    _look(sky, pictures)
                minute, epoch = now, epoch + 1
    if minute:
        _look(sky, pictures)
    return pictures


def _look(sky: Sky, pictures: list[Picture]) -> None:
    seen = sky.satellites()
    any_used = any(item.used for item in seen)
    picture = tuple(
        Direction(item.system, item.elevation_deg, item.azimuth_deg % 360)
        for item in seen
        if item.elevation_deg is not None
        and item.azimuth_deg is not None
        and item.elevation_deg > 0
        and (item.used or not any_used)
    )
    if picture:
        pictures.append(picture)
    if len(pictures) > 2 * MOST_PICTURES:
        del pictures[::2]
