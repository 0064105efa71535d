"""One flipped bit: found by `verify`, or without effect on anything the book says. Anything else is a hole."""

from __future__ import annotations

import random
from collections import Counter
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from .page_map import CONTENT, PageMap, Region
from .victims import everything, holds

FOUND, WITHOUT_EFFECT, HOLE = "found", "without effect", "NEITHER"


def _there(book: Path, ending: str) -> bool:
    return Path(f"{book}{ending}").exists()


@dataclass
class Flips:
    """What flipping bits of one book gave: {(region, outcome): times}, and the holes themselves."""

    counts: Counter[tuple[Region, str]] = field(default_factory=Counter)
    holes: list[str] = field(default_factory=list)

    def of(self, outcome: str) -> int:
        """How many flips ended so."""
        return sum(times for (_, one), times in self.counts.items() if one == outcome)


class Victim:
    """One sound book (with its -wal, if there is one) and a copy of it under attack, at a fixed path."""

    def __init__(self, book: Path, copy: Path) -> None:
        self.copy, self.ending = copy, ""
        self.files = {ending: Path(f"{book}{ending}").read_bytes() for ending in ("", "-wal") if _there(book, ending)}
        if "-wal" in self.files:
            self.ending, self.data = "-wal", self.files["-wal"]
            whole = Region("-wal", CONTENT)
            self.regions, self.places = [whole] * len(self.data), {whole: list(range(len(self.data)))}
        else:
            self.data = self.files[""]
            found = PageMap(book)
            self.regions, self.places = found.regions, found.by_region()
        self._put(self.data)
        good, wrong = holds(copy)
        assert good, wrong
        self.sound = everything(copy)

    def _put(self, data: bytes) -> None:
        for ending in ("", "-wal", "-shm", "-journal"):
            Path(f"{self.copy}{ending}").unlink(missing_ok=True)
        for ending, own in {**self.files, self.ending: data}.items():
            Path(f"{self.copy}{ending}").write_bytes(own)

    def flip(self, place: int, bit: int) -> str:
        """Flip one bit of the file (of the -wal, if there is one) and judge."""
        changed = bytearray(self.data)
        changed[place] ^= 1 << bit
        self._put(bytes(changed))
        good, _ = holds(self.copy)
        if not good:
            return FOUND
        return WITHOUT_EFFECT if not self.different() else HOLE

    def different(self) -> list[str]:
        """The parts of what the copy says that are not as in the sound book."""
        try:
            now: dict[str, Any] = everything(self.copy)
        except Exception as error:
            return [f"{type(error).__name__}: {error}"]
        return [name for name, value in self.sound.items() if now[name] != value]


def flips(victim: Victim, *, anywhere: int, each_table: int | dict[str, int], seed: int) -> Flips:
    """Bits at random places of the file, and at random places of each table's content."""
    luck, result = random.Random(seed), Flips()
    places = [luck.randrange(len(victim.data)) for _ in range(anywhere)]
    for region, own in sorted(victim.places.items(), key=repr):
        if region.kind == CONTENT:
            count = each_table if isinstance(each_table, int) else each_table[region.owner]
            places += [luck.choice(own) for _ in range(count)]
    for place in places:
        bit = luck.randrange(8)
        outcome = victim.flip(place, bit)
        region = victim.regions[place]
        assert region is not None
        result.counts[region, outcome] += 1
        if outcome == HOLE:
            result.holes.append(
                f"byte {place}, bit {bit}: {region.owner} {region.kind}: {', '.join(victim.different())}"
            )
    return result
