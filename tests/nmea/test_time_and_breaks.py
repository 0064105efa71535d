"""Days and midnights, timers by recorded arrival, losses of the link."""

from __future__ import annotations

from datetime import date

import pytest

from fieldbook.model.item import Item, ItemKind
from fieldbook.nmea.dates import rollover_weeks
from fieldbook.nmea.decoder import Decoder
from fieldbook.nmea.fields import time_text

from .feeding import decode, decoded, gga, items, rmc, sentence, snapshot

INCOMPLETE, AFTER_BREAK, DATE_JUMP = 1, 2, 4


def event(kind: ItemKind, monotonic_ms: int | None = None) -> Item:
    return Item(kind, b"", monotonic_ms, None)


def test_the_leap_second_is_its_own_instant_and_reads_60() -> None:
    epochs, decoder = decoded(gga("235959.00") + gga("235960.00") + gga("000000.00"))
    assert [(one.day, one.time_ms) for one in epochs] == [(0, 86_399_000), (0, 86_400_000), (1, 0)]
    assert [one.code for one in epochs] == [None, None, None]
    assert time_text(86_400_500) == "23:59:60.500"
    assert time_text(86_399_999) == "23:59:59.999"
    assert decoder.counters.get("bad_time", 0) == 0


def test_a_repeated_second_at_10_hz_is_kept_once() -> None:
    second = [gga(f"000000.{n}0") for n in range(10)]
    epochs, decoder = decoded(gga("235959.90") + b"".join(second) + b"".join(second) + gga("000001.00"))
    assert [one.code for one in epochs] == [None] * 11 + ["duplicate"] * 10 + [None]
    assert decoder.counters["repeated_second"] == 10


def test_midnights_are_counted_back_from_a_late_date() -> None:
    data = gga("230000.00") + gga("010000.00") + gga("230000.00") + gga("000100.00") + rmc("000100.00", "060531")
    epochs, decoder = decoded(data)
    assert [one.day for one in epochs] == [0, 1, 1, 2]
    assert decoder.day0 == date(2031, 5, 4)


def test_midnight_unless_the_date_says_otherwise() -> None:
    data = gga("200000.00") + rmc("200000.00", "040531") + gga("010000.00") + rmc("010000.00", "040531")
    epochs, _ = decoded(data)
    assert [(one.day, one.code) for one in epochs] == [(0, None), (0, "time_back")]


def test_a_date_one_on_over_a_gap_is_no_jump() -> None:
    data = gga("200000.00") + rmc("200000.00", "040531") + gga("150000.00") + rmc("150000.00", "050531")
    epochs, decoder = decoded(data)
    assert [(one.day, one.code, one.flags) for one in epochs] == [(0, None, 0), (1, None, 0)]
    assert "date_jump" not in decoder.counters


def test_a_jump_back_of_the_date_moves_the_day_and_is_flagged() -> None:
    data = gga("100000.00") + rmc("100000.00", "040531") + rmc("095000.00", "010531") + gga("095000.00")
    epochs, decoder = decoded(data)
    assert [(one.day, one.code, one.flags) for one in epochs] == [(0, None, 0), (-3, None, DATE_JUMP)]
    assert decoder.day0 == date(2031, 5, 4)


def test_day_0_is_that_of_the_first_epoch_given_out() -> None:
    data = rmc("235959.00", "040531") + gga("000000.00") + gga("000001.00")
    epochs, decoder = decoded(data)
    assert [one.day for one in epochs] == [0, 0]
    assert decoder.day0 == date(2031, 5, 5)


def test_a_date_before_the_first_fix_is_a_hint_only() -> None:
    wrong, right = (
        sentence(f"GNZDA,{clock}") for clock in ("100000.00,06,01,1980,00,00", "100001.00,04,05,2031,00,00")
    )
    epochs, decoder = decoded(gga("100000.00", quality=0) + wrong + gga("100001.00"))
    assert len(epochs) == 2
    assert decoder.day0 is None
    assert decoder.counters["untrusted_date"] == 1
    _, decoder = decoded(gga("100000.00", quality=0) + wrong + gga("100001.00") + right)
    assert (decoder.day0, decoder.day0_source) == (date(2031, 5, 4), "ZDA")


