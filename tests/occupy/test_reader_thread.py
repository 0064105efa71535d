"""The reader's states over a scripted link: lost, back-off, open again, stale, silent TCP, end."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import pytest

from fieldbook.clock import FakeClock
from fieldbook.errors import LinkError
from fieldbook.links.base import EndOfLink, LinkLost
from fieldbook.model.item import ItemKind
from fieldbook.occupy import reader_thread
from fieldbook.occupy.arrivals import Arrivals
from fieldbook.occupy.reader_thread import ReaderThread

Step = bytes | BaseException | int


@dataclass
class Address:
    kind: str = "serial"
    text: str = "serial:///dev/x?baud=9600"


class ScriptedLink:
    """Plays steps: bytes are read, an exception is raised, a number lets so many ms pass without a byte."""

    def __init__(self, clock: FakeClock, steps: list[Step], open_errors: int = 0) -> None:
        self._clock, self._steps = clock, list(steps)
        self.open_errors = open_errors
        self.opened = self.closed = 0
        self.states: list[str] = []
        self.watch: Callable[[], str] = str

    def open(self) -> None:
        if self.open_errors:
            self.open_errors -= 1
            raise LinkError("not there", "plug it in")
        self.opened += 1

    def read(self, timeout_s: float) -> bytes:
        self.states.append(self.watch())
        if not self._steps:
            raise EndOfLink
        step = self._steps.pop(0)
        if isinstance(step, BaseException):
            raise step
        if isinstance(step, int):
            self._clock.advance(step)
            return b""
        return step

    def close(self) -> None:
        self.closed += 1


def play(
    monkeypatch: pytest.MonkeyPatch, steps: list[Step], *, kind: str = "serial", open_errors: int = 0
) -> tuple[Arrivals, ReaderThread, ScriptedLink]:
    monkeypatch.setattr(reader_thread.BackOff, "next_delay_s", lambda _: 0.001)
    clock = FakeClock(0, 1_000_000)
    arrivals = Arrivals(clock)
    link = ScriptedLink(clock, steps, open_errors)
    reader = ReaderThread(link, Address(kind), arrivals, clock)
    link.watch = lambda: reader.link_state
    reader.start()
    reader.join(10)
    assert not reader.is_alive()
    return arrivals, reader, link


def kinds(arrivals: Arrivals) -> str:
    return "".join(item.kind.value for item in arrivals.take(0, all_of_it=True))


@pytest.mark.parametrize("loss", [LinkLost("pulled"), OSError(5, "I/O error"), TypeError("fd is None")])
def test_a_lost_link_is_closed_opened_again_and_both_are_items(monkeypatch, loss) -> None:
    arrivals, reader, link = play(monkeypatch, [b"a", loss, b"b"], open_errors=3)
    items = arrivals.take(0, all_of_it=True)
    assert [item.kind for item in items] == [ItemKind.BYTES, ItemKind.LOST, ItemKind.REOPENED, ItemKind.BYTES]
    assert getattr(loss, "reason", str(loss)) in items[1].data.decode()
    assert items[2].data.decode() == Address.text
    assert link.opened == 1
    assert link.closed == 2, "once at the loss, once at the end"
    assert arrivals.ended
    assert reader.link_state == "ended"


def test_five_seconds_without_a_byte_are_stale_until_the_next_byte(monkeypatch) -> None:
    arrivals, _, link = play(monkeypatch, [b"a", 4_900, 200, 60_000, b"b", 100])
    assert link.states == ["open", "open", "open", "stale", "stale", "open", "open"]
    assert kinds(arrivals) == "BB", "stale is a state, not an item"


def test_silent_tcp_is_connected_again_after_15_s(monkeypatch) -> None:
    arrivals, _, link = play(monkeypatch, [b"a", 14_000, 1_100, b"b"], kind="tcp")
    assert kinds(arrivals) == "BLRB"
    assert link.opened == 1


def test_a_silent_serial_port_is_never_given_up(monkeypatch) -> None:
    arrivals, _, link = play(monkeypatch, [b"a", 3_600_000, b"b"])
    assert kinds(arrivals) == "BB"
    assert link.opened == 0


def test_stopping_while_the_link_is_away(monkeypatch) -> None:
    clock = FakeClock()
    arrivals = Arrivals(clock)
    link = ScriptedLink(clock, [LinkLost("pulled")], open_errors=10**9)
    reader = ReaderThread(link, Address(), arrivals, clock)
    reader.start()
    assert [item.kind for item in arrivals.take(5)] == [ItemKind.LOST]
    reader.stop()
    assert not reader.is_alive()
    assert reader.link_state == "lost"
