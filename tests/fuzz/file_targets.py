"""Targets for files handed over by others: certificates to verify, packed logs."""

from __future__ import annotations

import bz2
import gzip
import io
import json
import zipfile
import zlib
from contextlib import suppress
from functools import cache
from pathlib import Path
from typing import Any

from fieldbook.certificate.as_pdf import ATTACHMENT
from fieldbook.certificate.identity import sealed
from fieldbook.certificate.issue import RENDERERS
from fieldbook.certificate.read_file import PARSER_ERRORS, Unreadable, facts_of, text_lines
from fieldbook.certificate.verify_file import verify_certificate
from fieldbook.errors import LinkError, ReductionError, UsageError
from fieldbook.links.address import parse_link
from fieldbook.links.base import EndOfLink, LinkLost
from fieldbook.links.file import FileLink
from fieldbook.reduce.frames.gridfiles import ntv2_head
from fieldbook.reduce.geotiff import geotiff_layout

from .edits import edited, script_of
from .target import Target, kept, workshop

_GOLDEN = Path(__file__).parents[1] / "golden" / "certificate_kr07.json"
_ENDINGS = ("json", "html", "pdf")
_LINE = b"$GNGGA,011000.00,3416.45886159,S,14603.11111128,E,5,21,0.64,220.0479,M,13.482,M,1.0,0042*45\r\n"


@cache
def _certificates() -> dict[str, bytes]:
    facts = sealed(json.loads(_GOLDEN.read_bytes()))
    return {ending: RENDERERS[ending](facts) for ending in _ENDINGS}


def _places(tree: Any) -> list[tuple[Any, Any]]:
    """Every (container, key) of a tree."""
    pairs = tree.items() if isinstance(tree, dict) else enumerate(tree) if isinstance(tree, list) else ()
    return [found for key, value in list(pairs) for found in [(tree, key), *_places(value)]]


def _forged(script: bytes) -> Any:
    """The facts with values replaced, in a way that they fit their digest again."""
    facts = json.loads(_GOLDEN.read_bytes())
    position = 0
    while position + 4 <= len(script):
        index, kind, length = (
            int.from_bytes(script[position : position + 2], "big"),
            script[position + 2],
            script[position + 3],
        )
        payload = script[position + 4 : position + 4 + length]
        position += 4 + length
        places = _places(facts)
        if not places:
            break
        container, key = places[index % len(places)]
        text = payload.decode("utf-8", "replace")
        match kind % 8:
            case 0:
                container.pop(key)
            case 1:
                container[key] = text
            case 2:
                container[key] = [None, True, [], {}, -1, 10**30, "", "NaN", "1e999999", [[]], {"": None}][length % 11]
            case 3 if isinstance(container[key], str):
                container[key] = container[key] + text
            case 4:
                other, at = places[(index * 31 + length) % len(places)]
                if at in other if isinstance(other, dict) else at < len(other):
                    container[key] = json.loads(json.dumps(other[at]))
            case 5:
                container[key] = {text: text}
            case 6:
                container[key] = [text] * (length % 5)
            case _:
                container[key] = text[::-1]
    return facts


def certificate(data: bytes) -> None:
    """Lines of text that cannot steer a terminal, or a UsageError."""
    choice = data[:1].ljust(1, b"\0")[0]
    ending = _ENDINGS[choice % 2]
    if choice & 63 == 63:
        ending = "pdf"  # setting and reading pages takes seconds: seldom
    path = workshop() / f"certificate.{ending}"
    if choice & 64:
        facts = _forged(data[1:])
        try:
            content = RENDERERS[ending](sealed(facts))
        except Exception:  # not rendered for a forger: then the JSON of the same facts
            ending, path = "json", path.with_suffix(".json")
            content = json.dumps(sealed(facts), ensure_ascii=False, sort_keys=True).encode("utf-8", "surrogatepass")
    elif choice & 128:
        content = data[1:]
    else:
        content = edited(_certificates()[ending], data[1:])
    path.write_bytes(content)
    try:
        lines = verify_certificate(path)
    except UsageError:
        return
    assert lines
    for _, text in lines:
        assert text.isprintable(), "a line must not steer a terminal"
    if not choice & 192 and content != _certificates()[ending] and ending != "pdf":
        assert not all(holds for holds, _ in lines), "a changed certificate holds"


def certificate_pdf(data: bytes) -> None:
    """Facts out of a PDF, or Unreadable; what a damaged one makes pypdf raise is known."""
    choice = data[:1].ljust(1, b"\0")[0]
    content = data[1:] if choice & 128 else edited(_small_pdf() if choice & 64 else _certificates()["pdf"], data[1:])
    for read in (facts_of, text_lines) if choice & 65 == 65 else (facts_of,):
        with suppress(Unreadable, *(PARSER_ERRORS if read is text_lines else ())):  # as `verify_certificate` does
            read(content, "pdf")


@cache
def _small_pdf() -> bytes:
    """One page with an attachment, nothing compressed: every byte of it means something."""
    import pypdf

    writer = pypdf.PdfWriter()
    writer.add_blank_page(100, 100)
    writer.add_attachment(ATTACHMENT, b'{"schema":"fieldbook.certificate/1"}')
    file = io.BytesIO()
    writer.write(file)
    return file.getvalue()


