"""A recorded log as a link: plain, gzip, bzip2 or a zip archive with one file, told apart by content.

A file is hostile until proved otherwise: inflated size and ratio are limited, and nothing but a regular file is
read. NMEA text packs to about a tenth; a file that inflates two hundred times is no log. A byte order mark is
tolerated: UTF-8 text is handed over as it is, UTF-16 text (a terminal program's save file) is turned into UTF-8,
and those are then the received bytes.
"""

from __future__ import annotations

import bz2
import codecs
import gzip
import itertools
import struct
import zipfile
import zlib
from collections.abc import Iterator
from contextlib import ExitStack, contextmanager
from pathlib import Path
from typing import IO, cast

from fieldbook.errors import LinkError
from fieldbook.links.address import LinkAddress
from fieldbook.links.base import PIECE_BYTES, EndOfLink, LinkLost

LARGEST_BYTES = 2 << 30  # inflated; a day at 20 Hz with all sentences is below it
LARGEST_RATIO = 200
RATIO_FROM_BYTES = 16 << 20  # smaller ones cannot do harm, whatever their ratio
_DAMAGED_REMEDY = "Copy the file from the receiver again, or unpack what can be saved and name that."
_DAMAGE = (
    *(OSError, zlib.error, zipfile.BadZipFile, struct.error, RuntimeError, NotImplementedError, ValueError),
    *(ArithmeticError, LookupError, AssertionError, MemoryError),
)
_ZIP_METHODS = (zipfile.ZIP_STORED, zipfile.ZIP_DEFLATED, zipfile.ZIP_BZIP2)  # LZMA asks for any memory it likes


class FileLink:
    """One log file.

    Args:
        address: a `file` address.
        start_offset: bytes to skip, counted as they are handed over (inflated, converted).
    """

    def __init__(self, address: LinkAddress, *, start_offset: int = 0) -> None:
        self.address = address
        self.start_offset = start_offset
        self._path = address.path or Path()
        self._stack = ExitStack()
        self._pieces: Iterator[bytes] | None = None
        self._held = b""  # read already, not yet handed over

    def open(self) -> None:
        """Open the file, tell its kind and skip to the start offset.

        Raises:
            LinkError: missing, permission, empty, damaged, too_large; other: not a regular file, or an archive that
                is not one log.
        """
        if self._pieces is not None:
            return
        try:
            self._open()
        except BaseException:
            self.close()
            raise

    def _open(self) -> None:
        raw, size = self._raw()
        with _damage_of(self._path):
            stream, packed_bytes = self._unpacked(raw, size)
            self._pieces = _converted(_limited(stream, packed_bytes, self._path))
            self._held = next(self._pieces, b"")
        if not self._held:
            raise _empty(self._path)
        self._skip(self.start_offset)

    def _raw(self) -> tuple[IO[bytes], int]:
        path = self._path
        try:
            if not path.exists():
                raise LinkError(f"There is no file {path}.", "Correct the path of the link.", code="missing")
            if not path.is_file():
                raise LinkError(
                    f"{path} is not a file.", "Name one log file; a port is written serial:PORT?baud=...", code="other"
                )
            size = path.stat().st_size
            raw = self._stack.enter_context(path.open("rb"))
        except PermissionError as error:
            raise LinkError(
                f"This user may not read {path}.", "Change the file's permissions.", code="permission"
            ) from error
        except (OSError, ValueError) as error:
            raise LinkError(f"{path} cannot be read: {error}.", "Copy the file again.", code="other") from error
        if size == 0:
            raise _empty(path)
        return raw, size

    def _unpacked(self, raw: IO[bytes], size: int) -> tuple[IO[bytes], int | None]:
        """The stream of the log's own bytes, and the size of the packed form (None = plain)."""
        head = raw.read(4)
        raw.seek(0)
        if head.startswith(b"\x1f\x8b"):
            return cast("IO[bytes]", self._stack.enter_context(gzip.GzipFile(fileobj=raw))), size
        if head.startswith(b"BZh"):
            return cast("IO[bytes]", self._stack.enter_context(bz2.BZ2File(raw))), size
        if head.startswith((b"PK\x03\x04", b"PK\x05\x06")):
            return self._zip_member(raw)
        return raw, None

    def _zip_member(self, raw: IO[bytes]) -> tuple[IO[bytes], int]:
        archive = self._stack.enter_context(zipfile.ZipFile(raw))
        members = [item for item in archive.infolist() if not item.is_dir() and not _resource_fork(item)]
        if len(members) != 1:
            raise LinkError(
                f"The archive {self._path} holds {len(members)} files, not one.",
                "Unpack it and name one log.",
                code="other",
            )
        if members[0].flag_bits & 1:
            raise LinkError(
                f"The archive {self._path} is encrypted.", "Unpack it and name the log inside.", code="other"
            )
        if members[0].compress_type not in _ZIP_METHODS:
            raise LinkError(
                f"The archive {self._path} is packed in a way that is not read here.",
                "Unpack it and name the log inside.",
                code="other",
            )
        return self._stack.enter_context(archive.open(members[0])), members[0].compress_size

    def _skip(self, count: int) -> None:
        while count:
            piece = self._next()
            if not piece:
                return
            self._held = piece[count:]
            count -= min(count, len(piece))

    def _next(self) -> bytes:
        """The next piece, b"" at the end."""
        if self._held:
            piece, self._held = self._held, b""
            return piece
        if self._pieces is None:
            raise LinkLost("the file is not open")
        with _damage_of(self._path):
            return next(self._pieces, b"")

    def read(self, timeout_s: float) -> bytes:  # noqa: ARG002 - a file makes nobody wait
        """The next piece of up to 64 KiB (UTF-16: up to twice that).

        Raises:
            EndOfLink: the last byte was handed over.
            LinkError: damaged, or larger than the limits.
        """
        piece = self._next()
        if not piece:
            raise EndOfLink
        return piece

    def close(self) -> None:
        """Close the file."""
        self._pieces, self._held = None, b""
        self._stack.close()
        self._stack = ExitStack()


