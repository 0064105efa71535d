"""Certificates of a few kilobytes that would fill the memory or keep the typesetter busy for hours: refused in a moment."""

from __future__ import annotations

import json
import zlib
from pathlib import Path
from time import perf_counter

import pytest

from fieldbook.certificate.verify_file import verify_certificate

START = b'{"schema":"fieldbook.certificate/1","mark":'


def _pdf(stream: bytes, filters: bytes = b"/FlateDecode") -> bytes:
    """A PDF of one empty page that has the stream as its attached facts and as its page's content."""
    objects = [
        b"<< /Type /Catalog /Pages 2 0 R /Names << /EmbeddedFiles 3 0 R >> >>",
        b"<< /Type /Pages /Kids [6 0 R] /Count 1 >>",
        b"<< /Names [(certificate.json) 4 0 R] >>",
        b"<< /Type /Filespec /F (certificate.json) /UF (certificate.json) /EF << /F 5 0 R >> >>",
        b"<< /Type /EmbeddedFile /Filter %s /Length %d >>\nstream\n%s\nendstream" % (filters, len(stream), stream),
        b"<< /Type /Page /Parent 2 0 R /MediaBox [0 0 9 9] /Contents 5 0 R >>",
    ]
    data, places = b"%PDF-1.7\n", []
    for number, text in enumerate(objects, 1):
        places.append(len(data))
        data += b"%d 0 obj\n%s\nendobj\n" % (number, text)
    table = b"".join(b"%010d 00000 n \n" % place for place in places)
    head = b"xref\n0 %d\n0000000000 65535 f \n" % (len(objects) + 1)
    return data + head + table + b"trailer << /Size 7 /Root 1 0 R >>\nstartxref\n%d\n%%%%EOF\n" % len(data)


ZEROS = zlib.compress(bytes(300_000_000), 9)
BOMBS = {
    "pdf, 300 MB of zeros": _pdf(ZEROS),
    "pdf, zeros compressed twice": _pdf(zlib.compress(ZEROS, 9), b"[/FlateDecode /FlateDecode]"),
    "pdf, deep": _pdf(zlib.compress(START + b"[" * 1_900_000)),
    "pdf, long": _pdf(zlib.compress(START + b'"' + b"x" * 60_000_000 + b'"}')),
    "json, long": START + b'"' + b"x" * 3_000_000 + b'"}',
    "json, deep": START + b"[" * 1_900_000,
    "json, digits": START + b"9" * 1_900_000 + b"}",
    "html, long": b'<script type="application/json" id="facts">' + START + b'"' + b"x" * 3_000_000 + b'"}</script>',
}


@pytest.mark.parametrize("name", BOMBS)
def test_a_bomb_is_no_certificate(name: str, tmp_path: Path) -> None:
    path = tmp_path / f"certificate.{name.split(',', maxsplit=1)[0]}"
    path.write_bytes(BOMBS[name])
    began = perf_counter()
    (line,) = verify_certificate(path)
    assert perf_counter() - began < 20
    assert line[0] is False
    assert "is not readable as a certificate" in line[1]
    assert len(json.dumps(line)) < 500