def _zip(method: int, names: tuple[str, ...] = ("log.nmea",)) -> bytes:
    file = io.BytesIO()
    with zipfile.ZipFile(file, "w", method) as archive:
        for name in names:
            archive.writestr(zipfile.ZipInfo(name), _LINE * 20, method)
    return file.getvalue()


@cache
def _logs() -> list[bytes]:
    text = _LINE * 20
    return [
        *(
            gzip.compress(text, mtime=0),
            gzip.compress(text, mtime=0) * 2,
            bz2.compress(text),
            _zip(zipfile.ZIP_DEFLATED),
        ),
        *(_zip(zipfile.ZIP_STORED, ("__MACOSX/x", "a.nmea")), _zip(zipfile.ZIP_BZIP2), _zip(zipfile.ZIP_LZMA)),
        *(
            _zip(zipfile.ZIP_DEFLATED, ("a", "b")),
            text,
            ("\ufeff" + text.decode()).encode("utf-16-le"),
            b"\xfe\xff" + text,
        ),
    ]


def packed_log(data: bytes) -> None:
    """A file as a link: pieces and an end, or a LinkError. A packed log that was cut never ends as if it were whole."""
    choice = data[:1].ljust(1, b"\0")[0]
    content = data[1:] if choice & 128 else edited(_logs()[choice % 11], data[1:])
    path = workshop() / "log"
    path.write_bytes(content)
    link = FileLink(parse_link(f"file:{path}"), start_offset=choice & 64 and 100)
    total = 0
    try:
        link.open()
        while True:
            piece = link.read(0.0)
            assert piece
            assert len(piece) <= 2 * 65536 + 8
            total += len(piece)
    except (LinkError, LinkLost):
        pass
    except EndOfLink:
        whole = choice & 192 == 0 and choice % 11 in (0, 2) and len(content) >= 4  # else it is text
        if whole and content == _logs()[choice % 11][: len(content)]:
            assert total == len(_LINE) * 20
    finally:
        link.close()


def _certificate_seeds() -> list[bytes]:
    forged = [bytes([64 + n % 2, 0, n * 9, kind, 3]) + b"<b>" for n, kind in enumerate((0, 1, 2, 3, 4, 5, 6))]
    plain = [bytes([choice]) + script_of((4000, what, 65, 9)) for choice in (0, 1) for what in (0, 3, 5, 6, 7)]
    page = b'\x81<script type="application/json" id="facts">{"schema":"fieldbook.certificate/1"}</script>'
    return [*forged, *plain, page, b'\x80{"schema":"fieldbook.certificate/1","mark":{}}', b"\x00", b"\x01"]


def _pdf_seeds() -> list[bytes]:
    edits = [bytes([choice]) + script_of((300, what, 65, 9)) for choice in (0, 64, 65) for what in (0, 3, 5, 6, 7)]
    return [*edits, b"\x00", b"\x40", b"\x80" + _small_pdf()]


def _log_seeds() -> list[bytes]:
    whole = [bytes([n]) for n in range(11)]
    return [
        *whole,
        *(bytes([n]) + script_of((12 + 9 * n, 6, 9, 1)) for n in range(11)),
        b"\x80" + zlib.compress(_LINE),
        b"\xc0" + gzip.compress(_LINE, mtime=0),
    ]


def grid_file(data: bytes) -> None:
    """Headers of geoid and transformation grids: a place on the earth, None, or a ReductionError."""
    for name, read in (("any.tif", geotiff_layout), ("any.gsb", ntv2_head)):
        path = workshop() / name
        path.write_bytes(data)
        try:
            found = read(path)
        except ReductionError:
            continue
        if found is None:
            continue
        south, west, north, east = found.bounds if name.endswith("tif") else found[1]
        assert -90.1 <= south < north <= 90.1
        assert west < east
        assert abs(west) <= 720


_PDF = (
    b"endobj",
    b"stream\r\n",
    b"/Length 9",
    b"/Filter /FlateDecode",
    b"/Names",
    b"/Kids [1 0 R]",
    b"/EmbeddedFiles",
    b"xref",
    b"startxref 0",
    b"/Prev 0",
    b"<<",
    b">>",
    b"1 0 R",
)
_HTML = (b"<script>", b"</script>", b"<!--", b"<", b"&#0;", b"</title>", b"\x1b[2J", "\u202e".encode())
TARGETS = [
    Target("grid_file", "grid header", grid_file, lambda: kept("grid_file"), words=(b"NUM_OREC", b"\x0b\0\0\0", b"\0" * 8, b"\xff" * 8, b"\x7f\xf0\0\0\0\0\0\0"), most_bytes=900),
    Target("certificate", "certificate file", certificate, lambda: _certificate_seeds() + kept("certificate"), smoke=40, words=_HTML, most_bytes=400),
    Target("certificate_pdf", "facts of a PDF", certificate_pdf, lambda: _pdf_seeds() + kept("certificate_pdf"), smoke=100, words=_PDF, most_bytes=2000),
    Target("packed_log", "packed log", packed_log, lambda: _log_seeds() + kept("packed_log"), words=(b"PK\x03\x04", b"PK\x05\x06", b"\x1f\x8b\x08", b"BZh9", b"\xff\xfe"), most_bytes=2000),
]  # fmt: skip
