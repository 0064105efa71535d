"""ANTEX 1.4: which receiver antennas a file holds, and the values of one block.

In: a file of others. Out: its header, the receiver antennas in it with the lines of their blocks, and, for the one that
is chosen, an `AntennaCalibration` in metres. The file is walked once by its labels (columns 61 to 80); only the block
that is asked for is read to its last number, so that one damaged satellite does not close a file of hundreds.

What can go wrong is an `AntexError` that names file, line and remedy. A relative calibration is told, and is for the
caller to refuse: its values are differences from a reference antenna and do not mix with absolute ones.

Source: M. Rothacher, R. Schmid, ANTEX: The Antenna Exchange Format, version 1.4, 15 September 2010; columns from
memory (high), conventions of sign and direction as read in its section 3.
"""

from __future__ import annotations

import hashlib
import re
import stat
from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path

from fieldbook.errors import UsageError
from fieldbook.model.calibration import AntennaCalibration
from fieldbook.settings.antex_block import AntexError, Lines, parse_lines, shown

MAX_BYTES = 64 * 1024 * 1024  # all satellites and receiver antennas of the trade are some 40 MB
MAX_BLOCK_BYTES = 1024 * 1024
MAX_LINE = 4096
MAX_BLOCKS = 20_000
VERSIONS = ("1.4", "1.3")  # 1.3 differs in the codes of satellites only
_UNPRINTABLE = re.compile(r"[^\x20-\x7e]")

__all__ = ["AntexBlock", "AntexError", "AntexFile", "block_calibration", "read_antex"]


@dataclass(frozen=True)
class AntexBlock:
    """One receiver antenna of a file: `entry` counts them from 1, satellites left out."""

    entry: int
    line: int  # of START OF ANTENNA
    type_field: str  # 20 columns as in the file, blanks at the end gone
    serial: str
    text: str  # all its lines, printable ASCII


@dataclass(frozen=True)
class AntexFile:
    """A file. `absolute` False: values are relative to `reference`."""

    name: str
    sha256: str
    version: str
    absolute: bool
    reference: str
    blocks: tuple[AntexBlock, ...]
    satellites: int


def read_antex(path: Path) -> AntexFile:
    """Header and receiver antennas of a file.

    Raises:
        AntexError: it cannot be read, is no ANTEX 1.4 file, or is broken; with the line.
    """
    try:
        state = path.stat()
        if not stat.S_ISREG(state.st_mode):
            raise AntexError(f"The ANTEX file {path} cannot be read: it is no file.", "Check the path.")
        if state.st_size > MAX_BYTES:
            raise AntexError(
                f"{path} has {state.st_size // 1_000_000} MB, more than an ANTEX file has.",
                "Name the ANTEX file itself.",
            )
        data = path.read_bytes()
    except (OSError, ValueError) as problem:  # a path may hold what no path holds
        why = problem.strerror if isinstance(problem, OSError) and problem.strerror else str(problem)
        raise AntexError(f"The ANTEX file {path} cannot be read: {why}.", "Check the path.") from None
    if b"\x00" in data[:4096]:
        raise AntexError(f"{path.name} is no text file.", "Unpack it first; an ANTEX file is plain text.")
    lines = _lines(path.name, data)
    version, absolute, reference = _header(path.name, lines)
    blocks, satellites = _blocks(path.name, lines)
    return AntexFile(
        name=path.name,
        sha256=hashlib.sha256(data).hexdigest(),
        version=version,
        absolute=absolute,
        reference=reference,
        blocks=tuple(blocks),
        satellites=satellites,
    )


@lru_cache(maxsize=32)
def block_calibration(text: str, name: str = "calibration", first_line: int = 1) -> AntennaCalibration:
    """The values of a block.

    Args:
        text: lines from START OF ANTENNA to END OF ANTENNA.
        name: file name, for errors.
        first_line: line of the file the text begins at.

    Raises:
        AntexError: anything in it that is not as the format says; with the line.
    """
    if len(text) > MAX_BLOCK_BYTES:
        raise AntexError(f"{name}: a block of {len(text)} bytes is no antenna.", "Name the ANTEX file itself.")
    return parse_lines(Lines(name, first_line, text.split("\n")))


