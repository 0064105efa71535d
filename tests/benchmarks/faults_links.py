"""Ports unplugged, replaced, at the wrong speed or silent; connections dropped; the computer suspended.

What a link does not deliver cannot be recorded: the count is of what had been acknowledged. Over TCP the network holds what a
suspended recorder does not read, so there no epoch may be missing at all.
"""

from __future__ import annotations

import contextlib
import random
import signal
import socket
import struct
import threading
import time

from faults_rig import RATE_HZ, Row, Scene, holes, scene, until

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.links.sim_scenarios import SCENARIOS
from fieldbook.links.simulate import Receiver


class TcpReceiver:
    """A receiver behind a TCP port of this computer, for one client at a time."""

    def __init__(self) -> None:
        self._listener = self._listening(0)
        self.port = self._listener.getsockname()[1]
        self.link = f"tcp://127.0.0.1:{self.port}"
        self._client: socket.socket | None = None
        self._halt = threading.Event()
        self._thread = threading.Thread(target=self._serve, daemon=True)
        self._thread.start()

    @staticmethod
    def _listening(port: int) -> socket.socket:
        made = socket.socket()
        made.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        made.bind(("127.0.0.1", port))
        made.listen()
        made.settimeout(0.0)
        return made

    def _serve(self) -> None:
        start_ms = time.time_ns() // 10**9 * 1000
        receiver = Receiver(SCENARIOS["rtk"], seed=7, first_utc_ms=start_ms, rate_hz=RATE_HZ)
        due = time.monotonic()
        while not self._halt.is_set():
            with contextlib.suppress(OSError):
                accepted, _ = self._listener.accept()
                accepted.settimeout(5.0)
                self._client = accepted
            data, client = receiver.next_burst().data, self._client
            if client is not None:
                with contextlib.suppress(OSError):
                    client.sendall(data)
            due += 1 / RATE_HZ
            self._halt.wait(max(0.0, due - time.monotonic()))

    def drop(self) -> None:
        """Reset the connection, and refuse new ones."""
        self._listener.close()
        client, self._client = self._client, None
        if client is not None:
            client.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, struct.pack("ii", 1, 0))
            client.close()

    def back(self) -> None:
        """Accept connections again."""
        self._listener = self._listening(self.port)

    def close(self) -> None:
        """Switch it off."""
        self._halt.set()
        self._thread.join()
        self._listener.close()
        if self._client is not None:
            self._client.close()


@contextlib.contextmanager
def _tcp() -> contextlib.AbstractContextManager[TcpReceiver]:
    made = TcpReceiver()
    try:
        yield made
    finally:
        made.close()


def unplugged(times: int) -> Row:
    """The cable is pulled and put back."""
    return _pulled(Row("port unplugged and plugged in again"), times, lambda _number: 7)


def replaced(times: int) -> Row:
    """Another receiver on the same port."""
    row = _pulled(Row("port unplugged, another receiver plugged in"), times, lambda number: 100 + number)
    row.note += "; that it is another receiver is not noticed while it sends the same sentences"
    return row


def _pulled(row: Row, times: int, seed: object) -> Row:
    luck = random.Random(47)
    with scene() as made:
        recorder = made.observe()
        made.more(5)
        while row.times < times:
            made.wire.pull()
            time.sleep(luck.uniform(0.2, 2.5))
            made.look()
            made.wire.plug_in(seed=seed(row.times))
            row.recover_s.append(made.more(1))
            made.more(3)
            row.times += 1
        _still_one(row, made, recorder)
        gaps = _gaps(made)
        row.expect(gaps == times, f"{gaps} entries `gap` for {times} gaps")
        row.note = f"{gaps} entries `gap`"
    return row


def _still_one(row: Row, made: Scene, recorder: object) -> None:
    row.expect(recorder.poll() is None, "the recorder ended")
    made.look()
    made.judge(row)
    row.acknowledged = made.count()
    row.expect(list(made.seen) == [1], "more than one occupation")


