"""Rows of table leaves, by their shape, from one page image or from the ruins of one.

A row that runs over into overflow pages is followed along their chain. Where the chain is broken (a page zeroed, a
pointer that leads nowhere) the pages behind the break are looked for where a freshly written book has them, one behind
the other, and only taken if their own chain then ends exactly where the row must end; what is missing in between is a
hole, filled with zeros and named. Text and bytes stay bytes here: damaged text must not stop the reading.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass

from .pages import Pages

Value = int | float | bytes | None
LEAF = 0x0D
TREE_PAGES = (LEAF, 0x05, 0x0A, 0x02)
MOST_BYTES = 64 * 1024 * 1024
MOST_JUMPS = 64
_INTEGER_BYTES = {1: 1, 2: 2, 3: 3, 4: 4, 5: 6, 6: 8}
# headers of our rows, to be found where a page's own head is gone: NULL, 24 letters of time ... two hashes; six numbers,
# a hash; NULL, a number, one letter
_HEADS = re.compile(
    rb"[\x08-\x14](?:\x00\x3d.{3,12}?\x81\x0d\x81\x0d|[\x00-\x09]{6}\x81\x0d.|\x00[\x01-\x09]\x0f[\x00-\x06]{2}.)", re.S
)


@dataclass(frozen=True)
class Row:
    """One row: rowid and column values (text as bytes). `holes` are the missing places (from, to) of the last column
    that is text or bytes; `loose`: found without the page's own list of cells."""

    rowid: int
    values: tuple[Value, ...]
    kinds: str  # one letter a column: n(ull), i(nteger), r(eal), t(ext), b(ytes)
    holes: tuple[tuple[int, int], ...] = ()
    page: int = 0
    newest: bool = True
    loose: bool = False
    overflows: bool = False


def rows(pages: Pages, chains: Chains) -> Iterator[Row]:
    """Every row that any page image holds, the newest images first."""
    usable = pages.size
    for number, image, newest in pages.images():
        start = 100 if number == 1 else 0
        places = cell_places(image, start) if image[start] == LEAF else None
        found: set[int] = set()
        for place in places or ():
            row = _row(image, place, usable, chains, number, newest=newest, loose=False)
            if row is not None:
                found.add(place)
                yield row
        if places is None or len(found) < len(places):
            for place in loose_places(image):
                row = None if place in found else _row(image, place, usable, chains, number, newest=newest, loose=True)
                if row is not None:
                    yield row


def cell_places(image: bytes, start: int) -> list[int] | None:
    """Where the cells of a leaf begin; None if its head makes no sense."""
    count = int.from_bytes(image[start + 3 : start + 5], "big")
    first = start + 8
    if first + 2 * count > len(image):
        return None
    places = [int.from_bytes(image[first + 2 * n : first + 2 * n + 2], "big") for n in range(count)]
    good = [place for place in places if first + 2 * count <= place < len(image) - 3]
    return good if len(good) == count or good else None


def loose_places(image: bytes) -> Iterator[int]:
    """Where cells of our tables seem to begin, found by the heads of their rows."""
    for match in _HEADS.finditer(image):
        for back in range(2, 13):  # size and rowid stand before the head, one to nine bytes each
            place = match.start() - back
            if place < 0:
                break
            _, after = varint(image, place)
            _, after = varint(image, after)
            if after == match.start():
                yield place


def varint(data: bytes, place: int) -> tuple[int, int]:
    """SQLite's integer of one to nine bytes, and the place behind it."""
    value = 0
    for count in range(9):
        if place >= len(data):
            return 0, place + 1
        byte = data[place]
        place += 1
        if count == 8:
            return (value << 8) | byte, place
        value = (value << 7) | (byte & 0x7F)
        if byte < 0x80:
            break
    return value, place


