"""Serial ports of this machine, listed from what the system knows of them. No port is opened.

Opening a port raises its control lines, which resets some boards, and takes bytes from whoever is reading. The
identity of a USB adapter (vendor, product, serial number) survives a re-plug; its name may not.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

BY_ID = Path("/dev/serial/by-id")  # Linux: names that stay when adapters are plugged in another order


@dataclass(frozen=True)
class PortIdentity:
    """What tells one USB adapter from another of the same kind."""

    vendor_id: int
    product_id: int
    serial: str | None


@dataclass(frozen=True)
class PortRow:
    """One serial port.

    Attributes:
        device: name to open, "/dev/ttyUSB0" or "COM5".
        description: the system's words for it.
        identity: USB identity, None for a port that is not on USB.
        stable_device: a name that stays the same after re-plugging, where the system has one.
        address: link address without the speed, which nobody but the receiver knows: "serial:///dev/ttyUSB0?baud=".
    """

    device: str
    description: str
    identity: PortIdentity | None
    stable_device: str | None
    address: str


def list_ports() -> list[PortRow]:
    """All serial ports the system knows, sorted by name; none is opened."""
    from serial.tools import list_ports as system

    stable = _stable_names()
    return sorted((_row(port, stable) for port in system.comports()), key=lambda row: row.device)


def identity_of(device: str) -> PortIdentity | None:
    """USB identity of the port with this name (or of what the name points to), None when it has none."""
    real = _real(device)
    return next((row.identity for row in list_ports() if _real(row.device) == real), None)


def find_again(identity: PortIdentity) -> str | None:
    """Name of the port with this identity now, None when it is not there.

    Without a serial number two adapters of one kind cannot be told apart: then only a single one counts.
    """
    found = [row.device for row in list_ports() if row.identity == identity]
    if identity.serial is None and len(found) != 1:
        return None
    return found[0] if found else None


def _row(port: object, stable: dict[str, str]) -> PortRow:
    device = str(getattr(port, "device", ""))
    vendor, product = getattr(port, "vid", None), getattr(port, "pid", None)
    identity = None
    if vendor is not None and product is not None:
        identity = PortIdentity(vendor, product, getattr(port, "serial_number", None) or None)
    description = str(getattr(port, "description", "") or "")
    named = stable.get(_real(device))
    prefix = "serial://" if device.startswith("/") else "serial:"
    return PortRow(
        device=device,
        description="" if description == "n/a" else description,
        identity=identity,
        stable_device=named,
        address=f"{prefix}{named or device}?baud=",
    )


def _stable_names() -> dict[str, str]:
    if not BY_ID.is_dir():
        return {}
    return {_real(str(entry)): str(entry) for entry in sorted(BY_ID.iterdir())}


def _real(device: str) -> str:
    path = Path(device)
    return str(path.resolve()) if path.is_absolute() else device.upper()
