"""Files as links: kinds told apart by content, limits against hostile archives, byte order marks, offsets."""

from __future__ import annotations

import bz2
import gzip
import io
import os
import zipfile
from pathlib import Path

import pytest

from fieldbook.links import EndOfLink, LinkError, LinkLost, make_link, open_link, parse_link
from fieldbook.links import file as file_module

LOG = b"".join(
    b"$GNGGA,10%02d%02d.00,1234.5678901,S,02345.6789012,W,4,12,0.7,123.456,M,-12.345,M,1.0,0061*7D\r\n" % divmod(n, 60)
    for n in range(3000)
)


def zipped(members: dict[str, bytes], method: int = zipfile.ZIP_DEFLATED) -> bytes:
    memory = io.BytesIO()
    with zipfile.ZipFile(memory, "w", method) as archive:
        for name, data in members.items():
            archive.writestr(name, data)
    return memory.getvalue()


def read_all(path: Path, start_offset: int = 0) -> bytes:
    link = open_link(parse_link(f"file:{path}"), start_offset=start_offset)
    link.open()  # opening an open link changes nothing
    parts = []
    try:
        while True:
            parts.append(link.read(0.25))
            assert 0 < len(parts[-1]) <= 2 * 65536
    except EndOfLink:
        with pytest.raises(EndOfLink):  # and it stays at its end
            link.read(0.25)
        return b"".join(parts)
    finally:
        link.close()


KINDS = {
    "plain": LOG,
    "gzip": gzip.compress(LOG),
    "gzip in two members": gzip.compress(LOG[:1000]) + gzip.compress(LOG[1000:]),
    "bzip2": bz2.compress(LOG),
    "zip": zipped({"day/receiver.nmea": LOG}),
    "zip stored": zipped({"receiver.nmea": LOG}, zipfile.ZIP_STORED),
    "zip with a companion": zipped({"receiver.nmea": LOG, "__MACOSX/._receiver.nmea": b"x"}),
}


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("offset", [0, 1, 65536, 65537, 100_000])
def test_kinds_are_told_by_content_and_read_whole_or_from_an_offset(tmp_path, kind: str, offset: int) -> None:
    path = tmp_path / "misleading.txt"
    path.write_bytes(KINDS[kind])
    assert read_all(path, offset) == LOG[offset:]


def test_an_offset_at_or_after_the_end_is_the_end(tmp_path) -> None:
    path = tmp_path / "a.nmea"
    path.write_bytes(LOG)
    assert read_all(path, len(LOG)) == b""
    assert read_all(path, len(LOG) + 5) == b""


@pytest.mark.parametrize("encoding", ["utf-16", "utf-16-le", "utf-16-be"])
def test_utf_16_with_a_mark_becomes_the_same_bytes(tmp_path, encoding: str) -> None:
    mark = {"utf-16": b"", "utf-16-le": b"\xff\xfe", "utf-16-be": b"\xfe\xff"}[encoding]
    path = tmp_path / "a.txt"
    path.write_bytes(mark + LOG.decode("ascii").encode(encoding))
    assert read_all(path) == LOG
    assert read_all(path, 70_001) == LOG[70_001:]
    path.write_bytes(gzip.compress(mark + LOG.decode("ascii").encode(encoding)))
    assert read_all(path) == LOG


def test_a_utf_8_mark_and_binary_are_handed_over_untouched(tmp_path) -> None:
    path = tmp_path / "a.nmea"
    for data in (b"\xef\xbb\xbf# comment\r\n" + LOG, bytes(range(256)) * 300):
        path.write_bytes(data)
        assert read_all(path) == data


def error_of(path: Path) -> LinkError:
    with pytest.raises(LinkError) as caught:
        read_all(path)
    assert caught.value.exit_code == 3
    assert caught.value.remedy
    return caught.value


def test_missing_empty_and_folder(tmp_path) -> None:
    assert error_of(tmp_path / "nowhere.nmea").code == "missing"
    empty = tmp_path / "empty.nmea"
    for data in (b"", gzip.compress(b""), bz2.compress(b""), zipped({"a.nmea": b""})):
        empty.write_bytes(data)
        assert error_of(empty).code == "empty"
    assert "is not a file" in error_of(tmp_path).text


@pytest.mark.skipif(not hasattr(os, "geteuid") or os.geteuid() == 0, reason="not run: root may read everything")
def test_permission(tmp_path) -> None:
    path = tmp_path / "a.nmea"
    path.write_bytes(LOG)
    path.chmod(0)
    assert error_of(path).code == "permission"


def test_permission_as_the_system_says_it(tmp_path, monkeypatch) -> None:
    path = tmp_path / "a.nmea"
    path.write_bytes(LOG)

    def refuse(*_: object, **__: object) -> None:
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr(Path, "open", refuse)
    assert error_of(path).code == "permission"


def test_archives_that_are_not_one_log(tmp_path) -> None:
    path = tmp_path / "a.zip"
    path.write_bytes(zipped({"a.nmea": LOG, "b.nmea": LOG}))
    assert "holds 2 files" in error_of(path).text
    path.write_bytes(zipped({}))
    assert "holds 0 files" in error_of(path).text
    locked = bytearray(zipped({"a.nmea": LOG}))
    locked[6] |= 1  # encryption flag of the local header
    locked[locked.index(b"PK\x01\x02") + 8] |= 1  # and of the directory
    path.write_bytes(locked)
    assert "is encrypted" in error_of(path).text


@pytest.mark.parametrize("kind", ["gzip", "bzip2", "zip"])
def test_damaged_archives_say_so(tmp_path, kind: str) -> None:
    path = tmp_path / "a.bin"
    whole = KINDS[kind]
    path.write_bytes(whole[: len(whole) // 2])
    assert error_of(path).code == "damaged"
    broken = bytearray(whole)
    broken[len(whole) // 2] ^= 0xFF
    path.write_bytes(broken)
    assert error_of(path).code == "damaged"


@pytest.mark.parametrize("pack", [gzip.compress, bz2.compress, lambda data: zipped({"a": data})])
def test_a_bomb_is_stopped_by_its_ratio(tmp_path, pack) -> None:
    path = tmp_path / "bomb"
    path.write_bytes(pack(b"0" * (40 << 20)))
    assert path.stat().st_size < 1 << 20
    said = error_of(path)
    assert (said.code, "200 times" in said.text) == ("too_large", True)


def test_a_file_above_the_limit_is_stopped(tmp_path, monkeypatch) -> None:
    path = tmp_path / "large.nmea"
    path.write_bytes(LOG)
    monkeypatch.setattr(file_module, "LARGEST_BYTES", 100_000)
    assert error_of(path).code == "too_large"


def test_reading_a_closed_file_is_a_lost_link(tmp_path) -> None:
    path = tmp_path / "a.nmea"
    path.write_bytes(LOG)
    link = make_link(parse_link(f"file:{path}"))
    with pytest.raises(LinkLost):
        link.read(0.25)
    link.open()
    link.close()
    link.close()
    with pytest.raises(LinkLost):
        link.read(0.25)
