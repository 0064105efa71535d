"""Ways of feeding the decoder, and a snapshot of everything it says."""

from __future__ import annotations

import random
from collections.abc import Callable, Iterable, Iterator
from dataclasses import asdict
from functools import reduce
from operator import xor
from typing import Any

from fieldbook.model.epoch import Epoch
from fieldbook.model.item import Item, ItemKind
from fieldbook.nmea.decoder import Decoder, DecoderOptions

Cut = Callable[[bytes], Iterable[bytes]]


def sentence(body: str) -> bytes:
    """A sentence with `$`, checksum and line end."""
    return f"${body}*{reduce(xor, body.encode('ascii'), 0):02X}\r\n".encode("ascii")


def gga(clock: str, *, quality: int = 4, place: str = "1234.5678901,S,02345.6789012,W", talker: str = "GN") -> bytes:
    """A GGA at a time."""
    return sentence(f"{talker}GGA,{clock},{place},{quality},12,0.7,123.456,M,-12.345,M,1.0,0061")


def rmc(clock: str, day: str, *, status: str = "A", talker: str = "GN") -> bytes:
    """An RMC at a time, ddmmyy."""
    return sentence(f"{talker}RMC,{clock},{status},1234.5678901,S,02345.6789012,W,0.004,,{day},,,R,V")


def whole(data: bytes) -> Iterable[bytes]:
    """In one piece."""
    return [data]


def byte_by_byte(data: bytes) -> Iterator[bytes]:
    """One byte at a time."""
    return (data[n : n + 1] for n in range(len(data)))


def random_pieces(seed: int) -> Cut:
    """Pieces of 1 to 40 bytes."""

    def cut(data: bytes) -> Iterator[bytes]:
        chance, start = random.Random(seed), 0
        while start < len(data):
            size = chance.randint(1, 40)
            yield data[start : start + size]
            start += size

    return cut


def items(pieces: Iterable[bytes], *, monotonic_ms: int | None = None, step_ms: int = 0) -> list[Item]:
    """Items of bytes; without times as from a file, or arriving `step_ms` apart."""
    found = []
    for n, piece in enumerate(pieces):
        mono = None if monotonic_ms is None else monotonic_ms + n * step_ms
        found.append(Item(ItemKind.BYTES, piece, mono, None if mono is None else 1_935_741_600_000 + mono))
    return found


def decode(stream: Iterable[Item], options: DecoderOptions | None = None) -> tuple[list[Epoch], Decoder]:
    """All epochs of a stream, and the decoder."""
    decoder = Decoder(options)
    epochs = [epoch for item in stream for epoch in decoder.feed(item)]
    return epochs + decoder.finish(), decoder


def decoded(data: bytes, options: DecoderOptions | None = None, cut: Cut = whole) -> tuple[list[Epoch], Decoder]:
    """All epochs of received bytes without arrival times."""
    return decode(items(cut(data)), options)


def snapshot(result: tuple[list[Epoch], Decoder]) -> dict[str, Any]:
    """Everything a decoder says, for comparison."""
    epochs, decoder = result
    return {
        "epochs": [asdict(epoch) for epoch in epochs],
        "day0": decoder.day0,
        "day0_source": decoder.day0_source,
        "counters": decoder.counters,
        "sentences": decoder.sentences,
        "sky": [asdict(satellite) for satellite in decoder.sky],
        "warnings": decoder.warnings,
    }


def balance(counters: dict[str, int]) -> int:
    """Bytes received less bytes accounted for."""
    parts = ("good_bytes", "damaged_bytes", "junk_bytes", "tag_bytes", "line_end_bytes", "pending_bytes")
    return counters["received_bytes"] - sum(counters[part] for part in parts)
