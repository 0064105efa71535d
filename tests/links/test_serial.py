"""Serial ports on pseudo-terminals: bytes before a loss, loss, re-plug, exclusive use, and clear errors."""

from __future__ import annotations

import contextlib
import errno
import os
import threading
import time
import tty
from collections.abc import Iterator
from pathlib import Path

import pytest
import serial
from receiver_pty import PtyReceiver

from fieldbook.links import BackOff, Link, LinkError, LinkLost, list_ports, make_link, open_link, parse_link, reopen
from fieldbook.links import ports as ports_module
from fieldbook.links import serial_port as serial_module
from fieldbook.links.ports import PortIdentity, PortRow
from fieldbook.links.serial_port import SerialLink, open_error

pytestmark = pytest.mark.skipif(not hasattr(os, "openpty"), reason="not run: no pseudo-terminals on this system")


class Cable:
    """Both ends of a pseudo-terminal behind a path that stays."""

    def __init__(self, path: Path) -> None:
        self.path = path
        self.plug()

    def plug(self) -> None:
        self.writing, self.reading = os.openpty()
        tty.setraw(self.reading)
        self.path.unlink(missing_ok=True)
        self.path.symlink_to(os.ttyname(self.reading))

    def pull(self) -> None:
        for number in (self.writing, self.reading):
            with contextlib.suppress(OSError):
                os.close(number)


@pytest.fixture
def cable(tmp_path) -> Iterator[Cable]:
    made = Cable(tmp_path / "port")
    yield made
    made.pull()


def link_to(path: Path) -> SerialLink:
    link = make_link(parse_link(f"serial://{path}?baud=1234567"))
    assert isinstance(link, SerialLink)
    return link


def read_until_lost(link: Link) -> tuple[bytes, LinkLost]:
    received = b""
    for _ in range(40):
        try:
            received += link.read(0.25)
        except LinkLost as loss:
            return received, loss
    raise AssertionError("the link was not lost")


def test_bytes_come_as_sent_and_silence_is_nothing(cable: Cable) -> None:
    link = link_to(cable.path)
    link.open()
    link.open()
    assert link.read(0.02) == b""
    os.write(cable.writing, bytes(range(256)))
    received = b""
    while len(received) < 256:
        received += link.read(0.25)
    assert received == bytes(range(256))  # raw: no echo, no translation of line ends
    link.close()
    link.close()


def test_bytes_before_the_loss_are_handed_over_then_the_loss(cable: Cable) -> None:
    link = link_to(cable.path)
    link.open()
    os.write(cable.writing, b"x" * 50)
    time.sleep(0.05)
    received = link.read(0.25)
    cable.pull()
    rest, loss = read_until_lost(link)
    assert received + rest == b"x" * 50
    assert "unplugged" in loss.reason
    assert str(loss) == loss.reason
    link.close()
    with pytest.raises(LinkLost):
        link.read(0.25)


@pytest.mark.parametrize("failure", [OSError(5, "Input/output error"), TypeError("fd is None")])
def test_a_loss_between_first_byte_and_the_rest_keeps_the_byte(failure: Exception) -> None:
    class Dying:
        timeout = 0.25

        def read(self, count: int) -> bytes:
            return b"$"

        @property
        def in_waiting(self) -> int:
            raise failure

        def close(self) -> None:
            raise OSError(5, "Input/output error")

    link = link_to(Path("/dev/none"))
    link._port = Dying()  # type: ignore[assignment]
    assert link.read(0.25) == b"$"
    with pytest.raises(LinkLost):
        link.read(0.25)
    link.close()  # a device that is gone refuses to close: no matter


def test_replug_behind_the_same_path(cable: Cable) -> None:
    link = link_to(cable.path)
    link.open()
    cable.pull()
    read_until_lost(link)
    failures: list[str] = []
    cable.path.unlink()
    later = threading.Timer(0.5, cable.plug)
    later.start()
    assert reopen(link, threading.Event(), BackOff(seed=1), lambda error: failures.append(error.code))
    later.join()
    assert failures
    assert set(failures) == {"missing"}
    os.write(cable.writing, b"back")
    assert link.read(1.0) == b"back"
    link.close()


def test_reopening_stops_when_told(tmp_path) -> None:
    stop = threading.Event()
    threading.Timer(0.2, stop.set).start()
    begun = time.monotonic()
    assert not reopen(link_to(tmp_path / "nowhere"), stop)
    assert time.monotonic() - begun < 2.0


def test_delays_double_up_to_five_seconds_with_jitter() -> None:
    waits = BackOff(seed=3)
    delays = [waits.next_delay_s() for _ in range(9)]
    for delay, nominal in zip(delays, [0.1, 0.2, 0.4, 0.8, 1.6, 3.2, 5.0, 5.0, 5.0], strict=True):
        assert 0.8 * nominal <= delay <= min(1.2 * nominal, 5.0)
    assert len({round(delay / nominal, 3) for delay, nominal in zip(delays, [0.1, 0.2, 0.4], strict=False)}) == 3
    waits.reset()
    assert waits.next_delay_s() <= 0.12
    assert waits.attempts == 1


