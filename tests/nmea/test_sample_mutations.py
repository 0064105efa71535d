"""The samples, damaged in every way a cable, a disk or a program damages a log: nothing raised, every byte accounted for."""

from __future__ import annotations

import gzip
import random
import tracemalloc
from pathlib import Path

import pytest
from recorded_samples import SAMPLE_NAMES, SAMPLES

from fieldbook.model.item import Item, ItemKind
from fieldbook.nmea.decoder import Decoder, DecoderOptions
from fieldbook.nmea.framing import Framer
from fieldbook.nmea.second_reader import second_readings

from .feeding import balance, decoded, random_pieces, snapshot

BYTES = 150_000  # of each sample; ten minutes and more
PARTS = ("good_bytes", "damaged_bytes", "junk_bytes", "tag_bytes", "line_end_bytes", "pending_bytes")


def _log(name: str) -> bytes:
    folder = SAMPLES / name
    packed = Path(folder / "receiver.nmea.gz")
    data = gzip.decompress(packed.read_bytes()) if packed.exists() else (folder / "receiver.nmea").read_bytes()
    return data[:BYTES]


def _flipped(data: bytes, chance: random.Random) -> bytes:
    out = bytearray(data)
    for _ in range(len(out) // 300):
        out[chance.randrange(len(out))] ^= 1 << chance.randrange(8)
    return bytes(out)


def _holes(data: bytes, chance: random.Random) -> bytes:
    out = bytearray(data)
    for _ in range(200):
        start = chance.randrange(len(out))
        del out[start : start + chance.choice((1, 2, 30, 400))]
    return bytes(out)


def _repeated(data: bytes, chance: random.Random) -> bytes:
    out = bytearray(data)
    for _ in range(100):
        start = chance.randrange(len(out))
        piece = out[start : start + chance.choice((1, 40, 900))]
        out[start:start] = piece * chance.choice((1, 2, 5))
    return bytes(out)


def _binary_between(data: bytes, chance: random.Random) -> bytes:
    lines = data.splitlines(keepends=True)
    for at in range(0, len(lines), 7):
        lines[at] = b"\xb5\x62" + chance.randbytes(chance.randrange(200)) + lines[at]
    return b"".join(lines)


def _shuffled(data: bytes, chance: random.Random) -> bytes:
    lines = data.splitlines(keepends=True)
    for at in range(0, len(lines) - 20, 20):
        part = lines[at : at + 20]
        chance.shuffle(part)
        lines[at : at + 20] = part
    return b"".join(lines)


def _other_ends(data: bytes, chance: random.Random) -> bytes:
    return b"".join(
        line.rstrip() + chance.choice((b"\n", b"\r", b"\r\r\n", b"", b"\0\r\n")) for line in data.splitlines()
    )


WAYS = {
    "flipped": _flipped, "holes": _holes, "repeated": _repeated, "binary between": _binary_between, "shuffled": _shuffled,
    "other ends": _other_ends,
}  # fmt: skip


@pytest.mark.parametrize("way", WAYS)
@pytest.mark.parametrize("name", SAMPLE_NAMES)
def test_a_damaged_sample(name: str, way: str) -> None:
    data = WAYS[way](_log(name), random.Random(f"{name} {way}"))
    options = DecoderOptions(accept_without_checksum=way == "other ends")
    epochs, decoder = decoded(data, options, random_pieces(3))
    counters = decoder.counters
    assert balance(counters) == 0
    assert counters["received_bytes"] == len(data) == sum(counters[part] for part in PARTS)
    assert counters["pending_bytes"] == 0
    assert [one.number for one in epochs] == list(range(1, len(epochs) + 1))
    assert snapshot((epochs, decoder)) == snapshot(decoded(data, options))
    list(second_readings([data]))  # leaves out what it cannot read


@pytest.mark.parametrize("size", [1, 7, 4096, 200_000])
def test_bytes_in_are_bytes_out_or_waiting_at_every_moment(size: int) -> None:
    """Not only at the end: after each piece, what came is what was framed, left out, or is waiting."""
    data = _flipped(_log(SAMPLE_NAMES[0])[:40_000], random.Random(5))
    framer, fed = Framer(), 0
    for start in range(0, len(data), size):
        piece = data[start : start + size]
        framer.feed(piece)
        fed += len(piece)
        assert framer.received_bytes == fed
        assert sum(getattr(framer, part) for part in PARTS) == fed
        assert framer.pending_bytes <= 256


def _peak(pieces: list[bytes], feed) -> int:
    tracemalloc.start()
    try:
        for piece in pieces:
            feed(piece)
        return tracemalloc.get_traced_memory()[1]
    finally:
        tracemalloc.stop()


def test_memory_does_not_grow_with_the_noise() -> None:
    """Peaks of 1 MB and of 2 MB of noise, in pieces as a port gives them: less than 1 MB each, and about the same."""
    chance = random.Random(11)
    peaks = []
    for megabytes in (1, 2):
        decoder = Decoder()
        pieces = [chance.randbytes(1024) for _ in range(megabytes * 1024)]
        peaks.append(_peak(pieces, lambda piece, decoder=decoder: decoder.feed(Item(ItemKind.BYTES, piece))))
        assert balance(decoder.counters) == 0
    assert max(peaks) < 1_000_000
    assert peaks[1] < 1.3 * peaks[0] + 50_000
