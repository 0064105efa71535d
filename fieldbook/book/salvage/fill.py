"""Pieces of what was received, put in order: proven chunks first, then what fits between them."""

from __future__ import annotations

from bisect import bisect_right
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from itertools import groupby
from typing import Literal

from fieldbook.book.raw import Sealed
from fieldbook.model.item import Item, ItemKind

from .sentences import cut

Proof = Literal["chain", "row", "tail", "none"]  # tail: rows that were never sealed; none: out of damaged pieces


@dataclass(frozen=True)
class Piece:
    """Consecutive items; `sealed`: the chunk they are, where one is whole."""

    first_id: int
    items: tuple[Item, ...]
    proof: Proof
    sealed: Sealed | None = None

    @property
    def last_id(self) -> int:
        """Id of the last item."""
        return self.first_id + len(self.items) - 1

    @property
    def received(self) -> int:
        """Received bytes."""
        return sum(len(item.data) for item in self.items if item.kind is ItemKind.BYTES)


@dataclass(frozen=True)
class Hole:
    """Items that are missing. `data_bytes`: bytes of their data (received bytes and texts of link events), if known."""

    first_id: int
    last_id: int
    data_bytes: int | None
    chunks: tuple[int, ...] = ()
    scattered: bool = False  # what is missing stood between the lines that follow, not before them


class Filler:
    """Unproven items between proven pieces: each id once, the first offer counts."""

    def __init__(self, proven: list[Piece]) -> None:
        self._proven = proven
        self._items: dict[int, Item] = {}

    def offer(self, piece: Piece) -> None:
        """Take the items whose ids nothing has yet."""
        for number, item in enumerate(piece.items, piece.first_id):
            if not any(known.first_id <= number <= known.last_id for known in self._near(number)):
                self._items.setdefault(number, item)

    def anything(self, first: int, last: int) -> bool:
        """Whether any item of these ids is there already."""
        if any(piece.first_id <= last and first <= piece.last_id for piece in self._proven):
            return True
        return any(number in self._items for number in range(first, last + 1))

    def _near(self, number: int) -> Iterable[Piece]:
        place = bisect_right(self._proven, number, key=lambda piece: piece.first_id)
        return self._proven[max(0, place - 1) : place]

    def pieces(self, last_sealed: int) -> list[Piece]:
        """Everything in order; what lies behind the last sealed id is tail."""
        runs: list[Piece] = []
        for _, group in groupby(enumerate(sorted(self._items)), key=lambda pair: pair[1] - pair[0]):
            run = [number for _, number in group]
            split = bisect_right(run, last_sealed)
            if run[:split]:
                runs.append(Piece(run[0], tuple(self._items[number] for number in run[:split]), "none"))
            if run[split:]:
                runs.append(Piece(run[split], tuple(self._items[number] for number in run[split:]), "tail"))
        return sorted([*self._proven, *runs], key=lambda piece: piece.first_id)


def without_bad_lines(pieces: list[Piece], holes: Sequence[Hole], *, tail_holds: bool) -> tuple[list[Piece], int]:
    """Unproven pieces without lines whose checksum fails; ids stay those of the items that are left."""
    begins, ends = {hole.last_id + 1 for hole in holes}, {hole.first_id - 1 for hole in holes}
    kept: list[Piece] = []
    lost = 0
    for piece in pieces:
        if piece.proof in ("chain", "row") or (piece.proof == "tail" and tail_holds):
            kept.append(piece)
            continue
        items, gone = cut(piece.items, torn_before=piece.first_id in begins, torn_behind=piece.last_id in ends)
        lost += gone
        if items:
            kept.append(Piece(piece.first_id, tuple(items), piece.proof))
    return kept, lost
