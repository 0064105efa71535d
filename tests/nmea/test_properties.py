"""What must hold for any bytes: nothing raised, everything accounted for, cuts never matter, memory bounded."""

from __future__ import annotations

import random

from hypothesis import given, settings
from hypothesis import strategies as st

from fieldbook.model.item import Item, ItemKind
from fieldbook.nmea.decoder import Decoder, DecoderOptions
from fieldbook.nmea.framing import Damaged, Framer

from .examples import EXAMPLES
from .feeding import balance, decoded, random_pieces, snapshot

LINES = [line for _, data in EXAMPLES.values() for line in data.splitlines(keepends=True)]
FRAME_KINDS = ("good", "bad_checksum", "no_checksum", "bad_bytes", "truncated", "too_long")

mutated = st.lists(
    st.one_of(
        st.sampled_from(LINES),
        st.tuples(st.sampled_from(LINES), st.integers(0, 200), st.binary(max_size=3)).map(
            lambda t: t[0][: t[1]] + t[2] + t[0][t[1] + 1 :]
        ),
        st.tuples(st.sampled_from(LINES), st.integers(0, 100)).map(lambda t: t[0][: t[1]]),
        st.binary(max_size=300),
        st.text(alphabet="$!*\\,0123456789ABGNs:\r\n", max_size=80).map(str.encode),
    ),
    max_size=12,
).map(b"".join)


@settings(max_examples=200, deadline=None)
@given(mutated, st.integers(0, 1000), st.booleans())
def test_where_it_is_cut_never_matters_and_all_bytes_add_up(data: bytes, seed: int, lenient: bool) -> None:
    options = DecoderOptions(accept_without_checksum=lenient)
    one = snapshot(decoded(data, options))
    assert snapshot(decoded(data, options, random_pieces(seed))) == one
    assert balance(one["counters"]) == 0
    assert one["counters"]["received_bytes"] == len(data)


@settings(max_examples=200, deadline=None)
@given(mutated)
def test_frames_are_counted_once_each_and_their_bytes_are_theirs(data: bytes) -> None:
    framer = Framer()
    frames = framer.feed(data) + framer.finish()
    assert sum(framer.counts[kind] for kind in FRAME_KINDS) == len(frames)
    whole = [one for one in frames if not isinstance(one, Damaged) and one.checksum]
    assert framer.good == len(whole)
    assert framer.good_bytes == sum(len(one.raw) for one in whole)
    rest = [one for one in frames if isinstance(one, Damaged) or not one.checksum]
    assert framer.damaged_bytes == sum(len(one.raw) for one in rest)
    position = 0
    for one in frames:  # in order, and really in the data
        position = data.index(one.raw, position) + len(one.raw)
        assert len(one.raw) <= 256


@settings(max_examples=150, deadline=None)
@given(mutated)
def test_every_heard_position_sentence_has_exactly_one_epoch(data: bytes) -> None:
    epochs, decoder = decoded(data)
    heard = sum(count for name, count in decoder.sentences.items() if name[2:] in ("GGA", "GNS") and name[0] != "!")
    given_out = [one for one in epochs if one.source != "RMC"]
    assert len(given_out) == heard - decoder.counters.get("gns_merged", 0)
    assert [one.number for one in epochs] == list(range(1, len(epochs) + 1))
    if heard:
        assert len(given_out) == len(epochs)


@settings(max_examples=60, deadline=None)
@given(
    st.lists(st.tuples(st.sampled_from(list(ItemKind)), mutated, st.none() | st.integers(-(10**9), 10**12)), max_size=8)
)
def test_no_sequence_of_items_raises(parts: list[tuple[ItemKind, bytes, int | None]]) -> None:
    stream = [Item(kind, data, when, when) for kind, data, when in parts]
    results = []
    for _ in range(2):
        decoder = Decoder()
        epochs = [epoch for item in stream for epoch in decoder.feed(item)] + decoder.finish()
        results.append(snapshot((epochs, decoder)))
        assert balance(decoder.counters) == 0
    assert results[0] == results[1]


def test_a_megabyte_of_random_bytes() -> None:
    chance = random.Random(20310504)
    decoder = Decoder(DecoderOptions(accept_without_checksum=True))
    size = 0
    for _ in range(256):
        piece = chance.randbytes(4096)
        size += len(piece)
        decoder.feed(Item(ItemKind.BYTES, piece))
    decoder.finish()
    assert decoder.counters["received_bytes"] == size == 1024 * 1024
    assert balance(decoder.counters) == 0
    assert len(decoder.sentences) <= 201


def test_two_megabytes_of_mutated_sentences() -> None:
    chance = random.Random(7)
    good = b"".join(LINES)
    data = bytearray(good * (2_000_000 // len(good)))
    for _ in range(len(data) // 200):
        data[chance.randrange(len(data))] = chance.randrange(256)
    _, decoder = decoded(bytes(data), cut=random_pieces(1))
    assert balance(decoder.counters) == 0
    assert decoder.counters["good"] > decoder.counters["bad_checksum"] > 0


def test_one_endless_frame_keeps_memory_bounded() -> None:
    for byte in (b"A", b"$", b"\\", b"*", b"\x00"):
        framer = Framer()
        framer.feed(b"$GNGGA,")
        for _ in range(50):
            framer.feed(byte * 10_000)
        assert framer.pending_bytes <= 256


def test_the_number_of_types_kept_is_bounded() -> None:
    from .feeding import sentence

    decoder = Decoder()
    for n in range(2000):
        decoder.feed(Item(ItemKind.BYTES, sentence(f"Q{n:04d},1")))
    assert len(decoder.sentences) <= 201
    assert sum(decoder.sentences.values()) == 2000