def test_an_adapter_that_comes_back_under_another_name_is_found(tmp_path, monkeypatch) -> None:
    first, second = Cable(tmp_path / "ttyUSB0"), Cable(tmp_path / "ttyUSB1")
    identity = PortIdentity(0x1234, 0x5678, "A1")
    there = [first]

    def rows() -> list[PortRow]:
        return [PortRow(str(item.path), "adapter", identity, None, "") for item in there]

    monkeypatch.setattr(ports_module, "list_ports", rows)
    link = link_to(first.path)
    link.open()
    first.pull()
    first.path.unlink()
    there[:] = [second]
    link.close()
    link.open()
    assert link.device == str(second.path)
    os.write(second.writing, b"$")
    assert link.read(1.0) == b"$"
    link.close()
    second.pull()


def test_two_equal_adapters_without_serial_number_are_not_confused(monkeypatch) -> None:
    plain = PortIdentity(1, 2, None)
    rows = [PortRow(f"/dev/ttyUSB{n}", "", plain, None, "") for n in range(2)]
    monkeypatch.setattr(ports_module, "list_ports", lambda: rows)
    assert ports_module.find_again(plain) is None
    del rows[1]
    assert ports_module.find_again(plain) == "/dev/ttyUSB0"


def test_a_second_program_is_told_the_port_is_in_use(cable: Cable) -> None:
    link = link_to(cable.path)
    link.open()
    with pytest.raises(LinkError) as caught:
        link_to(cable.path).open()
    assert caught.value.code == "busy"
    assert "another program" in caught.value.text
    link.close()


def test_ports_that_cannot_be_opened(tmp_path) -> None:
    with pytest.raises(LinkError) as caught:
        link_to(tmp_path / "nowhere").open()
    assert (caught.value.code, int(caught.value.exit_code)) == ("missing", 3)
    assert "seen" in caught.value.remedy
    plain = tmp_path / "plain.nmea"
    plain.write_bytes(b"$")
    for path in (plain, tmp_path):
        with pytest.raises(LinkError) as caught:
            link_to(path).open()
        assert caught.value.code == "not_a_tty"
        assert f"file:{path}" in caught.value.remedy


@pytest.mark.parametrize(
    ("error", "platform", "code", "remedy"),
    [
        (serial.SerialException(errno.EACCES, "Permission denied"), "linux", "permission", "dialout"),
        (serial.SerialException(errno.EBUSY, "Device or resource busy"), "linux", "busy", "other program"),
        # texts of pyserial 3.5 on Windows, from its source: the number is only in the text
        (serial.SerialException("could not open port 'COM5': PermissionError(13, 'Access is denied.', None, 5)"),
         "win32", "busy", "other program"),
        (serial.SerialException("could not open port 'COM9': FileNotFoundError(2, 'cannot find', None, 2)"),
         "win32", "missing", ""),
        (ValueError("Not a valid baudrate: 3"), "linux", "other", ""),
    ],
)  # fmt: skip
def test_errors_of_the_system_have_words(monkeypatch, error, platform: str, code: str, remedy: str) -> None:
    monkeypatch.setattr(serial_module.sys, "platform", platform)
    said = open_error("COM5", error)
    assert said.code == code
    assert remedy in said.remedy
    assert "COM5" in said.text


def test_ports_are_listed_without_opening_any(monkeypatch) -> None:
    class Found:
        device, description, vid, pid, serial_number = "/dev/ttyUSB0", "n/a", 0x1234, 0x5678, ""

    class Board:
        device, description, vid, pid, serial_number = "COM5", "on board", None, None, None

    def forbidden(*_: object, **__: object) -> None:
        raise AssertionError("a port was opened")

    monkeypatch.setattr("serial.tools.list_ports.comports", lambda: [Board(), Found()])
    monkeypatch.setattr(serial.Serial, "open", forbidden)
    rows = list_ports()
    assert [row.device for row in rows] == ["/dev/ttyUSB0", "COM5"]
    assert rows[0].identity == PortIdentity(0x1234, 0x5678, None)
    assert rows[0].description == ""
    assert rows[0].address == "serial:///dev/ttyUSB0?baud="
    assert (rows[1].identity, rows[1].address) == (None, "serial:COM5?baud=")


def test_receiver_on_a_pseudo_terminal_killed_and_started_again(tmp_path) -> None:
    with PtyReceiver(tmp_path, scenario="rtk", rate_hz=10) as receiver:
        link = open_link(parse_link(receiver.address))
        received = b""
        while received.count(b"GNGGA") < 4:
            received += link.read(0.25)
        assert receiver.sent()
        receiver.kill()
        read_until_lost(link)
        receiver.start()
        assert reopen(link, threading.Event())
        again = b""
        while again.count(b"GNGGA") < 3:
            again += link.read(0.25)
        link.close()
    assert not receiver.path.is_symlink()