def test_a_stale_zda_is_not_taken_for_near_a_day_later() -> None:
    zda = sentence("GNZDA,100000.00,04,05,2031,00,00")
    data = gga("100000.00") + zda + gga("220000.00") + gga("090000.00") + gga("100000.50")
    epochs, decoder = decoded(data)
    assert [one.day for one in epochs] == [0, 0, 1, 1]
    assert "date_jump" not in decoder.counters


@pytest.mark.parametrize(
    ("stated", "reference", "weeks"),
    [
        (date(2011, 9, 18), date(2031, 5, 4), 1024),  # the rule's own example: + 7168 d
        (date(2031, 5, 4), date(2031, 5, 4), 0),
        (date(2021, 7, 14), date(2031, 5, 4), 0),  # 512 weeks less a day
        (date(1992, 1, 31), date(2031, 5, 4), 2048),
    ],
)
def test_a_week_rollover_is_suspected_from_the_host_date(stated: date, reference: date, weeks: int) -> None:
    assert rollover_weeks(stated, reference) == weeks


def test_a_rollover_is_suggested_and_never_applied() -> None:
    utc_ms = 1_935_741_600_000  # 2031-05-04
    decoder = Decoder()
    decoder.feed(Item(ItemKind.BYTES, gga("100306.00") + rmc("100306.00", "180911"), 0, utc_ms))
    decoder.finish()
    assert decoder.rollover_weeks_suggested == 1024
    assert decoder.day0 == date(2011, 9, 18)
    assert "rollover_suspected" in decoder.warnings


def test_silence_closes_the_open_epoch_before_the_next_bytes() -> None:
    decoder = Decoder()
    assert decoder.feed(Item(ItemKind.BYTES, gga("100000.00"), 0, 0)) == []
    assert decoder.feed(Item(ItemKind.BYTES, gga("100001.00"), 1000, 1000)) == []
    # 10:00:00 is held until 10:00:01 closes, which the silence before this untimed sentence does
    closed = decoder.feed(Item(ItemKind.BYTES, sentence("GNVTG,,T,,M,0.0,N,0.0,K,A"), 2000, 2000))
    assert [one.time_ms for one in closed] == [36_000_000]
    assert [one.time_ms for one in decoder.finish()] == [36_001_000]


def test_live_and_file_give_the_same_epochs() -> None:
    bursts = []
    for n in range(30):
        clock = f"1000{n:02d}.00"
        bursts.append(gga(clock) + rmc(clock, "040531"))
        bursts.append(
            sentence(f"GNGST,{clock},0.85,,,,0.011,0.012,0.025") + sentence("GNGSA,A,3,02,05,,,,,,,,,,,1.2,0.7,0.9,1")
        )
    live = decode(items(bursts, monotonic_ms=0, step_ms=500))[0]
    file = decode(items([b"".join(bursts)]))[0]
    for epoch in live:
        assert epoch.received_monotonic_ms is not None
        epoch.received_monotonic_ms = epoch.received_utc_ms = None
    assert live == file


def test_an_epoch_carries_the_arrival_of_its_first_byte() -> None:
    line = gga("100000.00")
    decoder = Decoder()
    stream = [Item(ItemKind.BYTES, line[:20], 100, 5100), Item(ItemKind.BYTES, line[20:] + gga("100001.00"), 140, 5140)]
    epochs = [epoch for item in stream for epoch in decoder.feed(item)] + decoder.finish()
    assert [(one.received_monotonic_ms, one.received_utc_ms) for one in epochs] == [(100, 5100), (140, 5140)]


