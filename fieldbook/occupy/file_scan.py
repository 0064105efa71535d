"""A dry pass over a link file before anything is written: is it readable, does it hold sentences, is it known already.

A file is refused before the book is touched, so that a mistake leaves no trace. The pass hashes every byte and decodes
only as far as it must: to the first valid sentence, or to the end where fix times have to be compared with those of
other occupations.
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterator
from dataclasses import dataclass

from fieldbook.errors import LinkError
from fieldbook.links import open_link
from fieldbook.links.address import LinkAddress
from fieldbook.links.base import EndOfLink, LinkLost
from fieldbook.model.item import Item, ItemKind
from fieldbook.nmea.decoder import Decoder, DecoderOptions
from fieldbook.occupy.spans import Span


@dataclass(frozen=True)
class FileScan:
    """What a link file holds."""

    received_bytes: int
    sha256: str  # of the bytes as a recorder would receive them (unpacked)
    prefix_sha256: str | None  # of the first `prefix_bytes` of them; None if the file is shorter
    times_utc_ms: tuple[int, int] | None  # first and last fix; None: not asked for, or no fix with a date


def scan_file(
    address: LinkAddress, options: DecoderOptions, *, prefix_bytes: int = 0, with_times: bool = False
) -> FileScan:
    """Read a whole link file without recording it.

    Raises:
        LinkError: missing, unreadable, empty, or without one valid sentence.
    """
    whole, prefix = hashlib.sha256(), hashlib.sha256()
    decoder, span = Decoder(options), Span()
    count = 0
    for data in _pieces(address):
        if count < prefix_bytes:
            prefix.update(data[: prefix_bytes - count])
        whole.update(data)
        count += len(data)
        if with_times or not decoder.sentences:
            span.add(decoder.feed(Item(ItemKind.BYTES, data)))
    span.add(decoder.finish())
    if count == 0:
        raise LinkError(f"{address.text} is empty.", "Name the receiver's log.", code="empty")
    if not decoder.sentences:
        raise LinkError(
            f"{address.text} holds no valid NMEA 0183 sentence in {count} bytes.",
            "Name the receiver's log with NMEA output (GGA or GNS, better with RMC and GST); binary logs are not read.",
            code="no_sentence",
        )
    times = span.utc_ms(decoder.day0) if with_times else None
    return FileScan(count, whole.hexdigest(), prefix.hexdigest() if count >= prefix_bytes else None, times)


def _pieces(address: LinkAddress) -> Iterator[bytes]:
    link = open_link(address)
    try:
        while True:
            data = link.read(0.25)
            if data:
                yield data
    except EndOfLink:
        return
    except LinkLost as problem:
        raise LinkError(
            f"{address.text} cannot be read to its end: {problem.reason}.", "Copy the file again.", code="lost"
        ) from problem
    finally:
        link.close()