def _gaps(made: Scene) -> int:
    with Book.open(made.book, clock=SystemClock()) as book:
        return sum(entry.kind == "gap" for entry in book.entries())


def tcp_dropped(times: int) -> Row:
    """A TCP connection is reset and refused for a while."""
    row, luck = Row("TCP connection reset, then refused for a while"), random.Random(48)
    with _tcp() as receiver, scene(wire=False) as made:
        recorder = made.observe(link=receiver.link)
        made.more(5)
        while row.times < times:
            receiver.drop()
            time.sleep(luck.uniform(0.2, 2.0))
            made.look()
            receiver.back()
            row.recover_s.append(made.more(1))
            made.more(3)
            row.times += 1
        _still_one(row, made, recorder)
        row.expect(_gaps(made) == times, "not one entry `gap` for each")
        row.note = f"{_gaps(made)} entries `gap`"
    return row


def noise(times: int) -> Row:
    """Wrong speed, from the beginning and in between: bytes that make no sense, then good ones again."""
    row = Row("wrong speed (noise), from the start and in between")
    while row.times < times:
        with scene() as made:
            made.wire.mode = "noise"
            recorder = made.observe()
            until(lambda: _alarmed(made, "no_valid_nmea"), 30, "the alarm")
            for _ in range(2):
                made.wire.mode = "good"
                row.recover_s.append(made.more(1))
                made.more(5)
                made.wire.mode = "noise"
                time.sleep(1.5)
            before, row.acknowledged = row.acknowledged, 0
            _still_one(row, made, recorder)
            row.acknowledged += before
        row.times += 1
    row.note = "alarm `no_valid_nmea` raised"
    return row


def _alarmed(made: Scene, code: str) -> bool:
    if not made.book.exists():
        return False
    with Book.open(made.book, clock=SystemClock()) as book:
        return any(entry.kind == "alarm" and entry.body["code"] == code for entry in book.entries())


def silence(times: int, *, seconds: float) -> Row:
    """The port stays, the receiver says nothing."""
    row = Row(f"silence of {seconds:.0f} s on an open port")
    with scene() as made:
        recorder = made.observe()
        made.more(5)
        while row.times < times:
            made.wire.mode = "silent"
            time.sleep(seconds)
            made.look()
            row.expect(link_state(made) == "stale", f"the link is said to be {link_state(made)}")
            made.wire.mode = "good"
            row.recover_s.append(made.more(1))
            row.times += 1
        _still_one(row, made, recorder)
        row.note = "link state stale"
    return row


def link_state(made: Scene) -> str:
    """What the recorder says of its link."""
    with Book.open(made.book, clock=SystemClock()) as book:
        said = book.recorder_state()
        return "" if said is None else said.link_state


def suspended(times: int) -> Row:
    """SIGSTOP, some seconds, SIGCONT: by turns on a port, which loses what nobody reads, and over TCP, which does not."""
    row, luck = Row("recorder suspended (SIGSTOP, SIGCONT), port and TCP"), random.Random(49)
    with _tcp() as receiver, contextlib.ExitStack() as stack:
        scenes = [stack.enter_context(scene()), stack.enter_context(scene(wire=False))]
        links = [scenes[0].wire.link, receiver.link]
        recorders = [made.observe(link=link) for made, link in zip(scenes, links, strict=True)]
        for made in scenes:
            made.more(5)
        while row.times < times:
            made, recorder = scenes[row.times % 2], recorders[row.times % 2]
            recorder.send_signal(signal.SIGSTOP)
            made.look()
            time.sleep(luck.uniform(0.5, 4.0))
            recorder.send_signal(signal.SIGCONT)
            row.recover_s.append(made.more(1))
            row.times += 1
        acknowledged = 0
        for made, recorder in zip(scenes, recorders, strict=True):
            _still_one(row, made, recorder)
            acknowledged += row.acknowledged
        row.acknowledged = acknowledged
        missing = holes(scenes[1].seen[1])
        row.expect(missing == 0, f"{missing} times epochs are missing over TCP")
        row.note = "over TCP no epoch is missing at all"
    return row
