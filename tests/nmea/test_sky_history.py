"""One picture of the sky a minute from the received bytes: those used, where they stood, whatever the pieces."""

from __future__ import annotations

import gzip
from functools import reduce
from operator import xor
from pathlib import Path

import pytest

from fieldbook.model.sky import Direction
from fieldbook.nmea.decoder import Decoder, DecoderOptions
from fieldbook.nmea.sky_history import sky_history

SAMPLE = Path(__file__).parents[2] / "sample_sessions" / "kestrel-ridge-2" / "receiver.nmea.gz"


def sentence(body: str) -> bytes:
    return f"${body}*{reduce(xor, body.encode()):02X}\r\n".encode()


def gga(hhmmss: str) -> bytes:
    return sentence(f"GPGGA,{hhmmss}.00,3416.458,S,14603.111,E,4,08,0.9,220.0,M,13.4,M,1.0,0042")


def gsv(*satellites: str) -> bytes:
    return sentence(f"GPGSV,1,1,{len(satellites):02d}," + ",".join(satellites))


def test_used_satellites_minute_by_minute() -> None:
    first = gsv("02,45,090,44", "05,20,270,40", "09,70,010,50")
    second = gsv("02,46,091,44", "05,19,271,40")
    gsa = sentence("GPGSA,A,3,02,05,,,,,,,,,,,1.5,0.9,1.2")
    log = gga("011000") + first + gsa + gga("011001") + first + gsa + gga("011100") + second + gsa + gga("011101")
    expected = [
        (Direction("GPS", 45, 90), Direction("GPS", 20, 270)),
        (Direction("GPS", 46, 91), Direction("GPS", 19, 271)),
    ]
    assert sky_history([log]) == expected
    assert sky_history(log[at : at + 7] for at in range(0, len(log), 7)) == expected


def test_without_gsa_all_in_view() -> None:
    log = gga("011000") + gsv("02,45,090,44", "05,20,270,", "09,-2,010,50", "11,,,30") + gga("011001")
    assert sky_history([log]) == [(Direction("GPS", 45, 90), Direction("GPS", 20, 270))]


def test_damaged_sentences_do_not_count() -> None:
    bad = gsv("02,45,090,44").replace(b",45,", b",46,")
    assert sky_history([gga("011000") + bad + gga("011001")]) == []
    assert sky_history([b"\x00\xff noise $GP", b""]) == []


def test_the_last_picture_is_what_the_decoder_shows() -> None:
    if not SAMPLE.exists():
        pytest.fail("the sample is not there")
    data = gzip.decompress(SAMPLE.read_bytes())
    from fieldbook.model.item import Item, ItemKind

    decoder = Decoder(DecoderOptions())
    decoder.feed(Item(ItemKind.BYTES, data=data))
    decoder.finish()
    shown = {
        (item.system, item.elevation_deg, item.azimuth_deg % 360)
        for item in decoder.sky
        if item.used and item.elevation_deg and item.azimuth_deg is not None
    }
    pictures = sky_history([data])
    assert {(item.system, item.elevation_deg, item.azimuth_deg) for item in pictures[-1]} == shown
    assert len(pictures) >= 14
