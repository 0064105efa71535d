"""What fuzzing found once, smallest form first seen; each failed before its repair."""

from __future__ import annotations

import io
import json
import lzma
import sqlite3
import zipfile
from contextlib import closing
from pathlib import Path
from time import perf_counter

import pytest

from fieldbook.book import lines
from fieldbook.book.store import Book
from fieldbook.certificate.identity import sealed
from fieldbook.certificate.issue import RENDERERS
from fieldbook.certificate.verify_file import verify_certificate
from fieldbook.clock import FakeClock
from fieldbook.commands import assignments
from fieldbook.errors import BookError, LinkError, ReductionError, UsageError
from fieldbook.links.address import parse_link
from fieldbook.links.file import FileLink
from fieldbook.model.item import Item, ItemKind
from fieldbook.model.recorder import RecorderState
from fieldbook.nmea.second_reader import second_readings
from fieldbook.reduce.geoid import read_record
from fieldbook.settings.session import load_session, session_from_tree
from fieldbook.settings.user import user_classes

from .mutations import mend

SAMPLE = Path(__file__).parents[2] / "sample_sessions" / "kestrel-ridge-1" / "session.toml"
GOLDEN = Path(__file__).parents[1] / "golden" / "certificate_kr07.json"
HOSTILE_TOML = {
    "arrays in arrays": b"x = " + b"[" * 5000,
    "tables in tables": b"x = " + b"{a=" * 3000,
    "an integer of 5,000 digits": b"x = " + b"9" * 5000,
    "an exponent no number has": b"x = 1e99999999999999999999",
}


@pytest.mark.parametrize("text", HOSTILE_TOML.values(), ids=HOSTILE_TOML)
def test_hostile_toml_is_one_clear_error(tmp_path: Path, text: bytes) -> None:
    path = tmp_path / "hostile.toml"
    path.write_bytes(text)
    with pytest.raises(UsageError):
        load_session(path)
    with pytest.raises(UsageError):
        user_classes(path)


@pytest.mark.parametrize("text", HOSTILE_TOML.values(), ids=HOSTILE_TOML)
def test_hostile_toml_of_the_command_line_and_of_a_geoid_record(tmp_path: Path, text: bytes) -> None:
    with pytest.raises(UsageError):
        assignments.in_table("setup", ["height=" + text.decode().removeprefix("x = ")])
    path = tmp_path / "grid.toml"
    path.write_bytes(text)
    with pytest.raises(ReductionError):
        read_record(path)


@pytest.mark.parametrize("number", [b"1e999999", b"1e-999999", b"0e999999", b"1e400", b"0." + b"1" * 4000])
def test_a_number_of_a_session_has_a_size_a_person_would_write(tmp_path: Path, number: bytes) -> None:
    """Written out, 1e999999 is a megabyte; 1e400 is no float."""
    path = tmp_path / "session.toml"
    text = SAMPLE.read_bytes()
    line = next(one for one in text.splitlines() if one.startswith(b"horizontal_95_m"))
    path.write_bytes(text.replace(line, b"horizontal_95_m = " + number))
    with pytest.raises(UsageError, match="horizontal_95_m"):
        load_session(path)


def test_huge_whole_numbers_of_a_session(tmp_path: Path) -> None:
    text = SAMPLE.read_bytes()
    line = next(one for one in text.splitlines() if one.startswith(b"occupations"))
    path = tmp_path / "session.toml"
    path.write_bytes(text.replace(line, b"occupations = 0x" + b"f" * 5000))
    with pytest.raises(UsageError, match="occupations"):
        load_session(path)
    line = next(one for one in text.splitlines() if one.startswith(b"accept_quality"))
    path.write_bytes(text.replace(line, b"accept_quality = [0x" + b"f" * 5000 + b"]"))
    with pytest.raises(UsageError, match="accept_quality"):
        load_session(path)
    tree = load_session(SAMPLE).tree
    stored = {**tree, "requirement": {**tree["requirement"], "occupations": "9" * 5000}}
    with pytest.raises(UsageError, match="occupations"):
        session_from_tree(json.loads(json.dumps(stored)))


@pytest.mark.parametrize("field", ["9" * 40, "1E9999999", "1e5", "1_0", "nan", "-inf", "1" * 38 + ".5"])
def test_the_second_reader_leaves_out_numbers_that_nmea_does_not_know(field: str) -> None:
    gga = f"$GNGGA,011000.00,{field},S,{field},E,4,12,0.7,{field},M,{field},M,1.0,0042*00\r\n".encode()
    (reading,) = second_readings([mend(gga)])
    assert reading.latitude_e8min is None
    assert reading.longitude_e8min is None
    assert reading.altitude_e5m is None
    assert reading.separation_e5m is None


def _damaged_zip(method: int) -> bytes:
    file = io.BytesIO()
    with zipfile.ZipFile(file, "w", method) as archive:
        archive.writestr("log.nmea", b"$GNGGA,011000.00*00\r\n" * 200)
    data = bytearray(file.getvalue())
    data[50:60] = bytes(10)
    return bytes(data)


