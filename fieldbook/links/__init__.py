"""Byte sources: serial port, TCP, UDP, file, simulated receiver. The only package that opens ports and sockets.

`parse_link` reads an address, `open_link` opens it, `make_link` only builds the object. Each kind is imported
when it is asked for, so that a help text costs neither pyserial nor the simulator.
"""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from fieldbook.clock import Clock
from fieldbook.errors import LinkError
from fieldbook.links.address import LinkAddress, parse_link
from fieldbook.links.backoff import BackOff, reopen
from fieldbook.links.base import PIECE_BYTES, EndOfLink, Link, LinkLost

if TYPE_CHECKING:
    from fieldbook.links.ports import PortRow

__all__ = [
    "PIECE_BYTES",
    "BackOff",
    "EndOfLink",
    "Link",
    "LinkAddress",
    "LinkError",
    "LinkLost",
    "link_base_dir",
    "list_ports",
    "make_link",
    "open_link",
    "parse_link",
    "reopen",
]


def make_link(address: LinkAddress, *, clock: Clock | None = None, start_offset: int = 0) -> Link:
    """The link of an address, not opened.

    Args:
        address: from `parse_link`.
        clock: times the simulated receiver and the silence limit of UDP; None = the host's.
        start_offset: file only: bytes (as handed over, after inflating) to skip.
    """
    if address.kind == "serial":
        from fieldbook.links.serial_port import SerialLink

        return SerialLink(address)
    if address.kind == "tcp":
        from fieldbook.links.tcp import TcpLink

        return TcpLink(address)
    if address.kind == "udp":
        from fieldbook.links.udp import UdpLink

        return UdpLink(address, clock=clock)
    if address.kind == "file":
        from fieldbook.links.file import FileLink

        return FileLink(address, start_offset=start_offset)
    from fieldbook.links.sim_link import SimLink

    return SimLink(address, clock=clock)


def open_link(address: LinkAddress, *, clock: Clock | None = None, start_offset: int = 0) -> Link:
    """The opened link of an address; calling `open()` on it again does nothing.

    Raises:
        LinkError: it cannot be opened.
    """
    link = make_link(address, clock=clock, start_offset=start_offset)
    link.open()
    return link


def list_ports() -> list[PortRow]:
    """Serial ports of this machine, found without opening any: opening resets boards and steals bytes."""
    from fieldbook.links.ports import list_ports as rows

    return rows()


def link_base_dir(session_file: Path | None) -> Path:
    """Folder that a relative `file:` path starts from: that of the session file, else the current one."""
    return Path.cwd() if session_file is None else session_file.resolve().parent
