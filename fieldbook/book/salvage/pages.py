"""Page images of a book: the file overlaid with the frames of its -wal, and every older image behind them.

Frames after the last commit are left out: what they hold was never acknowledged. Frames of an earlier round of the -wal
(other salts) were written back long ago and are older images. Checksums of frames are not asked: a frame with a wrong
byte still holds rows, and rows have hashes of their own.
"""

from __future__ import annotations

import struct
import sys
from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, field

from fieldbook.book.wal import checksum

PAGE_SIZES = tuple(1 << power for power in range(9, 17))
OUR_PAGE_SIZE = 1024
_WAL_HEAD, _FRAME_HEAD = 32, 24
_FRAME = struct.Struct(">IIII")  # page, size of the file after a commit (else 0), two salts
MAGIC = b"SQLite format 3\0"
_SUMS = struct.Struct(">2I")


@dataclass(frozen=True)
class Pages:
    """Images of pages of `size` bytes; page numbers begin with 1."""

    size: int
    data: bytes  # the file
    overlay: dict[int, bytes] = field(default_factory=dict)  # newest committed image of the -wal
    older: tuple[tuple[int, bytes], ...] = ()  # (page, image) of the -wal, newest first

    @property
    def count(self) -> int:
        """Pages that have an image."""
        return max(-(-len(self.data) // self.size), max(self.overlay, default=0))

    def newest(self, number: int) -> bytes:
        """The newest image of a page, filled up with zeros where the file is cut off; empty beyond its end."""
        found = self.overlay.get(number)
        return self.in_file(number) if found is None else found

    def in_file(self, number: int) -> bytes:
        """The image of a page in the file itself."""
        image = self.data[(number - 1) * self.size : number * self.size] if number > 0 else b""
        return image.ljust(self.size, b"\0") if image else b""

    def images(self) -> Iterator[tuple[int, bytes, bool]]:
        """(page, image, newest) of all images, the newest ones first."""
        for number in range(1, self.count + 1):
            image = self.newest(number)
            if image:
                yield number, image, True
        for number, image in self.older:
            yield number, image, False
        for number in self.overlay:
            image = self.in_file(number)
            if image:
                yield number, image, False


def page_size_of(data: bytes, wal: bytes) -> int:
    """The page size as file or -wal state it; ours where neither makes sense."""
    stated = int.from_bytes(data[16:18], "big")
    stated = 65536 if stated == 1 else stated
    if data[: len(MAGIC)] == MAGIC and stated in PAGE_SIZES:
        return stated
    in_wal = int.from_bytes(wal[8:12], "big")
    return in_wal if wal[:3] == b"\x37\x7f\x06" and in_wal in PAGE_SIZES else OUR_PAGE_SIZE


def pages_of(data: bytes, wal: bytes, size: int) -> Pages:
    """The images of a file and its -wal."""
    frames = list(_frames(wal, size))
    if not frames:
        return Pages(size, data)
    salts = _last_round(wal, frames)
    current = [place for place, frame in enumerate(frames) if frame[2] == salts]
    committed = max((place for place in current if frames[place][1]), default=-1)
    overlay: dict[int, bytes] = {}
    older: list[tuple[int, bytes]] = []
    for place, (number, _, found, image) in enumerate(frames):
        if found == salts and place > committed:
            continue
        if found == salts:
            if number in overlay:
                older.append((number, overlay[number]))
            overlay[number] = image
        else:
            older.append((number, image))
    return Pages(size, data, overlay, tuple(reversed(older)))


def commits_behind_a_break(wal: bytes, size: int) -> int:
    """Commits of the last round of a -wal that SQLite does not see, because a frame before them is damaged.

    SQLite stops at the first frame whose checksum fails and takes the rest for never written. One such commit is what a
    power cut may leave; more are damage, because every commit is on the disk before the next one begins.
    """
    frames = list(_frames(wal, size))
    if not frames:
        return int(len(wal) > 0)
    salts = _last_round(wal, frames)
    behind = frames[_whole_frames(wal, size) :]
    seen = sum(commit > 0 for _, commit, found, _ in behind if found == salts)
    torn = (len(wal) - _WAL_HEAD) % (size + _FRAME_HEAD) > 0 and frames[-1][2] == salts
    return max(seen, int(torn))


def _last_round(wal: bytes, frames: list[tuple[int, int, bytes, bytes]]) -> bytes:
    """The salts of the frames written last; if the head is damaged, those of most frames."""
    counts = Counter(found for _, _, found, _ in frames)
    return wal[16:24] if wal[16:24] in counts else counts.most_common(1)[0][0]


def _whole_frames(wal: bytes, size: int) -> int:
    """How many frames from the first on have the checksum that SQLite asks for (section 4.2)."""
    if wal[:3] != b"\x37\x7f\x06" or int.from_bytes(wal[8:12], "big") != size:
        return 0
    swap = (wal[3] == 0x83) is (sys.byteorder == "little")
    sums = checksum(wal[:24], (0, 0), swap=swap)
    if wal[24:32] != _SUMS.pack(*sums):
        return 0
    count = 0
    for start in range(_WAL_HEAD, len(wal) - size - _FRAME_HEAD + 1, size + _FRAME_HEAD):
        covered = wal[start : start + 8] + wal[start + _FRAME_HEAD : start + _FRAME_HEAD + size]
        sums = checksum(covered, sums, swap=swap)
        if wal[start + 8 : start + 16] != wal[16:24] or wal[start + 16 : start + 24] != _SUMS.pack(*sums):
            break
        count += 1
    return count


def _frames(wal: bytes, size: int) -> Iterator[tuple[int, int, bytes, bytes]]:
    """(page, size of the file after a commit, salts, image) of every frame, in order."""
    step = _FRAME_HEAD + size
    for start in range(_WAL_HEAD, len(wal) - step + 1, step):
        number, commit, _, _ = _FRAME.unpack_from(wal, start)
        if 0 < number < 2**31:
            yield number, commit, wal[start + 8 : start + 16], wal[start + _FRAME_HEAD : start + step]