def _lines(name: str, data: bytes) -> Iterator[tuple[int, str]]:
    """(number, line) with everything but printable ASCII made `?`."""
    for number, raw in enumerate(data.decode("latin-1").splitlines(), start=1):
        if len(raw) > MAX_LINE:
            raise AntexError(
                f"{name}, line {number}: {len(raw)} characters.", "An ANTEX line has no more than some 700."
            )
        yield number, _UNPRINTABLE.sub("?", raw.replace("\t", " ")).rstrip()


def _header(name: str, lines: Iterator[tuple[int, str]]) -> tuple[str, bool, str]:
    version: str | None = None
    absolute: bool | None = None
    reference, number = "", 0
    for number, line in lines:
        label = line[60:80].strip()
        if number == 1 and label != "ANTEX VERSION / SYST":
            raise AntexError(
                f"{name}, line 1: no ANTEX header{shown(line)}.",
                "The first line of an ANTEX file bears ANTEX VERSION / SYST in columns 61 to 80; fetch the file again.",
            )
        if label == "ANTEX VERSION / SYST":
            version = line[:8].strip()
            if version not in VERSIONS:
                raise AntexError(f'{name}, line {number}: ANTEX version "{version}".', "This reads version 1.4.")
        elif label == "PCV TYPE / REFANT":
            if line[:1] not in ("A", "R"):
                raise AntexError(
                    f"{name}, line {number}: PCV TYPE is neither A nor R{shown(line)}.",
                    "A calibration that does not say whether it is absolute cannot be used.",
                )
            absolute, reference = line[0] == "A", line[20:40].strip()
        elif label == "END OF HEADER":
            break
        elif label != "COMMENT":
            raise AntexError(
                f"{name}, line {number}: no header line{shown(line)}.", "The header ends with END OF HEADER."
            )
    else:
        raise AntexError(f"{name}, line {number}: the header does not end.", "The file is cut off; fetch it again.")
    if version is None or absolute is None:
        raise AntexError(f"{name}: the header has no PCV TYPE / REFANT.", "Absolute or relative must be stated.")
    return version, absolute, reference


def _blocks(name: str, lines: Iterator[tuple[int, str]]) -> tuple[list[AntexBlock], int]:
    blocks: list[AntexBlock] = []
    satellites, begun, held, size = 0, 0, list[str](), 0
    number = 0
    for number, line in lines:
        label = line[60:80].strip()
        if label == "START OF ANTENNA":
            if begun:
                raise _unended(name, begun, number)
            begun, held, size = number, [], 0
        if not begun:
            if line.strip() and label != "COMMENT":
                raise AntexError(
                    f"{name}, line {number}: outside any antenna{shown(line)}.",
                    "Lines between antennas are comments or blank.",
                )
            continue
        held.append(line)
        size += len(line) + 1
        if size > MAX_BLOCK_BYTES:
            raise _unended(name, begun, number)
        if label == "END OF ANTENNA":
            block = _block(name, begun, held, len(blocks) + 1)
            if block is None:
                satellites += 1
            else:
                blocks.append(block)
            if len(blocks) + satellites > MAX_BLOCKS:
                raise AntexError(f"{name}: more than {MAX_BLOCKS} antennas.", "Name the ANTEX file itself.")
            begun = 0
    if begun:
        raise _unended(name, begun, number)
    return blocks, satellites


def _unended(name: str, begun: int, number: int) -> UsageError:
    return AntexError(
        f"{name}, line {number}: the antenna that begins in line {begun} does not end.",
        "The file is cut off or damaged there; fetch it again.",
    )


def _block(name: str, begun: int, held: list[str], entry: int) -> AntexBlock | None:
    """The receiver antenna of these lines; None for a satellite, which bears its codes in columns 41 to 60."""
    for offset, line in enumerate(held):
        if line[60:80].strip() == "TYPE / SERIAL NO":
            if line[40:60].strip():
                return None
            type_field = line[:20].rstrip()
            if not type_field.strip():
                raise AntexError(f"{name}, line {begun + offset}: the antenna has no type.", "Fetch the file again.")
            return AntexBlock(entry, begun, type_field, line[20:40].strip(), "\n".join(held))
    raise AntexError(f"{name}, line {begun}: an antenna without TYPE / SERIAL NO.", "Fetch the file again.")
