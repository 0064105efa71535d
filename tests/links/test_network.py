"""TCP and UDP over the loopback: bytes, ends, resets, refusals, and whose datagrams are taken."""

from __future__ import annotations

import contextlib
import socket
import struct
import time
from collections.abc import Iterator

import pytest

from fieldbook.clock import FakeClock
from fieldbook.links import LinkError, LinkLost, make_link, parse_link
from fieldbook.links.tcp import connect_error
from fieldbook.links.udp import UdpLink, has_valid_frame

GGA = b"$GNGGA,100000.00,1234.5678901,S,02345.6789012,W,4,12,0.7,123.456,M,-12.345,M,1.0,0061*7D\r\n"


def free_port(kind: socket.SocketKind = socket.SOCK_STREAM) -> int:
    with socket.socket(socket.AF_INET, kind) as probe:
        probe.bind(("127.0.0.1", 0))
        return int(probe.getsockname()[1])


@contextlib.contextmanager
def serving() -> Iterator[tuple[socket.socket, int]]:
    with socket.create_server(("127.0.0.1", 0)) as server:
        yield server, server.getsockname()[1]


def test_tcp_bytes_silence_and_orderly_close() -> None:
    with serving() as (server, port):
        link = make_link(parse_link(f"tcp://127.0.0.1:{port}"))
        link.open()
        link.open()
        peer, _ = server.accept()
        with peer:
            assert link.read(0.05) == b""
            peer.sendall(GGA)
            assert link.read(1.0) == GGA
            peer.sendall(GGA[:20])
        assert link.read(1.0) == GGA[:20]  # what came before the end is handed over
        with pytest.raises(LinkLost) as caught:
            link.read(1.0)
        assert "closed by the other side" in caught.value.reason
        link.close()
        link.open()  # a lost link is opened again as the same object
        server.accept()[0].close()
        link.close()
        with pytest.raises(LinkLost):
            link.read(0.1)


def test_tcp_reset_is_a_loss() -> None:
    with serving() as (server, port):
        link = make_link(parse_link(f"tcp://127.0.0.1:{port}"))
        link.open()
        peer, _ = server.accept()
        peer.setsockopt(socket.SOL_SOCKET, socket.SO_LINGER, struct.pack("ii", 1, 0))
        peer.close()  # lingering for nothing: a reset
        with pytest.raises(LinkLost):
            link.read(1.0)
        link.close()


def test_tcp_keeps_alive() -> None:
    with serving() as (server, port):
        link = make_link(parse_link(f"tcp://127.0.0.1:{port}"))
        link.open()
        inner = link._socket  # type: ignore[attr-defined]
        assert inner.getsockopt(socket.SOL_SOCKET, socket.SO_KEEPALIVE) == 1
        link.close()
        server.accept()[0].close()


def test_tcp_that_cannot_be_opened() -> None:
    with pytest.raises(LinkError) as caught:
        make_link(parse_link(f"tcp://127.0.0.1:{free_port()}")).open()
    assert (caught.value.code, int(caught.value.exit_code)) == ("refused", 3)
    assert "refuses connections" in caught.value.text


def test_tcp_errors_of_the_system_have_words(monkeypatch) -> None:
    def unknown(*_: object, **__: object) -> None:
        raise socket.gaierror(-2, "Name or service not known")

    monkeypatch.setattr(socket, "create_connection", unknown)
    with pytest.raises(LinkError) as caught:
        make_link(parse_link("tcp://rover.invalid:9001")).open()
    assert caught.value.code == "unknown_host"
    assert connect_error("h", 1, TimeoutError()).code == "unreachable"
    assert connect_error("h", 1, OSError(113, "No route to host")).code == "unreachable"


def opened_udp(query: str = "") -> tuple[UdpLink, int]:
    port = free_port(socket.SOCK_DGRAM)
    link = make_link(parse_link(f"udp://127.0.0.1:{port}{query}"))
    assert isinstance(link, UdpLink)
    link.open()
    return link, port


@contextlib.contextmanager
def sender(port: int) -> Iterator[socket.socket]:
    with socket.socket(socket.AF_INET, socket.SOCK_DGRAM) as made:
        made.bind(("127.0.0.1", 0))
        made.connect(("127.0.0.1", port))
        yield made


def test_udp_takes_the_first_sender_of_a_valid_frame_only() -> None:
    link, port = opened_udp()
    with sender(port) as noise, sender(port) as first, sender(port) as second:
        noise.send(b"\x00\x01port scan")
        noise.send(GGA.replace(b"*7D", b"*00"))  # wrong checksum
        assert link.read(0.1) == b""
        first.send(GGA[:40])  # a sentence split over two datagrams
        assert link.read(0.1) == b""
        first.send(GGA[40:])
        assert link.read(1.0) == GGA  # nothing of the chosen sender is lost
        second.send(GGA)
        noise.send(GGA)
        assert link.read(0.1) == b""
        first.send(b"half of $GN")
        assert link.read(1.0) == b"half of $GN"
        assert link.ignored_datagrams == 5
        assert link.sender == first.getsockname()
    link.close()
    with pytest.raises(LinkLost):
        link.read(0.1)


def test_udp_sender_may_come_back_on_another_port_after_silence() -> None:
    clock = FakeClock(1000, 0)
    port = free_port(socket.SOCK_DGRAM)
    link = UdpLink(parse_link(f"udp://127.0.0.1:{port}"), clock=clock)
    link.open()
    with sender(port) as first, sender(port) as again:
        first.send(GGA)
        assert link.read(1.0) == GGA
        again.send(GGA)
        assert not link._take(GGA, again.getsockname())
        clock.advance(10_000)
        assert link._take(GGA, ("10.9.9.9", 5000)) == b""  # another host never takes over
        assert link._take(GGA, again.getsockname()) == GGA
    link.close()


def test_udp_from_a_stated_sender() -> None:
    link, port = opened_udp("?from=127.0.0.1")
    with sender(port) as made:
        made.send(GGA)
        assert link.read(1.0) == GGA
    link.close()
    link, port = opened_udp("?from=10.1.2.3")
    with sender(port) as made:
        made.send(GGA)
        assert link.read(0.1) == b""
    link.close()


def test_udp_large_datagrams_and_bursts_are_whole() -> None:
    link, port = opened_udp()
    large = GGA * (60_000 // len(GGA))
    with sender(port) as made:
        made.send(large)
        assert link.read(1.0) == large
        for _ in range(500):  # the default buffer of a small socket kept 6 of 1000
            made.send(GGA)
        time.sleep(0.05)
        assert sum(len(link.read(0.1)) for _ in range(500)) == 500 * len(GGA)
    link.close()


def test_udp_that_cannot_be_opened() -> None:
    link, port = opened_udp()
    with pytest.raises(LinkError) as caught:
        make_link(parse_link(f"udp://127.0.0.1:{port}")).open()
    assert caught.value.code == "busy"
    link.close()
    with pytest.raises(LinkError) as caught:
        make_link(parse_link("udp://192.0.2.77:9100")).open()  # TEST-NET-1, RFC 5737: nobody's address
    assert caught.value.code == "unreachable"


@pytest.mark.parametrize(
    ("data", "valid"),
    [
        (GGA, True),
        (b"junk" + GGA, True),
        (GGA[:30] + GGA, True),
        (GGA.lower(), False),
        (GGA.replace(b"*7D", b"*7d"), True),
        (GGA[:-5], False),
        (b"$*00", False),
        (b"", False),
    ],
)
def test_valid_frame(data: bytes, valid: bool) -> None:
    assert has_valid_frame(data) is valid