def test_a_frame_that_does_not_end_in_five_seconds_is_dropped() -> None:
    line = gga("100006.00")
    decoder = Decoder()
    decoder.feed(Item(ItemKind.BYTES, line[:40], 0, 0))
    assert decoder.feed(Item(ItemKind.BYTES, line[40:], 5001, 5001)) + decoder.finish() == []
    assert decoder.counters["truncated"] == 1


def test_no_valid_sentence_for_five_seconds_is_said() -> None:
    decoder = Decoder()
    decoder.feed(Item(ItemKind.BYTES, b"\xf8\x00\x80", 0, 0))
    assert decoder.warnings == []
    decoder.feed(Item(ItemKind.BYTES, b"\xf8\xe6", 5100, 5100))
    assert decoder.warnings == ["no_valid_nmea"]
    decoder.feed(Item(ItemKind.BYTES, gga("100006.00"), 5200, 5200))
    assert decoder.warnings == []


@pytest.mark.parametrize(
    ("kind", "incomplete"),
    [
        (ItemKind.LOST, True),
        (ItemKind.STARTED, True),
        (ItemKind.DROPPED, True),
        (ItemKind.REOPENED, False),
        (ItemKind.END, False),
    ],
)
def test_a_break_joins_no_halves(kind: ItemKind, incomplete: bool) -> None:
    line = gga("100001.00")
    stream = [
        *items([gga("100000.00") + line[:50]]),
        event(kind),
        *items([line[50:] + gga("100002.00") + gga("100003.00")]),
    ]
    epochs, decoder = decode(stream)
    broken = AFTER_BREAK if incomplete else 0
    assert [(one.time_ms, one.flags) for one in epochs] == [
        (36_000_000, INCOMPLETE if incomplete else 0),
        (36_002_000, broken),
        (36_003_000, 0),
    ]
    assert decoder.counters["truncated"] == 1


def test_opening_a_link_is_no_break() -> None:
    epochs, _ = decode([event(ItemKind.STARTED), event(ItemKind.OPENED), *items([gga("100000.00")])])
    assert [one.flags for one in epochs] == [0]


def test_a_rebuild_is_identical() -> None:
    data = b"".join(gga(f"1000{n:02d}.00") + rmc(f"1000{n:02d}.00", "040531") for n in range(40))
    stream = [event(ItemKind.OPENED, 0), *items([data[:1000], data[1000:3000]], monotonic_ms=10, step_ms=900)]
    stream += [event(ItemKind.LOST, 3000), event(ItemKind.REOPENED, 4000), *items([data[3000:]], monotonic_ms=5000)]
    assert snapshot(decode(stream)) == snapshot(decode(list(stream)))


def test_sentences_without_time_are_given_out_and_not_piled_up() -> None:
    untimed = sentence("GNGGA,,,,,,0,00,99.99,,,,,,")
    decoder = Decoder()
    given = decoder.feed(Item(ItemKind.BYTES, gga("100000.00") + 1000 * untimed))
    assert len(given) > 980
    assert {one.code for one in given[1:]} == {"no_time"}
    assert len(given + decoder.finish()) == 1001


def test_a_clock_that_stands_still_is_given_out_and_not_piled_up() -> None:
    decoder = Decoder()
    given = decoder.feed(Item(ItemKind.BYTES, 1000 * gga("100000.00")))
    assert len(given) > 800
    given += decoder.finish()
    assert [one.code for one in given] == [None] + ["duplicate"] * 999


def test_two_receivers_that_alternate_are_noticed() -> None:
    other = "1234.6000000,S,02345.6789012,W"
    data = b"".join(gga(f"1000{n:02d}.00") + gga(f"1000{n:02d}.50", place=other, talker="GP") for n in range(5))
    assert "mixed_receivers" in decoded(data)[1].warnings


def test_gaps_are_counted_with_their_length() -> None:
    clocks = ["100000.00", "100001.00", "100002.00", "100007.00", "100008.00"]
    _, decoder = decoded(b"".join(gga(clock) for clock in clocks))
    assert (decoder.counters["gaps"], decoder.counters["gap_ms"]) == (1, 4000)
