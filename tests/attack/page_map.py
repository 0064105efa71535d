"""Which byte of an SQLite file belongs to what: read from the pages themselves, by the published file format.

Source of the layout: sqlite.org/fileformat2.html (from memory of that page). Books only: no reserved bytes,
no auto-vacuum, one schema page chain. The map is checked against itself: every byte has exactly one region.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from contextlib import closing
from dataclasses import dataclass
from pathlib import Path

LEAF_TABLE, INNER_TABLE, LEAF_INDEX, INNER_INDEX = 13, 5, 10, 2
CONTENT, STRUCTURE, UNUSED = "content", "structure", "unused"


@dataclass(frozen=True)
class Region:
    """Bytes of one kind: a table's content, its page structure, or what a page does not use."""

    owner: str  # table, index, "file header" or "free pages"
    kind: str


def _varint(data: bytes, at: int) -> tuple[int, int]:
    value = 0
    for count in range(9):
        byte = data[at + count]
        if count == 8:
            return value << 8 | byte, at + 9
        value = value << 7 | byte & 127
        if byte < 128:
            return value, at + count + 1
    raise AssertionError


class PageMap:
    """The region of every byte of a book that nobody has open."""

    def __init__(self, path: Path) -> None:
        self.data = path.read_bytes()
        self.page_bytes = int.from_bytes(self.data[16:18], "big")
        assert self.data[20] == 0, "reserved bytes are not expected in a book"
        self.regions: list[Region | None] = [None] * len(self.data)
        self._fill(0, 100, Region("file header", STRUCTURE))
        with closing(sqlite3.connect(f"file:{path}?mode=ro&immutable=1", uri=True)) as connection:
            roots = connection.execute("SELECT name, rootpage FROM sqlite_master WHERE rootpage > 0").fetchall()
        for name, root in [("sqlite_schema", 1), *roots]:
            self._tree(name, root)
        self._free()
        missing = [at for at, region in enumerate(self.regions) if region is None]
        assert not missing, f"byte {missing[0]} belongs to nothing"

    def by_region(self) -> dict[Region, list[int]]:
        """{region: places in the file}."""
        found: dict[Region, list[int]] = {}
        for at, region in enumerate(self.regions):
            assert region is not None
            found.setdefault(region, []).append(at)
        return found

    def _fill(self, start: int, end: int, region: Region) -> None:
        self.regions[start:end] = [region] * (end - start)

    def _page(self, number: int) -> int:
        return (number - 1) * self.page_bytes

    def _tree(self, name: str, number: int) -> None:
        start = self._page(number)
        head = start + (100 if number == 1 else 0)
        end = start + self.page_bytes
        kind = self.data[head]
        count = int.from_bytes(self.data[head + 3 : head + 5], "big")
        pointers = head + (12 if kind in (INNER_TABLE, INNER_INDEX) else 8)
        self._fill(head, end, Region(name, UNUSED))
        self._fill(head, pointers + 2 * count, Region(name, STRUCTURE))
        for place in range(count):
            at = start + int.from_bytes(self.data[pointers + 2 * place : pointers + 2 * place + 2], "big")
            for child in self._cell(name, kind, at):
                self._tree(name, child)
        if kind in (INNER_TABLE, INNER_INDEX):
            self._tree(name, int.from_bytes(self.data[head + 8 : head + 12], "big"))

    def _cell(self, name: str, kind: int, at: int) -> Iterator[int]:
        """Mark one cell; give the page below it, if there is one."""
        begin = at
        if kind in (INNER_TABLE, INNER_INDEX):
            yield int.from_bytes(self.data[at : at + 4], "big")
            at += 4
        if kind == INNER_TABLE:
            _, at = _varint(self.data, at)
            self._fill(begin, at, Region(name, STRUCTURE))
            return
        size, at = _varint(self.data, at)
        if kind == LEAF_TABLE:
            _, at = _varint(self.data, at)
        usable = self.page_bytes
        most = usable - 35 if kind == LEAF_TABLE else (usable - 12) * 64 // 255 - 23
        local = size
        if size > most:
            least = (usable - 12) * 32 // 255 - 23
            local = least + (size - least) % (usable - 4)
            local = local if local <= most else least
        self._fill(begin, at, Region(name, STRUCTURE))
        self._fill(at, at + local, Region(name, CONTENT))
        if local < size:
            self._fill(at + local, at + local + 4, Region(name, STRUCTURE))
            following = int.from_bytes(self.data[at + local : at + local + 4], "big")
            self._overflow(name, following, size - local)

    def _overflow(self, name: str, number: int, left: int) -> None:
        while left > 0:
            start = self._page(number)
            here = min(left, self.page_bytes - 4)
            self._fill(start, start + self.page_bytes, Region(name, UNUSED))
            self._fill(start, start + 4, Region(name, STRUCTURE))
            self._fill(start + 4, start + 4 + here, Region(name, CONTENT))
            left -= here
            number = int.from_bytes(self.data[start : start + 4], "big")

    def _free(self) -> None:
        trunk = int.from_bytes(self.data[32:36], "big")
        while trunk:
            start = self._page(trunk)
            count = int.from_bytes(self.data[start + 4 : start + 8], "big")
            for place in range(count):
                leaf = int.from_bytes(self.data[start + 8 + 4 * place : start + 12 + 4 * place], "big")
                self._fill(self._page(leaf), self._page(leaf) + self.page_bytes, Region("free pages", UNUSED))
            self._fill(start, start + self.page_bytes, Region("free pages", UNUSED))
            self._fill(start, start + 8 + 4 * count, Region("free pages", STRUCTURE))
            trunk = int.from_bytes(self.data[start : start + 4], "big")