class Chains:
    """Overflow chains of the newest images."""

    def __init__(self, pages: Pages) -> None:
        self._pages = pages
        self._lengths: dict[int, int] = {}
        self._used: set[int] = set()

    def without_rows(self) -> Iterator[bytes]:
        """Contents of chains that no row led to: the leaf they belong to is lost. Call it after all rows."""
        heads, followers = [], set()
        for number in range(2, self._pages.count + 1):
            image = self._pages.newest(number)
            if number not in self._used and image and image[0] not in TREE_PAGES and any(image):
                heads.append(number)
                followers.add(int.from_bytes(image[:4], "big"))
        for number in heads:
            if number not in followers:
                yield b"".join(self._pages.newest(page)[4:] for page in self._trail(number, self._pages.count))

    def content(self, first: int, size: int) -> tuple[bytes, list[tuple[int, int]]]:
        """`size` bytes along the chain that begins at a page, and their holes (from, to)."""
        room = self._pages.size - 4
        wanted = -(-size // room)
        parts: list[bytes] = []
        holes: list[tuple[int, int]] = []
        number = first
        while len(parts) < wanted:
            left = wanted - len(parts)
            trail = self._trail(number, left)
            if len(trail) == left and self.length(number, left) == left:
                parts += [self._pages.newest(page)[4:] for page in trail]
                break
            good, skipped = self._break(number, trail, left)
            parts += [self._pages.newest(page)[4:] for page in trail[:good]]
            holes.append((len(parts) * room, min((len(parts) + skipped) * room, size)))
            parts += [bytes(room)] * skipped
            number = (trail[good] if good < len(trail) else number) + skipped
        return b"".join(parts)[:size], holes

    def _trail(self, number: int, most: int) -> list[int]:
        """Pages along the chain until it ends, leads nowhere, or comes to a page that is empty."""
        trail: list[int] = []
        seen: set[int] = set()
        while len(trail) < most and number and number not in seen:
            image = self._pages.newest(number)
            if not image:
                break
            trail.append(number)
            seen.add(number)
            self._used.add(number)
            if not any(image):
                break
            number = int.from_bytes(image[:4], "big")
        return trail

    def _break(self, number: int, trail: list[int], left: int) -> tuple[int, int]:
        """How many pages of a broken chain are good, and how many are missing behind them.

        A page is suspected where the chain does not go on with the page behind it; the last one it reaches is damaged
        in any case.
        """
        last = max(len(trail) - 1, 0)
        jumps = [place for place in range(last) if trail[place + 1] != trail[place] + 1]
        for good in [last, *jumps[:MOST_JUMPS]]:
            page = trail[good] if trail else number
            for skipped in range(1, left - good):
                if self.length(page + skipped, left - good - skipped) == left - good - skipped:
                    return good, skipped
        return last, left - last

    def length(self, number: int, most: int) -> int:
        """Pages in the chain from a page to its end; 0 if it is longer than `most` or leads nowhere."""
        trail: list[int] = []
        at = number
        while at and at not in self._lengths:
            image = self._pages.newest(at)
            if not image or len(trail) > self._pages.count:
                at = -1
                break
            trail.append(at)
            at = int.from_bytes(image[:4], "big")
        behind = -1 if at < 0 else self._lengths.get(at, 0) if at else 0
        for count, page in enumerate(reversed(trail), 1):
            self._lengths[page] = -1 if behind < 0 else behind + count
        found = self._lengths.get(number, -1)
        return found if 0 < found <= most else 0


def _row(image: bytes, place: int, usable: int, chains: Chains, page: int, *, newest: bool, loose: bool) -> Row | None:
    size, after = varint(image, place)
    rowid, after = varint(image, after)
    if not 3 < size <= MOST_BYTES or rowid >= 2**62:
        return None
    local = _local_bytes(size, usable)
    if after + local > len(image):
        return None
    types = _types(image, after, after + local)
    if types is None or sum(width for _, width in types[0]) + types[1] != size or _letters(types[0]) not in SHAPES:
        return None
    payload, holes = image[after : after + local], []
    if local < size:
        first = int.from_bytes(image[after + local : after + local + 4], "big")
        more, missing = chains.content(first, size - local)
        payload += more
        holes = [(begin + local, end + local) for begin, end in missing]
    return _decoded(rowid, payload, types, holes, page, newest, loose, local < size)


def _local_bytes(size: int, usable: int) -> int:
    """How much of a row of a table leaf stands in the leaf itself (section 1.6)."""
    if size <= usable - 35:
        return size
    least = (usable - 12) * 32 // 255 - 23
    more = least + (size - least) % (usable - 4)
    return more if more <= usable - 35 else least


def _types(data: bytes, place: int, limit: int) -> tuple[list[tuple[int, int]], int] | None:
    """[(serial type, bytes)] of a row's head, and the bytes of the head."""
    head, after = varint(data, place)
    end = place + head
    if not 2 < head < 64 or end > limit:
        return None
    found: list[tuple[int, int]] = []
    while after < end:
        kind, after = varint(data, after)
        found.append((kind, _width(kind)))
    return (found, head) if after == end else None


def _width(kind: int) -> int:
    if kind >= 12:
        return (kind - 12) // 2
    return 8 if kind == 7 else _INTEGER_BYTES.get(kind, 0)


def _letters(types: list[tuple[int, int]]) -> str:
    return "".join(
        "n" if kind == 0 else "r" if kind == 7 else "i" if kind < 10 else "b" if kind % 2 == 0 else "t"
        for kind, _ in types
    )


ENTRY, CHUNK, PACK, STATE = "ntttttt", "iiiiiitb", "iiitb", "nt"
TAIL = ("nitiib", "nitnnb", "nitinb", "nitnib")
SHAPES = frozenset({ENTRY, CHUNK, PACK, STATE, *TAIL})


def _decoded(
    rowid: int,
    payload: bytes,
    types: tuple[list[tuple[int, int]], int],
    holes: list[tuple[int, int]],
    page: int,
    newest: bool,
    loose: bool,
    overflows: bool,
) -> Row | None:
    columns, place = types
    values: list[Value] = []
    last = 0
    for kind, width in columns:
        data = payload[place : place + width]
        if kind >= 12:
            values.append(data)
            last = place
        else:
            values.append(_number(kind, data))
        place += width
    if holes and holes[0][0] < last:
        if _letters(columns) != ENTRY:
            return None  # what says what the row is lies in the hole
        last = 0
    inside = tuple((begin - last, end - last) for begin, end in holes)
    return Row(rowid, tuple(values), _letters(columns), inside, page, newest, loose, overflows)


def _number(kind: int, data: bytes) -> Value:
    if kind == 0:
        return None
    if kind in (8, 9):
        return kind - 8
    return int.from_bytes(data, "big", signed=True)
