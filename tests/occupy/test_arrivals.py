"""Bursts are cut by recorded arrival times alone, and a loss is an item at the place where the bytes are missing."""

from __future__ import annotations

import threading
import time

from hypothesis import given
from hypothesis import strategies as st

from fieldbook.clock import FakeClock, SystemClock
from fieldbook.model.item import Item, ItemKind
from fieldbook.occupy.arrivals import LARGEST_BYTES, LONGEST_MS, Arrivals


def arrive(pieces: list[tuple[int, bytes]], limit: int = 1 << 20) -> tuple[Arrivals, FakeClock]:
    """Arrivals with pieces that came after the given pauses in ms."""
    clock = FakeClock(1_000, 5_000)
    arrivals = Arrivals(clock, limit)
    for pause, data in pieces:
        clock.advance(pause)
        arrivals.add_bytes(data)
    return arrivals, clock


def test_silence_of_20_ms_ends_a_burst() -> None:
    arrivals, clock = arrive([(0, b"a"), (19, b"b"), (20, b"c")])
    clock.advance(20)
    items = arrivals.take(0)
    assert [item.data for item in items] == [b"ab", b"c"]
    assert [item.monotonic_ms for item in items] == [1_000, 1_039], "the time is that of the first byte"
    assert arrivals.waiting_bytes == 0


def test_a_burst_that_never_stops_is_cut_after_250_ms() -> None:
    arrivals, clock = arrive([(0, b"x")] + [(10, b"x")] * 60)
    clock.advance(20)
    items = arrivals.take(0)
    assert [len(item.data) for item in items] == [25, 25, 11]
    assert items[1].monotonic_ms - items[0].monotonic_ms == LONGEST_MS


def test_64_kib_end_a_burst() -> None:
    arrivals, clock = arrive([(0, b"x" * 40_000), (1, b"y" * 40_000)])
    clock.advance(20)
    assert [len(item.data) for item in arrivals.take(0)] == [40_000, 40_000]
    assert LARGEST_BYTES == 65_536


def test_an_open_burst_is_waited_for() -> None:
    arrivals = Arrivals(SystemClock())
    began = time.monotonic()
    later = threading.Timer(0.005, arrivals.add_bytes, (b"b",))
    arrivals.add_bytes(b"a")
    later.start()
    assert [item.data for item in arrivals.take(1)] == [b"ab"]
    assert time.monotonic() - began >= 0.020
    later.join()


def test_events_keep_their_place() -> None:
    clock = FakeClock()
    arrivals = Arrivals(clock)
    arrivals.add_event(ItemKind.OPENED, "udp://h:1")
    arrivals.add_bytes(b"a")
    arrivals.add_event(ItemKind.LOST, "gone")
    arrivals.add_bytes(b"b")
    assert [item.kind.value for item in arrivals.take(0, all_of_it=True)] == ["O", "B", "L", "B"]


def test_a_full_memory_drops_counts_and_says_where() -> None:
    arrivals, clock = arrive([(0, b"x" * 60), (0, b"y" * 60), (0, b"z" * 30)], limit=100)
    assert arrivals.dropping
    assert arrivals.dropped_bytes == 90, "once dropping it goes on until half is free: one hole, not many"
    clock.advance(20)
    assert [item.data for item in arrivals.take(0)] == [b"x" * 60]
    arrivals.add_bytes(b"w" * 10)
    clock.advance(20)
    dropped, kept = arrivals.take(0)
    assert (dropped.kind, dropped.data) == (ItemKind.DROPPED, b"90")
    assert kept.data == b"w" * 10
    assert not arrivals.dropping


def test_a_loss_at_the_very_end_is_told_too() -> None:
    arrivals, _ = arrive([(0, b"x" * 60), (0, b"y" * 60)], limit=100)
    arrivals.end()
    assert [item.kind.value for item in arrivals.take(0)] == ["B", "D"]


@given(st.lists(st.tuples(st.integers(0, 300), st.integers(1, 70_000)), min_size=1, max_size=30))
def test_a_late_writer_cuts_the_same_bursts(pieces: list[tuple[int, int]]) -> None:
    filled = [(pause, bytes([index % 256]) * size) for index, (pause, size) in enumerate(pieces)]
    late, clock = arrive(filled, limit=1 << 30)
    clock.advance(1000)
    at_once: list[Item] = []
    while items := late.take(0):
        at_once += items
    clock = FakeClock(1_000, 5_000)
    prompt = Arrivals(clock, 1 << 30)
    one_by_one: list[Item] = []
    for pause, data in filled:
        if pause >= 20:
            clock.advance(20)
            one_by_one += prompt.take(0)
            clock.advance(pause - 20)
        else:
            clock.advance(pause)
        prompt.add_bytes(data)
    clock.advance(1000)
    while items := prompt.take(0):
        one_by_one += items
    assert one_by_one == at_once
    assert b"".join(item.data for item in at_once) == b"".join(data for _, data in filled)
