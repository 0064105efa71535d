"""Link addresses: text of the session file or the command line -> LinkAddress. Nothing is opened here.

    serial:///dev/ttyUSB0?baud=115200    serial:COM5?baud=115200&data=8N1     baud is required
    tcp://host:port    tcp://[2001:db8::5]:port
    udp://host:port?from=sender          binds host:port; without `from` the first sender of a valid frame
    file:PATH                            all after the colon is the path, relative to the session file
    sim:NAME?seed=7&rate=10&speed=20     simulated receiver in this process

`text` of an address is canonical: options in fixed order, a file's path absolute. A recorder that is started
later, from another folder, reads the same address and finds the same file.
"""

from __future__ import annotations

import difflib
import os
import re
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from urllib.parse import quote, unquote

from fieldbook.errors import UsageError

KINDS = ("serial", "tcp", "udp", "file", "sim")
FORMS = (
    "serial:///dev/ttyUSB0?baud=115200, serial:COM5?baud=115200, tcp://host:port, udp://host:port, "
    "file:PATH or sim:NAME?seed=7"
)
OPTIONS = {
    "serial": ("baud", "data"),
    "tcp": (),
    "udp": ("from",),
    "sim": ("seed", "rate", "speed"),
}
_DATA = re.compile(r"([5-8])([NEOMS])(1|1\.5|2)\Z")
_WHOLE = re.compile(r"[0-9]{1,15}\Z")
_DECIMAL = re.compile(r"[0-9]{1,9}(\.[0-9]{1,6})?\Z")
LARGEST_BAUD = 20_000_000


@dataclass(frozen=True)
class LinkAddress:
    """Where receiver bytes come from.

    Attributes:
        kind: "serial", "tcp", "udp", "file" or "sim".
        text: canonical address.
        live: False for a file, whose bytes have no arrival times.
        device: serial: device path or name.
        baud: serial: bits per second.
        data: serial: data bits, parity, stop bits, as "8N1".
        host, port: tcp, udp.
        sender: udp: host whose datagrams alone are taken; None = first sender of a valid frame.
        path: file: where it lies, resolved against the session file's folder.
        scenario, seed, rate_hz, speed: sim; rate_hz None = the scenario's own; speed is simulated seconds per
            second.
    """

    kind: str
    text: str
    live: bool
    device: str = ""
    baud: int = 0
    data: str = "8N1"
    host: str = ""
    port: int = 0
    sender: str | None = None
    path: Path | None = None
    scenario: str = ""
    seed: int = 1
    rate_hz: float | None = None
    speed: float = 1.0


def parse_link(text: str, base_dir: Path | None = None) -> LinkAddress:
    """Read a link address.

    Args:
        text: the address as written.
        base_dir: folder that a relative file path starts from; None = the current folder.

    Raises:
        UsageError: no such kind of link, unknown or missing option, wrong value.
    """
    kind, colon, rest = text.strip().partition(":")
    kind = kind.lower()
    if not colon or kind not in KINDS:
        raise _unknown_kind(text, kind, has_colon=bool(colon))
    if kind == "file":
        return _file(rest, base_dir)
    body, _, query = rest.partition("?")
    options = _options(text, kind, query)
    return _PARSERS[kind](text, body, options)


def _unknown_kind(text: str, kind: str, *, has_colon: bool) -> UsageError:
    if not has_colon and ("/" in text or "." in text or "\\" in text):
        return UsageError(
            f"'{text}' is no link address: the kind of link is missing.",
            f"For a file write file:{text}. Forms: {FORMS}.",
            code="link_address",
        )
    if len(kind) == 1 and has_colon:  # C:\log.nmea
        return UsageError(
            f"'{text}' is no link address: the kind of link is missing.",
            f"For a file write file:{text}. Forms: {FORMS}.",
            code="link_address",
        )
    near = difflib.get_close_matches(kind, KINDS, n=1, cutoff=0.5)
    hint = f"Did you mean '{near[0]}:'? " if near else ""
    return UsageError(f"'{text}' is no link address.", f"{hint}Forms: {FORMS}.", code="link_address")


def _options(text: str, kind: str, query: str) -> dict[str, str]:
    known = OPTIONS[kind]
    found: dict[str, str] = {}
    for part in query.split("&") if query else []:
        key, equals, value = part.partition("=")
        if key not in known:
            near = difflib.get_close_matches(key, known, n=1, cutoff=0.4)
            hint = f"Did you mean '{near[0]}'? " if near else ""
            listed = ", ".join(known) if known else "none"
            raise UsageError(
                f"Link '{text}': '{key}' is no option of a {kind} link.",
                f"{hint}Options: {listed}.",
                code="link_option",
            )
        if not equals or not value:
            raise UsageError(f"Link '{text}': option '{key}' has no value.", f"Write {key}=VALUE.")
        if key in found:
            raise UsageError(f"Link '{text}': option '{key}' is given twice.", "Keep one of the two.")
        found[key] = unquote(value, errors="surrogateescape")
    return found


def _file(rest: str, base_dir: Path | None) -> LinkAddress:
    if not rest:
        raise UsageError("The link 'file:' names no file.", "Write file:PATH, as in file:receiver.nmea.")
    folder = Path.cwd() if base_dir is None else base_dir
    path = Path(os.path.abspath(folder / rest))  # noqa: PTH100 - removes "..", and leaves symbolic links as named
    if str(path) != str(path).rstrip():  # the text of an address is read without the spaces around it
        raise UsageError(f"The name of the file {path} ends in a space.", "Rename it.")
    return LinkAddress(kind="file", text=f"file:{path}", live=False, path=path)


