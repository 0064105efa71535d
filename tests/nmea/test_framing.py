"""What a frame carries, and where a frame ends."""

from __future__ import annotations

from fieldbook.nmea.framing import Damaged, Frame, Framer

from .examples import EXAMPLES
from .feeding import byte_by_byte, sentence


def test_a_tag_block_names_the_source_however_it_is_cut() -> None:
    for pieces in ([EXAMPLES["A16"][1]], byte_by_byte(EXAMPLES["A16"][1])):
        framer = Framer()
        frames = [frame for piece in pieces for frame in framer.feed(piece)]
        assert [one.tag for one in frames if isinstance(one, Frame)] == ["R1"]


def test_a_tag_block_with_a_wrong_checksum_names_nothing() -> None:
    framer = Framer()
    frames = framer.feed(EXAMPLES["A16"][1].replace(b"*55\\", b"*54\\"))
    assert [one.tag for one in frames if isinstance(one, Frame)] == [None]
    assert framer.counts["bad_tag"] == 1


def test_what_a_frame_tells_about_itself() -> None:
    (frame,) = Framer().feed(EXAMPLES["A11"][1])
    assert isinstance(frame, Frame)
    assert (frame.talker, frame.type, frame.checksum, frame.tag) == ("GN", "GGA", b"7f", None)
    assert frame.fields[:3] == ["GNGGA", "100013.00", "1234.5678901"]
    assert frame.raw + b"\r\n" == EXAMPLES["A11"][1]
    (frame,) = Framer().feed(EXAMPLES["B2"][1])
    assert isinstance(frame, Frame)
    assert (frame.talker, frame.type) == ("PQ", "GSV")


def test_256_bytes_are_a_frame_and_257_are_not() -> None:
    longest = sentence("GNTXT," + "A" * (252 - 6))[:-2]
    assert len(longest) == 256
    framer = Framer()
    assert [type(one) for one in framer.feed(longest)] == [Frame]
    frames = framer.feed(sentence("GNTXT," + "A" * (253 - 6)) + longest)
    assert [type(one) for one in frames] == [Damaged, Frame]
    assert framer.counts["too_long"] == 1


def test_a_reset_drops_half_a_frame_and_says_so() -> None:
    framer = Framer()
    framer.feed(b"$GNGGA,1000")
    assert framer.reset() == [Damaged(b"$GNGGA,1000", "truncated")]
    assert framer.reset() == []
