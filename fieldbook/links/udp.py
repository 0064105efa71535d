"""UDP listener: binds a local address and takes datagrams of one sender only.

Without `from`, the sender is the first whose bytes hold a valid frame ($...*hh with a right checksum), so that a
port scan or another instrument cannot take the place. Until then a few candidates are remembered with their last
bytes, because a sentence may be split over datagrams. A sender that has been silent for ten seconds may come back
from another port of the same host, as a restarted receiver does; another host never takes over.
"""

from __future__ import annotations

import errno
import re
import socket
from collections import OrderedDict

from fieldbook.clock import Clock, SystemClock
from fieldbook.errors import LinkError
from fieldbook.links.address import LinkAddress
from fieldbook.links.base import LinkLost

DATAGRAM_BYTES = 65535  # a datagram larger than the buffer given to recvfrom is cut without a word
RECEIVE_BUFFER_BYTES = 1 << 20  # with a small one, 994 datagrams of a burst of 1000 were lost unseen
CANDIDATES = 16
CANDIDATE_BYTES = 65536
SILENCE_MS = 10_000
_FRAME = re.compile(rb"[$!]([\x20-\x23\x25-\x29\x2b-\x7e]{5,250})\*([0-9A-Fa-f]{2})")

Sender = tuple[str, int]


def has_valid_frame(data: bytes) -> bool:
    """Does `data` hold one sentence $...*hh whose checksum (exclusive or of the bytes between) is right?"""
    for match in _FRAME.finditer(data):
        total = 0
        for byte in match[1]:
            total ^= byte
        if total == int(match[2], 16):
            return True
    return False


class UdpLink:
    """One bound UDP socket."""

    def __init__(self, address: LinkAddress, *, clock: Clock | None = None) -> None:
        self.address = address
        self.sender: Sender | None = None  # whose datagrams are taken
        self.ignored_datagrams = 0
        self._clock: Clock = clock or SystemClock()
        self._heard_ms = 0
        self._socket: socket.socket | None = None
        self._allowed: frozenset[str] | None = None
        self._candidates: OrderedDict[Sender, bytes] = OrderedDict()

    def open(self) -> None:
        """Bind the address.

        Raises:
            LinkError: unknown_host, busy, permission or other.
        """
        if self._socket is not None:
            return
        host, port = self.address.host, self.address.port
        family, where = _resolve(host, port, passive=True)
        if self.address.sender is not None:
            self._allowed = _addresses(self.address.sender, family)
        made = socket.socket(family, socket.SOCK_DGRAM)
        try:
            made.setsockopt(socket.SOL_SOCKET, socket.SO_RCVBUF, RECEIVE_BUFFER_BYTES)
            made.bind(where)
        except OSError as error:
            made.close()
            raise bind_error(host, port, error) from error
        self._socket = made

    @property
    def port(self) -> int:
        """The bound port."""
        if self._socket is None:
            return self.address.port
        return int(self._socket.getsockname()[1])

    def read(self, timeout_s: float) -> bytes:
        """Bytes of the one sender, b"" when none came in time.

        Raises:
            LinkLost: the socket is gone.
        """
        if self._socket is None:
            raise LinkLost("the socket is not open")
        end_ms = self._clock.monotonic_ms() + round(timeout_s * 1000)
        left_s = timeout_s
        while True:
            self._socket.settimeout(max(left_s, 0.001))
            try:
                data, where = self._socket.recvfrom(DATAGRAM_BYTES)
            except TimeoutError:
                return b""
            except ConnectionResetError:  # Windows reports an unreachable port of an earlier answer here
                data, where = b"", ("", 0)
            except OSError as error:
                raise LinkLost(f"{self.address.text}: {error.strerror or error}") from error
            taken = self._take(data, (str(where[0]), int(where[1])))
            if taken:
                return taken
            left_s = (end_ms - self._clock.monotonic_ms()) / 1000
            if left_s <= 0:
                return b""

    def _take(self, data: bytes, sender: Sender) -> bytes:
        now_ms = self._clock.monotonic_ms()
        if self._allowed is not None and sender[0].partition("%")[0] not in self._allowed:
            self.ignored_datagrams += 1
            return b""
        if sender == self.sender:
            self._heard_ms = now_ms
            return data
        if self.sender is not None and not self._may_follow(sender, now_ms):
            self.ignored_datagrams += 1
            return b""
        held = (self._candidates.pop(sender, b"") + data)[-CANDIDATE_BYTES:]
        if not has_valid_frame(held):
            self._candidates[sender] = held
            while len(self._candidates) > CANDIDATES:
                self._candidates.popitem(last=False)
            self.ignored_datagrams += 1
            return b""
        self._candidates.clear()
        self.sender, self._heard_ms = sender, now_ms
        return held

    def _may_follow(self, sender: Sender, now_ms: int) -> bool:
        assert self.sender is not None  # noqa: S101 - for the type checker
        return sender[0] == self.sender[0] and now_ms - self._heard_ms >= SILENCE_MS

    def close(self) -> None:
        """Close the socket; the sender stays the one that was heard."""
        made, self._socket = self._socket, None
        self._candidates.clear()
        if made is not None:
            made.close()


def _resolve(host: str, port: int, *, passive: bool) -> tuple[socket.AddressFamily, tuple[str, int]]:
    flags = socket.AI_PASSIVE if passive else 0
    try:
        found = socket.getaddrinfo(host, port, type=socket.SOCK_DGRAM, flags=flags)
    except (socket.gaierror, UnicodeError) as error:
        raise LinkError(
            f"The host '{host}' is not known.",
            "To listen on every network of this computer write udp://0.0.0.0:PORT.",
            code="unknown_host",
        ) from error
    family, _, _, _, where = found[0]
    return family, where  # type: ignore[return-value]


def _addresses(host: str, family: socket.AddressFamily) -> frozenset[str]:
    try:
        found = socket.getaddrinfo(host, None, family=family, type=socket.SOCK_DGRAM)
    except (socket.gaierror, UnicodeError) as error:
        raise LinkError(
            f"The sender '{host}' is not known.",
            "Correct the name after from=, or write its address.",
            code="unknown_host",
        ) from error
    return frozenset(str(entry[4][0]).partition("%")[0] for entry in found)


def bind_error(host: str, port: int, error: OSError) -> LinkError:
    """The clear text and remedy for an address that cannot be bound."""
    if error.errno == errno.EADDRINUSE:
        return LinkError(
            f"UDP port {port} is in use by another program.",
            "Close the other program, or let the receiver send to another port.",
            code="busy",
        )
    if error.errno in {errno.EACCES, errno.EPERM}:
        return LinkError(
            f"This user may not listen on UDP port {port}.", "Use a port of 1024 or above.", code="permission"
        )
    if error.errno == errno.EADDRNOTAVAIL:
        return LinkError(
            f"This computer has no network address {host}.",
            "The address after udp:// is one of this computer: write 0.0.0.0 for all of them; the sender goes after "
            "from=.",
            code="unreachable",
        )
    return LinkError(
        f"UDP port {port} on {host} cannot be opened: {error.strerror or error}.", "Choose another.", code="other"
    )
