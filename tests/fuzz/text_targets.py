"""Targets for texts people write: session file, a stored session tree, the user's settings, link addresses."""

from __future__ import annotations

import json
import sys
from functools import cache
from pathlib import Path
from typing import Any

from fieldbook.certificate.printable import printable
from fieldbook.errors import LinkError, UsageError
from fieldbook.links.address import parse_link
from fieldbook.model.canonical import canonical_json
from fieldbook.model.visible import file_stem, is_hidden, visible
from fieldbook.screens.plain import clean
from fieldbook.settings.antenna_source import frozen
from fieldbook.settings.antex import block_calibration, read_antex
from fieldbook.settings.schema import TABLES
from fieldbook.settings.session import load_session, session_from_tree
from fieldbook.settings.user import user_classes, with_user_class

from .target import Target, kept, workshop

sys.path.insert(0, str(Path(__file__).parents[1]))
from hostile import TEXTS

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


def _spread(data: bytes) -> bytes:
    """`~` stands for blanks up to column 60, where the labels of ANTEX begin: else chance would hardly hit them."""
    rows = []
    for row in data.split(b"\n"):
        text, tilde, label = row.partition(b"~")
        rows.append(text.ljust(60) + label if tilde else row)
    return b"\n".join(rows)


def antex_file(data: bytes) -> None:
    """Antennas whose values are finite and whose frozen block reads back the same, or an AntexError with a remedy."""
    path = workshop() / "any.atx"
    path.write_bytes(_spread(data))
    try:
        found = read_antex(path)
    except UsageError as error:
        _said(error)
        return
    for block in found.blocks[:4]:
        try:
            kept = frozen(found, block)
        except UsageError as error:
            _said(error)
            continue
        assert kept["block"].replace("\n", "").isprintable()
        made = block_calibration(kept["block"])
        assert made == block_calibration(kept["block"], "again", 99)
        for one in made.frequencies:
            values = [*one.offset_neu_m, *one.noazi_m, *(value for row in one.grid_m for value in row)]
            assert all(abs(value) <= 1.0 for value in values)
            assert len(one.noazi_m) == len(made.zenith_deg)
            assert all(len(row) == len(made.zenith_deg) for row in one.grid_m)


_ANTEX_HEAD = b"     1.4            M~ANTEX VERSION / SYST\nA~PCV TYPE / REFANT\n~END OF HEADER\n"
_ANTEX_BLOCK = (
    b"~START OF ANTENNA\nDEMO-A1         NONE~TYPE / SERIAL NO\n    90.0~DAZI\n     0.0  90.0  45.0~ZEN1 / ZEN2 / DZEN\n"
    b"     1~# OF FREQUENCIES\n   G01~START OF FREQUENCY\n      0.50     -0.30     87.30~NORTH / EAST / UP\n"
    b"   NOAZI    0.00    1.20    3.40\n"
    + b"".join(b"%8.1f    0.00    1.10    3.30\n" % (90 * index) for index in range(5))
    + b"   G01~END OF FREQUENCY\n~END OF ANTENNA\n"
)


def _antex_seeds() -> list[bytes]:
    flat = _ANTEX_BLOCK.replace(b"    90.0~", b"     0.0~")
    return [
        _ANTEX_HEAD + _ANTEX_BLOCK,
        _ANTEX_HEAD + b"\n".join(row for row in flat.split(b"\n") if not row.endswith(b"3.30")),
        _ANTEX_HEAD.replace(b"\nA~", b"\nR~") + _ANTEX_BLOCK,
    ]


_ANTEX_WORDS = (
    *(b"~%s\n" % label for label in (b"START OF ANTENNA", b"END OF ANTENNA", b"COMMENT", b"SINEX CODE", b"VALID FROM")),
    b"  2027     1     1     0     0    0.0000000~VALID UNTIL\n", b"   G01~START OF FREQ RMS\n", b"   G01~END OF FREQ RMS\n",
    b"  1e400", b"     nan", b"   NOAZI", b" 99999.9", b"    -0.0", b"\x00", b"\xff", b"\t", b"\r", b"   G02", b"  0.0001",
)  # fmt: skip


def shown_texts(data: bytes) -> None:
    """Any text: shown with nothing hidden, and made into a file name that stays where it is put."""
    text = data.decode("utf-8", "surrogateescape")
    for shown in (visible(text), clean(text), printable(text)):
        assert not any(map(is_hidden, shown))
    assert visible(visible(text)) == visible(text)
    stem = file_stem(text)
    assert stem
    assert Path(stem).name == stem
    assert not stem.startswith((".", "-"))


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
    Target("antex_file", "ANTEX file", antex_file, lambda: _antex_seeds() + kept("antex_file"), smoke=1500, words=_ANTEX_WORDS),
    Target("session_file", "session file", session_file, lambda: _session_seeds() + kept("session_file"), words=_WORDS, most_bytes=16384),
    Target("session_tree", "stored session", session_tree, lambda: _tree_seeds() + kept("session_tree"), words=(b"1E400", b'"1e99999"', b"null", b"[]", b"{}", b"1.5", b"NaN", b'"\\ud800"', b"9" * 4400), most_bytes=16384),
    Target("user_settings", "user's settings", user_settings, lambda: _settings_seeds() + kept("user_settings"), smoke=600, words=(*_DEEP, b"\n[class]\n", b'\n[class." "]\n', b"accept_quality = [1,", b"nan", b'""')),
    Target("shown_texts", "texts of others", shown_texts, lambda: [text.encode("utf-8", "surrogatepass")[:400] for text in TEXTS.values()] + kept("shown_texts"), most_bytes=300),
    Target("link_address", "link address", link_address, lambda: _address_seeds() + kept("link_address"), words=(b"%41", b"%25", b"%26", b"?from=", b"&", b"[", b"]", b"://", b"file:", b"tcp:", b"udp:", b"sim:", b"serial:", b"\x00", b" ", b"/. ", b"?baud=1"), most_bytes=300),
]  # fmt: skip
