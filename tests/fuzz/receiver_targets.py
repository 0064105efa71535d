"""Targets for what comes from a receiver: framer, single fields, decoder, second reader, recorded items."""

from __future__ import annotations

import random
from collections.abc import Iterator
from datetime import date
from pathlib import Path
from typing import Any

from fieldbook.model.item import Item, ItemKind, canonical_items, parse_items
from fieldbook.nmea import fields
from fieldbook.nmea.decoder import Decoder, DecoderOptions
from fieldbook.nmea.framing import Damaged, Framer
from fieldbook.nmea.second_reader import second_readings

from .mutations import mend
from .target import Target, kept

_SAMPLE = Path(__file__).parents[2] / "sample_sessions" / "kestrel-ridge-1" / "receiver.nmea"
_KINDS = ("good", "bad_checksum", "no_checksum", "bad_bytes", "truncated", "too_long")
_PARTS = ("good_bytes", "damaged_bytes", "junk_bytes", "tag_bytes", "line_end_bytes", "pending_bytes")
_WORDS = (
    *(
        b"$GNGGA,",
        b"$GNGNS,",
        b"$GNRMC,",
        b"$GNGST,",
        b"$GNZDA,",
        b"$GPGLL,",
        b"$GNDTM,999,",
        b"$GNGSA,",
        b"$GPGSV,3,1,",
    ),
    *(
        b"$GNGBS,",
        b"$PXYZ,",
        b"!AIVDM,",
        b"*00\r\n",
        b"*",
        b"\\s:x,c:1*5A\\",
        b"\\",
        b"\r\n",
        b",,,,",
        b",V,",
        b",A,",
        b",f,",
    ),
    *(
        b"235959.999",
        b"235960.00",
        b"000000.000",
        b"9000.00000000,N",
        b"18000.0,E",
        b"0000.0,S,00000.0,W",
        b"RRRR",
        b"$" * 300,
    ),
)


def _sentences() -> list[bytes]:
    with _SAMPLE.open("rb") as file:
        lines = file.read(6000).splitlines(keepends=True)[:-1]
    made = mend(
        b"$GPGNS,011000.00,3416.45,S,14603.11,E,RFN,12,0.7,12.3,4.5,1.0,0042*00\r\n"
        b"$GPGLL,3416.45,S,14603.11,E,011000.00,A,A*00\r\n$GNDTM,999,,0.0,N,0.0,E,0.0,W84*00\r\n"
        b"$GNGGA,235959.90,0000.0,N,00000.0,E,1,4,,9,f,1,M,,*00\r\n$GNGBS,011001.00,0.1,0.1,0.2,,,,*00\r\n"
        b"\\s:rover,c:1*00\\$GNRMC,000000.00,A,3416.4,S,14603.1,E,0.0,,311229,,,R,V*00\r\n"
    )
    long = [mend(b"$PXYZ," + b"7" * size + b"*00\r\n") for size in (246, 247, 248, 249, 190, 230)]  # about the limit
    return [b"".join(lines[:8]), b"".join(lines[8:20]), b"".join(lines[20:34]), made, b"".join(long)]


def _seeds() -> list[bytes]:
    return [bytes([n, 7 * n, 0, n]) + one for n, one in enumerate(_sentences())]


def _pieces(data: bytes, chance: random.Random) -> Iterator[bytes]:
    start, longest = 0, chance.choice((1 if len(data) < 400 else 20, 3 if len(data) < 1000 else 40, 40, 400, 5000))
    while start < len(data):
        size = chance.randint(0 if longest > 1 else 1, longest)
        yield data[start : start + size]
        start += size


def _split(data: bytes) -> tuple[random.Random, bytes]:
    """Four bytes choose cuts, times and options; the rest is the stream."""
    chance = random.Random(data[:4])
    return chance, data[4:] * chance.choice((*[1] * 30, 6))  # seldom beyond the framer's slices of 4096


def framer(data: bytes) -> None:
    """Never raises; every byte accounted for; frames in order and really in the data; cuts never matter."""
    chance, stream = _split(data)
    one = Framer()
    frames = one.feed(stream)
    assert one.pending_bytes <= 256
    frames += one.finish()
    assert one.received_bytes == len(stream) == sum(getattr(one, part) for part in _PARTS)
    assert sum(one.counts[kind] for kind in _KINDS) == len(frames)
    position = 0
    for frame in frames:
        position = stream.index(frame.raw, position) + len(frame.raw)
        assert len(frame.raw) <= 256
        if not isinstance(frame, Damaged):
            assert frame.fields[0] == frame.address == frame.talker + frame.type
    other = Framer()
    cut: list[Any] = []
    for piece in _pieces(stream, chance):
        cut += other.feed(piece)
        assert other.pending_bytes <= 256
    assert cut + other.finish() == frames
    assert other.counts == one.counts
    assert [getattr(other, part) for part in _PARTS] == [getattr(one, part) for part in _PARTS]


