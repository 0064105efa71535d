"""Is a -wal that nobody uses whole? SQLite itself reads it up to the first frame that does not fit, and says nothing.

That is right after a power cut, whose last commit may be torn. But one damaged bit in the middle would silently take
every later commit with it, acknowledged or not. Here the frames behind the first bad one are looked at too: each carries
the checksum that continues the one before it, so commits that were whole when they were written still show. Every
commit is synced before the next begins; so if two or more stand behind the break, it is no torn end but damage.

The layout is that of sqlite.org/fileformat2.html, section 4. Only read, and only while this process has no connection
to the book (`foreign` says why). A -wal that another process begins anew meanwhile is left alone.
"""

from __future__ import annotations

import os
import struct
import sys
from array import array
from pathlib import Path

from . import foreign

_HEAD = struct.Struct(">8I")
_FRAME = struct.Struct(">6I")
_MAGIC = (0x377F0682, 0x377F0683)  # checksums over little-endian, big-endian words
MOST_BYTES = 256 * 1024 * 1024  # no recorder lets it grow that far


def wal_problem(book: Path, connections_here: int) -> str:
    """What is wrong with BOOK-wal, in words; empty if nothing is, if there is none, or if it cannot be asked now."""
    if connections_here or not _HEAD.size < foreign.size_beside(book, "-wal") <= MOST_BYTES:
        return ""
    try:
        with Path(os.path.realpath(book) + "-wal").open("rb") as file:
            data = file.read()
            file.seek(0)
            begun_anew = file.read(_HEAD.size) != data[: _HEAD.size]
    except OSError:
        return ""
    return "" if begun_anew else _problem(data)


def _problem(data: bytes) -> str:
    magic, _, page_bytes, _, salt_1, salt_2, *sums = _HEAD.unpack_from(data)
    swap = (magic == _MAGIC[1]) is (sys.byteorder == "little")
    if magic not in _MAGIC or checksum(data[:24], (0, 0), swap=swap) != tuple(sums):
        return "its -wal has a damaged head: nothing that stood in it can be read"
    step = _FRAME.size + page_bytes
    if page_bytes < 512 or page_bytes & (page_bytes - 1):
        return ""
    before, broken, commits = tuple(sums), 0, 0
    for number, start in enumerate(range(_HEAD.size, len(data) - step + 1, step), 1):
        _, after_commit, own_1, own_2, *stated = _FRAME.unpack_from(data, start)
        covered = data[start : start + 8] + data[start + _FRAME.size : start + step]
        good = (own_1, own_2) == (salt_1, salt_2) and checksum(covered, before, swap=swap) == tuple(stated)
        if not good and not broken:
            broken = number
        commits += bool(after_commit) and (number == broken or (broken > 0 and good))
        before = tuple(stated)
    if commits < 2:
        return ""
    return (
        f"its -wal is damaged in frame {broken}: {commits} commits from there on, which had been written, are not read"
    )


def checksum(data: bytes, start: tuple[int, ...], *, swap: bool) -> tuple[int, int]:
    """SQLite's checksum of pairs of 32-bit words, continued from `start`."""
    words = array("I", data)
    if swap:
        words.byteswap()
    one, two = start
    for first, second in zip(words[::2], words[1::2], strict=True):
        one = (one + first + two) & 0xFFFFFFFF
        two = (two + second + one) & 0xFFFFFFFF
    return one, two