@pytest.mark.parametrize("method", [zipfile.ZIP_DEFLATED, zipfile.ZIP_BZIP2, zipfile.ZIP_LZMA])
def test_a_damaged_archive_is_a_link_error(tmp_path: Path, method: int) -> None:
    path = tmp_path / "log.zip"
    path.write_bytes(_damaged_zip(method))
    link = FileLink(parse_link(f"file:{path}"))
    with pytest.raises(LinkError):
        link.open()
    link.close()


@pytest.mark.parametrize("text", ["udp://h:1?from=a%2541", "udp://h:1?from=a%26b", "file:a /."])
def test_the_canonical_text_of_an_address_is_the_same_address(text: str) -> None:
    try:
        address = parse_link(text, Path("/here"))
    except UsageError:
        return
    assert parse_link(address.text, Path("/there")) == address


def test_a_pdf_whose_attachments_cannot_be_read(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """pypdf raises its own kind of error when attachments are looked up, not only when the file is opened."""
    import pypdf
    from pypdf.errors import PdfReadError

    def broken(_self: object) -> object:
        raise PdfReadError("damaged name tree")

    monkeypatch.setattr(pypdf.PdfReader, "attachments", property(broken))
    monkeypatch.setattr(pypdf.PdfReader, "__init__", lambda *_arguments: None)
    path = tmp_path / "certificate.pdf"
    path.write_bytes(b"%PDF-1.7\n")
    ((holds, text),) = verify_certificate(path)
    assert not holds
    assert "not readable" in text


_FACTS = b'<script type="application/json" id="facts">'


@pytest.mark.parametrize("piece", [_FACTS, b"<script ", b"<title>", b"<", b"</", b"<b>x\n"])
def test_a_hostile_page_is_read_in_linear_time(tmp_path: Path, piece: bytes) -> None:
    """Four million bytes; what grows with the square of the size would take an hour."""
    path = tmp_path / "certificate.html"
    sound = RENDERERS["html"](sealed(json.loads(GOLDEN.read_bytes())))
    path.write_bytes(sound + piece * (4_000_000 // len(piece)))
    start = perf_counter()
    lines = verify_certificate(path)
    assert perf_counter() - start < 15
    assert not all(holds for holds, _ in lines)


def test_a_file_larger_than_any_certificate_is_not_read(tmp_path: Path) -> None:
    path = tmp_path / "certificate.json"
    with path.open("wb") as file:
        file.truncate(1 << 40)  # a terabyte of nothing
    ((holds, text),) = verify_certificate(path)
    assert not holds
    assert "larger" in text


def test_a_certificate_that_may_not_be_read(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "certificate.json"
    path.write_bytes(b"{}")

    def refused(_path: Path) -> bytes:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(Path, "read_bytes", refused)
    with pytest.raises(UsageError, match="cannot be read"):
        verify_certificate(path)


CLOCK = FakeClock(0, 1_804_122_600_000)


def _open_book(folder: Path) -> Path:
    path = folder / "forged.book"
    body = {"occupation": 1, "mark": "KR-07", "session": load_session(SAMPLE).tree}
    with Book.create(path, clock=CLOCK, observer="R. Kell") as book:
        book.append("occupation", {**body, "link": "file:receiver.nmea", "simulated": False}, "R. Kell")
        book.write_burst(1, [Item(ItemKind.BYTES, b"only bytes")], state=RecorderState(1))
    return path


def _one_byte(path: Path, place: int, value: int) -> None:
    data = bytearray(path.read_bytes())
    data[place] = value
    path.write_bytes(data)


def test_a_bit_that_makes_received_bytes_a_text_is_a_book_error(tmp_path: Path) -> None:
    """One bit of a cell's serial type, and SQLite hands out str where STRICT promised a BLOB."""
    path = _open_book(tmp_path)
    data = path.read_bytes()
    blob = 2 * len(b"only bytes") + 12
    _one_byte(path, data.rindex(bytes([blob]), 0, data.index(b"only bytes")), blob + 1)
    with Book.open(path, clock=CLOCK) as book, pytest.raises(BookError):
        book.received_digest(1)


def test_a_damaged_heartbeat_is_none_as_its_docstring_says(tmp_path: Path) -> None:
    path = _open_book(tmp_path)
    _one_byte(path, path.read_bytes().index(b'"occupation": 1, "mark"') + 3, 0xF6)
    with Book.open(path, clock=CLOCK) as book:
        assert book.recorder_state() is None


def test_a_tail_whose_ids_are_used_up_is_a_book_error(tmp_path: Path) -> None:
    """A forged id of 2**63 - 1 leaves no next one; the recorder must meet a BookError."""
    path = _open_book(tmp_path)
    with closing(sqlite3.connect(path)) as connection, connection:
        connection.execute("INSERT INTO raw_tail VALUES (?, 1, 'B', NULL, NULL, x'00')", (2**63 - 1,))
    with Book.open(path, clock=CLOCK, write=True) as book, pytest.raises(BookError):
        book.write_burst(1, [Item(ItemKind.BYTES, b"x")])


def test_a_pressed_piece_with_half_a_width_is_a_value_error() -> None:
    stored = lzma.compress(bytes.fromhex("000000000d0d"), lzma.FORMAT_RAW, filters=lines._FILTERS)
    with pytest.raises(ValueError, match="piece"):
        lines.unpressed(lines._SIZES.pack(lines.SMALL, len(stored), 120) + stored, 120)