def single_fields(data: bytes) -> None:
    """Readers of fields answer None or a value in its range, whatever the text."""
    text = data.decode("utf-8", "surrogateescape")
    for part in (text, *text.split(",")[:8]):
        for places in (0, 3, 5):
            found = fields.read_decimal(part, places)
            assert found is None or (abs(found[0]) <= 10 ** (9 + places) and found[1] >= 0)
            if found is not None:
                assert abs(fields.feet_to_metres(found[0])) <= abs(found[0])
        for read, half, most in ((fields.read_latitude, "S", 90), (fields.read_longitude, "W", 180)):
            angle = read(part, half)
            assert angle is None or -most * 60 * 10**8 <= angle[0] <= 0
            assert read(part, part) is None
        time_ms = fields.read_time(part)
        assert time_ms is None or 0 <= time_ms <= fields.DAY_MS + 1000
        if time_ms is not None:
            assert len(fields.time_text(time_ms)) == 12
        day = fields.read_date(part)
        assert day is None or date(1980, 1, 1) <= day <= date(2079, 12, 31)
        fields.make_date(part[:2], part[2:4], part[4:])
        count = fields.read_count(part)
        assert count is None or 0 <= count <= 9999


def _snapshot(items: list[Item], options: DecoderOptions) -> dict[str, Any]:
    decoder = Decoder(options)
    epochs = [epoch for item in items for epoch in decoder.feed(item)] + decoder.finish()
    counters = decoder.counters
    assert counters["received_bytes"] == sum(counters[part] for part in _PARTS)
    assert len(decoder.sentences) <= 201
    assert [one.number for one in epochs] == list(range(1, len(epochs) + 1))
    for one in epochs:
        assert one.latitude_e8min is None or abs(one.latitude_e8min) <= 90 * 60 * 10**8
        assert one.longitude_e8min is None or abs(one.longitude_e8min) <= 180 * 60 * 10**8
        assert one.instant_ms is None or abs(one.instant_ms) < 2**62
    return {
        "epochs": epochs,
        "day0": (decoder.day0, decoder.day0_source),
        "counters": counters,
        "sentences": decoder.sentences,
        "sky": decoder.sky,
        "warnings": decoder.warnings,
        "step": decoder.step_ms,
    }


def _options(chance: random.Random) -> DecoderOptions:
    return DecoderOptions(
        chance.random() < 0.3, chance.choice((None, None, "GN", "GP")), chance.choice((None, (0.0, 0.0)))
    )


def decoder(data: bytes) -> None:
    """Nothing raised, bytes add up, cuts never matter, the same items give the same epochs."""
    chance, stream = _split(data)
    options = _options(chance)
    whole = _snapshot([Item(ItemKind.BYTES, stream)], options)
    assert _snapshot([Item(ItemKind.BYTES, piece) for piece in _pieces(stream, chance)], options) == whole
    items, now = [], chance.choice((0, -5, 2**40))
    for piece in _pieces(stream, chance):
        now += chance.choice((0, 1, 50, 400, 1000, 6000, -3000, 90_000_000))
        kind = chance.choice((*[ItemKind.BYTES] * 12, *ItemKind))
        utc = chance.choice((None, now + 1_800_000_000_000, 2**62, -(2**62)))
        items.append(Item(kind, piece, chance.choice((now, now, now, None)), utc))
    assert _snapshot(items, options) == _snapshot(items, options)
    assert list(parse_items(canonical_items(items))) == items


def second_reader(data: bytes) -> None:
    """The second reader leaves out what it cannot read, and cuts do not matter to it."""
    chance, stream = _split(data)
    assert list(second_readings([stream])) == list(second_readings(_pieces(stream, chance)))


def recorded_items(data: bytes) -> None:
    """Raw chunks: items whose canonical bytes are the data again, or a ValueError."""
    try:
        items = list(parse_items(data))
    except ValueError:
        return
    assert canonical_items(items) == data


def _item_seeds() -> list[bytes]:
    kinds = [Item(kind, kind.value.encode() * n, n or None, -n) for n, kind in enumerate(ItemKind)]
    return [canonical_items(kinds), canonical_items([Item(ItemKind.BYTES, one, 5, 6) for one in _sentences()[:2]])]


def _field_seeds() -> list[bytes]:
    texts = (
        "3416.45886159,14603.11111128,-0.5,235960.5,040327",
        "1.0000000000000005,+.5,9999,010170,0000.0",
        "12,5,2031",
    )
    return [text.encode() for text in texts]


TARGETS = [
    Target("framer", "bytes to frames", framer, lambda: _seeds() + kept("framer"), words=_WORDS, most_bytes=1200),
    Target(
        "fields", "single fields", single_fields, lambda: _field_seeds() + kept("fields"), words=(b",",), most_bytes=400
    ),
    Target(
        "decoder",
        "items to epochs",
        decoder,
        lambda: _seeds() + kept("decoder"),
        smoke=600,
        words=_WORDS,
        most_bytes=1200,
    ),
    Target(
        "second_reader",
        "second reader",
        second_reader,
        lambda: _seeds() + kept("second_reader"),
        words=_WORDS,
        most_bytes=1200,
    ),
    Target("items", "raw chunk to items", recorded_items, lambda: _item_seeds() + kept("items")),
]