def _serial(text: str, body: str, options: dict[str, str]) -> LinkAddress:
    device = body[2:] if body.startswith("//") else body
    if not device:
        raise UsageError(
            f"Link '{text}' names no port.",
            "Write serial:///dev/ttyUSB0?baud=115200 or serial:COM5?baud=115200; `fieldbook links` lists ports.",
        )
    if "baud" not in options:
        raise UsageError(
            f"Link '{text}' states no speed.",
            f"Add the receiver's speed, as in serial:{body}?baud=115200.",
            code="link_baud",
        )
    baud = _whole(text, "baud", options["baud"], 1, LARGEST_BAUD)
    data = options.get("data", "8N1").upper()
    if not _DATA.match(data):
        raise UsageError(
            f"Link '{text}': data={options['data']} is no character format.",
            "Write data bits, parity (N, E, O, M, S) and stop bits, as in data=8N1.",
        )
    tail = "" if data == "8N1" else f"&data={data}"
    prefix = "serial://" if device.startswith("/") else "serial:"
    canonical = f"{prefix}{device}?baud={baud}{tail}"
    return LinkAddress(kind="serial", text=canonical, live=True, device=device, baud=baud, data=data)


def _host_port(text: str, kind: str, body: str) -> tuple[str, int, str]:
    """Host without brackets, port, and `host:port` as it is written."""
    rest = body[2:] if body.startswith("//") else body
    if rest.startswith("["):
        host, _, port = rest[1:].partition("]")
        port = port.removeprefix(":") if port.startswith(":") else ""
        written = f"[{host}]"
    else:
        host, _, port = rest.rpartition(":")
        written = host
        if ":" in host:
            raise UsageError(
                f"Link '{text}': an IPv6 address stands in brackets.",
                f"Write {kind}://[{host}]:{port}, or {kind}://[{rest}]:PORT if '{port}' belongs to the address.",
            )
    if not host or not port or "/" in host:
        raise UsageError(
            f"Link '{text}' names no host and port.", f"Write {kind}://host:port, as in {kind}://10.0.0.5:9001."
        )
    return host, _whole(text, "port", port, 1, 65535), written


def _tcp(text: str, body: str, options: dict[str, str]) -> LinkAddress:  # noqa: ARG001 - same form as the others
    host, port, written = _host_port(text, "tcp", body)
    return LinkAddress(kind="tcp", text=f"tcp://{written}:{port}", live=True, host=host, port=port)


def _udp(text: str, body: str, options: dict[str, str]) -> LinkAddress:
    host, port, written = _host_port(text, "udp", body)
    sender = options.get("from")
    tail = "" if sender is None else f"?from={quote(sender, safe='[]:', errors='surrogateescape')}"
    if sender is not None:
        sender = sender.removeprefix("[").removesuffix("]")
    canonical = f"udp://{written}:{port}{tail}"
    return LinkAddress(kind="udp", text=canonical, live=True, host=host, port=port, sender=sender)


def _sim(text: str, body: str, options: dict[str, str]) -> LinkAddress:
    from fieldbook.links.sim_scenarios import SCENARIOS

    name = body.removeprefix("//")
    if name not in SCENARIOS:
        near = difflib.get_close_matches(name, SCENARIOS, n=1, cutoff=0.4)
        hint = f"Did you mean 'sim:{near[0]}'? " if near else ""
        raise UsageError(
            f"Link '{text}': there is no simulated receiver '{name}'.",
            f"{hint}There are: {', '.join(SCENARIOS)}.",
            code="link_scenario",
        )
    seed = _whole(text, "seed", options.get("seed", "1"), 0, 2**31)
    rate_hz = _decimal(text, "rate", options["rate"], 0.1, 20.0) if "rate" in options else None
    if rate_hz is not None and (1000 / rate_hz) % 10:
        raise UsageError(
            f"Link '{text}': fixes at {rate_hz:g} Hz do not fall on hundredths of a second.",
            "Choose a rate such as 1, 2, 5, 10 or 20.",
        )
    speed = _decimal(text, "speed", options.get("speed", "1"), 0.1, 10000.0)
    tail = ("" if rate_hz is None else f"&rate={rate_hz:g}") + ("" if speed == 1.0 else f"&speed={speed:g}")
    canonical = f"sim:{name}?seed={seed}{tail}"
    return LinkAddress(kind="sim", text=canonical, live=True, scenario=name, seed=seed, rate_hz=rate_hz, speed=speed)


def _whole(text: str, key: str, value: str, low: int, high: int) -> int:
    if not _WHOLE.match(value) or not low <= int(value) <= high:
        raise UsageError(
            f"Link '{text}': {key} '{value}' is not a whole number from {low} to {high}.", f"Correct the {key}."
        )
    return int(value)


def _decimal(text: str, key: str, value: str, low: float, high: float) -> float:
    if not _DECIMAL.match(value) or not low <= float(value) <= high:
        raise UsageError(
            f"Link '{text}': {key} '{value}' is not a number from {low:g} to {high:g}.", f"Correct the {key}."
        )
    return float(value)


_PARSERS: dict[str, Callable[[str, str, dict[str, str]], LinkAddress]] = {
    "serial": _serial,
    "tcp": _tcp,
    "udp": _udp,
    "sim": _sim,
}
