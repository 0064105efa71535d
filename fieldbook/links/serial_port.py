"""Serial port through pyserial: exclusive, with a time limit on every read, and found again after a re-plug.

What pyserial 3.5 does when an adapter is pulled was measured on pseudo-terminals: `read` raises
SerialException, `in_waiting` a bare OSError, either may raise TypeError while the port is being closed, and a
read of many bytes loses those that came before the loss. So one byte is read with the time limit, then what is
waiting; a loss met on the way is reported by the next read, after the bytes.
"""

from __future__ import annotations

import errno
import sys
from typing import TYPE_CHECKING

from fieldbook.errors import LinkError
from fieldbook.links.address import LinkAddress
from fieldbook.links.base import PIECE_BYTES, LinkLost
from fieldbook.links.ports import PortIdentity, find_again, identity_of, list_ports

if TYPE_CHECKING:
    import serial

_LOSSES = (OSError, TypeError, ValueError)  # SerialException is an OSError; TypeError: closed under the read
_STOP_BITS = {"1": 1.0, "1.5": 1.5, "2": 2.0}
_DEFAULT_TIMEOUT_S = 0.25


class SerialLink:
    """One serial port."""

    def __init__(self, address: LinkAddress) -> None:
        self.address = address
        self.device = address.device  # where it was found last; changes when an adapter comes back elsewhere
        self._identity: PortIdentity | None = None
        self._port: serial.Serial | None = None
        self._lost: str | None = None

    def open(self) -> None:
        """Open the port for this program alone.

        Raises:
            LinkError: missing, busy, permission, not_a_tty or other.
        """
        if self._port is not None:
            return
        try:
            self._port = self._opened(self.address.device)
            self.device = self.address.device
        except LinkError as error:
            elsewhere = self._elsewhere() if error.code == "missing" else None
            if elsewhere is None:
                raise
            self._port = self._opened(elsewhere)
            self.device = elsewhere
        self._lost = None
        self._identity = identity_of(self.device) or self._identity

    def _elsewhere(self) -> str | None:
        return None if self._identity is None else find_again(self._identity)

    def _opened(self, device: str) -> serial.Serial:
        import serial

        data = self.address.data
        try:
            port = serial.Serial()
            port.port = device
            port.baudrate = self.address.baud
            port.bytesize = int(data[0])
            port.parity = data[1]
            port.stopbits = _STOP_BITS[data[2:]]
            port.timeout = _DEFAULT_TIMEOUT_S
            port.exclusive = True  # without it a second program opens the port too and steals bytes
            port.open()
        except _LOSSES as error:
            raise open_error(device, error) from error
        return port

    def read(self, timeout_s: float) -> bytes:
        """Bytes that have come, b"" when none came in time.

        Raises:
            LinkLost: the port is gone.
        """
        if self._lost is not None:
            raise LinkLost(self._lost)
        if self._port is None:
            raise LinkLost("the port is not open")
        try:
            if self._port.timeout != timeout_s:  # setting it reconfigures the port: only when it changes
                self._port.timeout = timeout_s
            first = bytes(self._port.read(1))
        except _LOSSES as error:
            raise LinkLost(self._loss(error)) from error
        if not first:
            return b""
        try:
            waiting = min(self._port.in_waiting, PIECE_BYTES - 1)
            return first + bytes(self._port.read(waiting)) if waiting else first
        except _LOSSES as error:
            self._lost = self._loss(error)
            return first

    def _loss(self, error: BaseException) -> str:
        if isinstance(error, OSError) and "returned no data" in str(error):
            return f"{self.device} was unplugged or its other side was closed"
        return f"{self.device}: {_plain(error)}"

    def close(self) -> None:
        """Close the port; a device that is gone may refuse, which changes nothing."""
        port, self._port = self._port, None
        self._lost = None
        if port is not None:
            try:
                port.close()
            except _LOSSES:
                return


def open_error(device: str, error: BaseException) -> LinkError:
    """The clear text and remedy for a port that cannot be opened.

    Args:
        device: name of the port.
        error: what pyserial raised. On Windows its number is only in its text.
    """
    number = getattr(error, "errno", None)
    text = str(error)
    if number == errno.ENOENT or "FileNotFoundError" in text:
        return LinkError(f"There is no serial port {device}.", _seen_ports(), code="missing")
    if sys.platform == "win32" and "PermissionError" in text:
        number = errno.EBUSY
    if number in {errno.EAGAIN, errno.EBUSY} or "exclusively lock" in text:
        return LinkError(
            f"Serial port {device} is in use by another program.",
            "Close the other program, or end the other recorder, and try again.",
            code="busy",
        )
    if number in {errno.EACCES, errno.EPERM}:
        return LinkError(
            f"This user may not open serial port {device}.",
            "Add the user to the group that owns the port (often 'dialout': sudo usermod -aG dialout $USER) and log "
            "in again.",
            code="permission",
        )
    if number in {errno.EISDIR, errno.ENOTTY, errno.ENODEV, errno.ENXIO} or "Could not configure port" in text:
        return LinkError(
            f"{device} is not a serial port.", f"For a file write file:{device}. {_seen_ports()}", code="not_a_tty"
        )
    return LinkError(f"Serial port {device} cannot be opened: {_plain(error)}.", _seen_ports(), code="other")


def _seen_ports() -> str:
    names = [row.device for row in list_ports()]
    return f"Ports seen now: {', '.join(names)}." if names else "No serial port is seen on this computer now."


def _plain(error: BaseException) -> str:
    return " ".join(str(error).split()) or type(error).__name__