def _limited(stream: IO[bytes], packed_bytes: int | None, path: Path) -> Iterator[bytes]:
    """Pieces of the inflated stream, stopped at the limits.

    Raises:
        LinkError: too_large.
    """
    total = 0
    while piece := stream.read(PIECE_BYTES):
        total += len(piece)
        if total > LARGEST_BYTES:
            raise LinkError(
                f"{path} holds more than {LARGEST_BYTES >> 30} GiB.", "Cut the log into occupations.", code="too_large"
            )
        if packed_bytes is not None and total > RATIO_FROM_BYTES and total > LARGEST_RATIO * packed_bytes:
            raise LinkError(
                f"{path} inflates to more than {LARGEST_RATIO} times its size: this is no receiver log.",
                "Unpack it elsewhere and look at what it holds.",
                code="too_large",
            )
        yield piece


def _converted(pieces: Iterator[bytes]) -> Iterator[bytes]:
    """UTF-16 text with a byte order mark as UTF-8; anything else untouched."""
    first = next(pieces, b"")
    if not first.startswith((codecs.BOM_UTF16_LE, codecs.BOM_UTF16_BE)):
        if first:
            yield first
        yield from pieces
        return
    decoder = codecs.getincrementaldecoder("utf-16")(errors="replace")
    for piece in itertools.chain([first], pieces):
        if text := decoder.decode(piece):
            yield text.encode("utf-8")
    if text := decoder.decode(b"", final=True):
        yield text.encode("utf-8")


@contextmanager
def _damage_of(path: Path) -> Iterator[None]:
    """Whatever an unpacker raises on a damaged file, as one clear error."""
    try:
        yield
    except EOFError as error:
        raise LinkError(f"{path} ends in the middle of its packed data.", _DAMAGED_REMEDY, code="damaged") from error
    except _DAMAGE as error:
        raise LinkError(f"{path} is damaged: {error}.", _DAMAGED_REMEDY, code="damaged") from error


def _empty(path: Path) -> LinkError:
    return LinkError(f"{path} is empty.", "Name the receiver's log.", code="empty")


def _resource_fork(item: zipfile.ZipInfo) -> bool:
    """A companion that some systems add to every archived file."""
    return item.filename.startswith("__MACOSX/")
