"""Targets for texts people write: session file, a stored session tree, the user's settings, link addresses."""

from __future__ import annotations

import json
from functools import cache
from pathlib import Path
from typing import Any

from fieldbook.errors import LinkError, UsageError
from fieldbook.links.address import parse_link
from fieldbook.model.canonical import canonical_json
from fieldbook.settings.schema import TABLES
from fieldbook.settings.session import load_session, session_from_tree
from fieldbook.settings.user import user_classes, with_user_class

from .target import Target, kept, workshop

_SAMPLES = sorted((Path(__file__).parents[2] / "sample_sessions").glob("*/session.toml"))
_DEEP = (
    b"[" * 3000,
    b"{a=" * 1500,
    b"a." * 2000,
    b"9" * 5000,
    b"0x" + b"f" * 5000,
    b"1e99999999999999999999",
    b"1e400",
    b"-1e-400",
)
_WORDS = (
    *_DEEP,
    *(name.encode() for table in TABLES for name in (f"\n[{table}]\n", f"\n[[{table}]]\n")),
    *(f"{key} = ".encode() for keys in TABLES.values() for key in keys),
    *(
        b"nan",
        b"-inf",
        b"true",
        b"1979-05-27T07:32:00Z",
        b"07:32:00",
        b'"""',
        b"'''",
        b"\xef\xbb\xbf",
        b"\x00",
        b'"\\u0000"',
        b"[]",
        b"{}",
    ),
)


def _said(error: UsageError | LinkError) -> None:
    assert error.text
    assert error.remedy
    assert len(error.text) < 20_000, "an error is one sentence"


def _stored_again(tree: dict[str, Any]) -> None:
    """What a book keeps of a session reads back as the same session."""
    text = canonical_json(tree)
    assert canonical_json(session_from_tree(json.loads(text)).tree) == text


def session_file(data: bytes) -> None:
    """A session, or a UsageError."""
    path = workshop() / "session.toml"
    path.write_bytes(data)
    try:
        session = load_session(path)
    except UsageError as error:
        _said(error)
        return
    _stored_again(session.tree)


def session_tree(data: bytes) -> None:
    """A stored tree of any JSON: a session, or a UsageError."""
    try:
        tree = json.loads(data)
    except (ValueError, RecursionError):
        return
    if not isinstance(tree, dict):
        return
    try:
        session = session_from_tree(tree)
    except UsageError as error:
        _said(error)
        return
    _stored_again(session.tree)


@cache
def _sample_tree() -> dict[str, Any]:
    return load_session(_SAMPLES[0]).tree


def user_settings(data: bytes) -> None:
    """Classes, or a UsageError; put into a session they make a session."""
    path = workshop() / "fieldbook.toml"
    path.write_bytes(data)
    sample = _sample_tree()
    receiver = {key: value for key, value in sample["receiver"].items() if key != "class"}
    tree = {**sample, "receiver": receiver}
    try:
        classes = user_classes(path)
        for name in list(classes)[:3]:
            tree["receiver"] = {**receiver, "serial": name}
            session_from_tree(with_user_class(tree, path))
    except UsageError as error:
        _said(error)


def link_address(data: bytes) -> None:
    """An address whose canonical text is read as the same address, or an error with a remedy."""
    text = data.decode("utf-8", "surrogateescape")
    try:
        address = parse_link(text, workshop())
    except (UsageError, LinkError) as error:
        _said(error)
        return
    assert parse_link(address.text, Path("/elsewhere")) == address


def _settings_seeds() -> list[bytes]:
    own = '[class."0001"]\nhorizontal_m = 0.006\nvertical_m = 0.012\ncorrelation_s = 180\naccept_quality = [4]\nsource = "own"\n'
    return [own.encode(), own.replace('"0001"', '"Maker Model"').encode() + b"# end\n", b"[class]\n"]


def _address_seeds() -> list[bytes]:
    texts = (
        *(
            "serial:///dev/ttyUSB0?baud=115200&data=7E1",
            "serial:COM5?baud=9600",
            "tcp://[2001:db8::5]:9001",
            "file:a/../b.nmea",
        ),
        *("udp://0.0.0.0:5000?from=10.0.0.5", "sim:open-sky?seed=7&rate=10&speed=20", "C:\\log.nmea", "file:/a b/%20"),
    )
    return [text.encode() for text in texts]


def _session_seeds() -> list[bytes]:
    return [path.read_bytes() for path in _SAMPLES]


def _tree_seeds() -> list[bytes]:
    return [canonical_json(load_session(path).tree).encode() for path in _SAMPLES]


TARGETS = [
    Target("session_file", "session file", session_file, lambda: _session_seeds() + kept("session_file"), words=_WORDS, most_bytes=16384),
    Target("session_tree", "stored session", session_tree, lambda: _tree_seeds() + kept("session_tree"), words=(b"1E400", b'"1e99999"', b"null", b"[]", b"{}", b"1.5", b"NaN", b'"\\ud800"', b"9" * 4400), most_bytes=16384),
    Target("user_settings", "user's settings", user_settings, lambda: _settings_seeds() + kept("user_settings"), smoke=600, words=(*_DEEP, b"\n[class]\n", b'\n[class." "]\n', b"accept_quality = [1,", b"nan", b'""')),
    Target("link_address", "link address", link_address, lambda: _address_seeds() + kept("link_address"), words=(b"%41", b"%25", b"%26", b"?from=", b"&", b"[", b"]", b"://", b"file:", b"tcp:", b"udp:", b"sim:", b"serial:", b"\x00", b" ", b"/. ", b"?baud=1"), most_bytes=300),
]  # fmt: skip
