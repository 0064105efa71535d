"""TCP client: a receiver, a serial server or a relay that listens on host and port.

An orderly close arrives as an empty `recv`, which is the end of the stream and never 'nothing yet'. A pulled
cable arrives as nothing at all; keep-alive finds it within half a minute, and the reader's own limit of silence
sooner.
"""

from __future__ import annotations

import socket

from fieldbook.errors import LinkError
from fieldbook.links.address import LinkAddress
from fieldbook.links.base import PIECE_BYTES, LinkLost

CONNECT_TIMEOUT_S = 5.0
_KEEP_ALIVE = (("TCP_KEEPIDLE", 10), ("TCP_KEEPINTVL", 5), ("TCP_KEEPCNT", 3))  # seconds, seconds, probes


class TcpLink:
    """One TCP connection."""

    def __init__(self, address: LinkAddress) -> None:
        self.address = address
        self._socket: socket.socket | None = None

    def open(self) -> None:
        """Connect.

        Raises:
            LinkError: unknown_host, refused, unreachable or other.
        """
        if self._socket is not None:
            return
        host, port = self.address.host, self.address.port
        try:
            made = socket.create_connection((host, port), timeout=CONNECT_TIMEOUT_S)
        except (OSError, UnicodeError) as error:
            raise connect_error(host, port, error) from error
        made.setsockopt(socket.SOL_SOCKET, socket.SO_KEEPALIVE, 1)
        for name, value in _KEEP_ALIVE:
            if hasattr(socket, name):  # not every system has all three
                made.setsockopt(socket.IPPROTO_TCP, getattr(socket, name), value)
        self._socket = made

    def read(self, timeout_s: float) -> bytes:
        """Bytes that have come, b"" when none came in time.

        Raises:
            LinkLost: closed or reset by the other side, or the network is gone.
        """
        if self._socket is None:
            raise LinkLost("the connection is not open")
        self._socket.settimeout(timeout_s)
        try:
            data = self._socket.recv(PIECE_BYTES)
        except TimeoutError as error:
            if error.errno is None:  # ours; with a number it is the network's: keep-alive found nobody
                return b""
            raise LinkLost(f"{self.address.text}: no answer any more") from error
        except OSError as error:
            raise LinkLost(f"{self.address.text}: {error.strerror or error}") from error
        if not data:
            raise LinkLost(f"{self.address.text} was closed by the other side")
        return data

    def close(self) -> None:
        """Close the connection."""
        made, self._socket = self._socket, None
        if made is not None:
            made.close()


def connect_error(host: str, port: int, error: BaseException) -> LinkError:
    """The clear text and remedy for a connection that cannot be made."""
    if isinstance(error, (socket.gaierror, UnicodeError)):
        return LinkError(
            f"The host '{host}' is not known.", "Correct the name, or write the address in digits.", code="unknown_host"
        )
    if isinstance(error, ConnectionRefusedError):
        return LinkError(
            f"{host} refuses connections on port {port}.",
            "Switch the receiver's NMEA output on for this port, and check the port number.",
            code="refused",
        )
    if isinstance(error, TimeoutError):
        return LinkError(
            f"{host} does not answer on port {port} within {CONNECT_TIMEOUT_S:.0f} s.",
            "Check that this computer is in the receiver's network and that no firewall stands between.",
            code="unreachable",
        )
    said = error.strerror if isinstance(error, OSError) and error.strerror else str(error)
    return LinkError(
        f"{host} port {port} cannot be reached: {said}.",
        "Check that this computer is in the receiver's network.",
        code="unreachable",
    )
