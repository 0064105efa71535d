"""Alarms: they hold, they are over, they stay until somebody has seen them, and both moments are in the book."""

from __future__ import annotations

import asyncio
from dataclasses import replace
from pathlib import Path

import pytest

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.model.live import LiveView
from fieldbook.screens.alarm_log import SETTLE_MS, AlarmLog
from fieldbook.screens.big import big_rows
from fieldbook.screens.bridge import Bridge

from .fakes import NOW_MS, FakeBridge, recorder
from .waiting import desk, opened, screen_text, see, wait_until


def picture(**changes: object) -> LiveView:
    bridge = FakeBridge(recording=True)
    assert bridge.reduction is not None
    assert bridge.reduction.leave is not None
    bridge.reduction = replace(bridge.reduction, leave=replace(bridge.reduction.leave, verdict="not yet"))
    for name, value in changes.items():
        setattr(bridge, name, value)
    view = bridge.snapshot()
    assert view.occupation is not None
    session = view.occupation.session
    wanted = replace(session.requirement, max_correction_age_s=10.0)
    return replace(view, occupation=replace(view.occupation, session=replace(session, requirement=wanted)))


def codes(log: AlarmLog) -> list[str]:
    return [alarm.code for alarm in log.unseen()]


def test_silence_is_told_at_once_and_stays_after_it_is_over() -> None:
    log = AlarmLog()
    assert log.look(picture(), 0) == []
    began = log.look(picture(silence_s=7.4), 1_000)
    assert [(alarm.code, alarm.text, alarm.holds) for alarm in began] == [("no_data", "NO DATA 7 s", True)]
    assert log.look(picture(silence_s=9.4), 3_000) == [], "one alarm begins once"
    assert log.unseen()[0].text == "NO DATA 9 s"
    assert log.look(picture(), 4_000) == []
    assert [(alarm.code, alarm.holds, alarm.since_ms) for alarm in log.unseen()] == [("no_data", False, 1_000)]
    assert [alarm.code for alarm in log.acknowledge()] == ["no_data"]
    assert codes(log) == []


@pytest.mark.parametrize(
    ("wrong", "code"), [(recorder(quality=5), "fix_lost"), (recorder(quality=4, age_s=11.0), "correction_age")]
)
def test_what_flickers_is_no_alarm(wrong: object, code: str) -> None:
    log = AlarmLog()
    assert log.look(picture(recorder=wrong), 0) == []
    assert log.look(picture(), 1_000) == []
    assert log.look(picture(recorder=wrong), 2_000) == []
    assert log.look(picture(recorder=wrong), 2_000 + SETTLE_MS - 1) == []
    began = log.look(picture(recorder=wrong), 2_000 + SETTLE_MS)
    assert [(alarm.code, alarm.since_ms) for alarm in began] == [(code, 2_000)]


def test_seen_while_it_holds_is_not_told_again_until_it_comes_back() -> None:
    log = AlarmLog()
    log.look(picture(alive=False), 0)
    assert codes(log) == ["recorder_gone"]
    log.acknowledge()
    assert log.look(picture(alive=False), 1_000) == []
    assert codes(log) == []
    log.look(picture(), 2_000)
    assert [alarm.code for alarm in log.look(picture(alive=False), 3_000)] == ["recorder_gone"]


def test_the_requirement_reached_is_good_news_and_comes_last() -> None:
    log, bridge = AlarmLog(), FakeBridge(recording=True)
    assert bridge.reduction is not None
    assert bridge.reduction.leave is not None
    done = replace(bridge.reduction, leave=replace(bridge.reduction.leave, verdict="good to leave"))
    assert log.look(picture(reduction=done), 0) == []
    assert [alarm.good for alarm in log.look(picture(reduction=done), SETTLE_MS)] == [True]
    log.look(picture(reduction=done, silence_s=8.0), SETTLE_MS + 1)
    assert codes(log) == ["no_data", "requirement_reached"]


def test_the_recorders_own_are_not_entered_twice() -> None:
    log = AlarmLog()
    began = log.look(picture(recorder=recorder(alarms=["disk_low"])), 0)
    assert [(alarm.code, alarm.recorded) for alarm in began] == [("disk_low", True)]


def test_on_the_screen_it_stays_until_space_and_both_are_entries() -> None:
    async def go() -> None:
        bridge = FakeBridge(recording=True)
        async with opened(bridge) as pilot:
            await see(pilot, "RTK fixed")
            bridge.silence_s = 7.4
            await see(pilot, "NO DATA 7 s")
            await wait_until(pilot, lambda: ("alarm", (1, "no_data", False)) in bridge.calls, "the entry")
            bridge.silence_s = 0.4
            await see(pilot, "was NO DATA 7 s", "RTK fixed", "Space seen")
            await pilot.press("b")
            await see(pilot, "was NO DATA")
            await pilot.press("space")
            await wait_until(pilot, lambda: ("alarm", (1, "no_data", True)) in bridge.calls, "the acknowledgement")
            await pilot.press("b")
            await see(pilot, "RTK fixed")
            assert "was NO DATA" not in screen_text(pilot)
            assert desk(pilot).alarms.unseen() == []

    asyncio.run(go())


def test_the_distance_view_has_room_for_what_was() -> None:
    log = AlarmLog()
    log.look(picture(silence_s=9.0), NOW_MS)
    log.look(picture(), NOW_MS + 5_000)
    text = "".join(part for part, _ in big_rows(picture(), 80, 24, log.unseen())[-1])
    assert "was NO DATA 9 s" in text


def test_two_screens_enter_an_alarm_once(tmp_path: Path) -> None:
    path = tmp_path / "kestrel.book"
    Book.create(path, clock=SystemClock(), observer="R. Kell").close()
    first, second = Bridge(path, observer="R. Kell"), Bridge(path, observer="T. Oduya")
    assert first.add_alarm(None, "no_data", "NO DATA 7 s", acknowledged=False) is not None
    assert second.add_alarm(None, "no_data", "NO DATA 8 s", acknowledged=False) is None
    seen = second.add_alarm(None, "no_data", "NO DATA 8 s", acknowledged=True)
    assert seen is not None
    assert (seen.observer, seen.body["acknowledged"]) == ("T. Oduya", True)
    again = first.add_alarm(None, "no_data", "NO DATA 6 s", acknowledged=False)
    assert again is not None, "it came back"
    assert again.observer == "screen", "a program saw it, not a person"
