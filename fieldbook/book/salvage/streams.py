"""What each occupation received: proven piece by piece where a hash allows it, with the holes named.

A chunk is proven when its canonical items have the SHA-256 that its `raw` entry states, wherever they were found: in
`raw_chunk`, in a pack of which other pieces are lost, or in rows of the tail that were sealed and not yet overwritten. A
chunk whose entry is lost can only fit the hash in its own row. Everything else is unproven: rows of the tail, which
never had a hash, and what a damaged chunk still gives before the place of damage.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, field, replace
from itertools import groupby

from fieldbook.book import lines
from fieldbook.book.inflate import CODEC
from fieldbook.book.raw import Packed, Sealed, chunk_of, sha256_of
from fieldbook.model.item import Item, ItemKind, canonical_items, parse_items

from . import bits
from .fill import Filler, Hole, Piece, Proof, without_bad_lines
from .gather import ChunkRow, Found, OldEntry, PackRow, Stored
from .pieces import ITEM_HEAD, Part, between, first_items, inflated, lines_left, places_of, prefix, surviving
from .sentences import until_bad

MOST_REPAIR_BYTES = 48_000


@dataclass
class Stream:
    """One occupation. `whole`: nothing is missing and everything is proven, so it is carried over as it is stored."""

    occupation: int
    pieces: list[Piece] = field(default_factory=list)
    holes: list[Hole] = field(default_factory=list)
    cut_bytes: int = 0  # of unproven lines that do not hold
    whole: bool = False
    mended: list[int] = field(default_factory=list)  # chunks in which one bit was put right; 0: the tail
    tail_holds: bool = False  # as the last heartbeat states it
    tail_broken: bool = False
    chunks: list[ChunkRow] = field(default_factory=list)  # to be carried as stored
    packs: list[PackRow] = field(default_factory=list)
    carried_bytes: int = 0  # received bytes in those
    carried_last_id: int = 0
    end: OldEntry | None = None
    packed: bool = False  # packs are made after the end only

    @property
    def last_id(self) -> int:
        """Id of the last item or the last one known to be missing."""
        ids = [piece.last_id for piece in self.pieces] + [hole.last_id for hole in self.holes]
        return max(ids, default=self.carried_last_id)

    def received(self, *proofs: Proof) -> int:
        """Received bytes salvaged, with these proofs or with any."""
        carried = self.carried_bytes if not proofs or "chain" in proofs else 0
        return carried + sum(piece.received for piece in self.pieces if not proofs or piece.proof in proofs)

    def forget_stored(self) -> None:
        """What is carried as it is stored need not stay in memory."""
        if self.whole:
            self.carried_bytes = sum(piece.received for piece in self.pieces if piece.proof == "chain")
            self.carried_last_id = self.last_id
            self.pieces = [piece for piece in self.pieces if piece.proof == "tail"]


def occupations_of(found: Found) -> list[int]:
    """Numbers of all occupations that anything speaks of, in order."""
    kinds = {"occupation", "raw", "packed", "end"}
    numbers = {entry.tree().get("occupation") for entry in found.entries.values() if entry.kind in kinds}
    numbers |= {row.occupation for row in found.chunks} | {row.occupation for row in found.packs}
    numbers |= {occupation for occupation, _ in found.tail.values()}
    return sorted(number for number in numbers if type(number) is int and number > 0)


def stream_of(found: Found, occupation: int) -> Stream:
    """Everything that one occupation received and that is left."""
    work = _Work(found, occupation)
    stream = Stream(occupation, end=work.end, packed=bool(work.packed or work.pack_rows))
    work.read_chunks()
    work.read_packs()
    work.read_orphans()
    work.read_tail()
    work.assemble(stream)
    stream.mended = sorted(work.mended)
    _judge(stream, work)
    return stream


class _Work:
    """The pieces of one occupation while they are looked for."""

    def __init__(self, found: Found, occupation: int) -> None:
        self.found, self.number = found, occupation
        self.stated: dict[int, Sealed] = {}
        self.packed: dict[int, Packed] = {}
        self.end: OldEntry | None = None
        self.proven: dict[int, Piece] = {}  # chunk -> all of it
        self.by_pack: list[Piece] = []  # their `raw` entries are lost, the hash of their pack holds
        self.loose: list[Piece] = []  # unproven
        self.partial: list[tuple[int, int, Stored, int]] = []  # ids, and the damaged piece of a pack they stand in
        self.uncounted: list[tuple[int, int]] = []  # ids whose items are not the old ones
        self.tail_span: tuple[int, int] | None = None  # ids that the last heartbeat states
        self.tail_holds = self.tail_broken = False  # they are all there as it states them, or they are not
        self.mended: set[int] = set()
        self.stored_as_stated: dict[int, ChunkRow] = {}
        self.packs_as_stated: dict[int, PackRow] = {}
        self.budget = bits.BUDGET_BYTES
        for _, entry in sorted(found.entries.items()):
            self._note(entry)
        self.rows = [row for row in found.chunks if row.occupation == occupation]
        self.pack_rows = [row for row in found.packs if row.occupation == occupation]

    def _note(self, entry: OldEntry) -> None:
        if entry.kind not in ("raw", "packed", "end"):
            return
        tree = entry.tree()
        if tree.get("occupation") != self.number:
            return
        try:
            if entry.kind == "raw":
                sealed = Sealed.from_body(tree)
                self.stated.setdefault(sealed.chunk, sealed)
            elif entry.kind == "packed":
                packed = Packed.from_body(tree)
                self.packed.setdefault(packed.first_chunk, packed)
            else:
                self.end = entry
        except ValueError:
            return  # no writer wrote that

    # -- chunks

    def read_chunks(self) -> None:
        for row in self.rows:
            sealed = self.stated.get(row.chunk)
            own = Sealed(*(row.occupation, row.chunk, row.first_id, row.last_id, row.items, row.bytes), row.sha256, "")
            if row.chunk in self.stored_as_stated:
                continue
            stored = row.stored if sealed is None else self._as_stated(row.chunk, row.stored, sealed.stored_sha256)
            if self._whole_chunk(stored, sealed or own, "chain" if sealed else "row"):
                if sealed is not None and sha256_of(stored.data) == sealed.stored_sha256:
                    self.stored_as_stated[row.chunk] = ChunkRow(*_columns(sealed), stored)
            elif row.chunk not in self.proven:
                items = tuple(until_bad(first_items(prefix(row.stored))))
                self._unproven((sealed or own).first_id, items, (sealed or own).last_id)

    def _whole_chunk(self, stored: Stored, sealed: Sealed, proof: Proof) -> bool:
        plain = None if stored.holes else inflated(stored.data, sealed.bytes)
        return plain is not None and sha256_of(plain) == sealed.sha256 and self._prove(sealed, plain, proof)

    def _as_stated(self, chunk: int, stored: Stored, sha256: str) -> Stored:
        """The stored data, with one bit put right where that makes it what its entry states."""
        mended = self._mended(stored, sha256)
        if mended is None:
            return stored
        if mended != stored.data:
            self.mended.add(chunk)
        return Stored(mended)

    def _mended(self, stored: Stored, sha256: str) -> bytes | None:
        price = bits.cost(len(stored.data))
        if stored.holes or sha256_of(stored.data) == sha256:
            return None if stored.holes else stored.data
        if len(stored.data) > MOST_REPAIR_BYTES or price > self.budget:
            return None
        self.budget -= price
        return bits.repaired(stored.data, sha256)

    def _prove(self, sealed: Sealed, plain: bytes, proof: Proof) -> bool:
        try:
            items = tuple(parse_items(plain))
        except (ValueError, UnicodeDecodeError):
            return False
        if len(items) != sealed.items or len(items) != sealed.last_id - sealed.first_id + 1 or not items:
            return False
        known = self.proven.get(sealed.chunk)
        if known is None or known.proof != "chain":
            self.proven[sealed.chunk] = Piece(sealed.first_id, items, proof, sealed)
        return True

    def _unproven(self, first_id: int, items: tuple[Item, ...], last_id: int) -> None:
        items = items[: max(0, last_id - first_id + 1)]
        if items:
            self.loose.append(Piece(first_id, items, "none"))

    # -- packs

    def read_packs(self) -> None:
        for row in self.pack_rows:
            if row.first_chunk in self.packs_as_stated:
                continue
            stated = self.packed.get(row.first_chunk)
            stored = row.stored if stated is None else self._as_stated(row.first_chunk, row.stored, stated.sha256)
            as_stated = not stored.holes and stated == Packed(
                *(self.number, row.first_chunk, row.last_chunk, row.codec, len(stored.data)), sha256_of(stored.data)
            )
            if self._read_pack(row, stored, as_stated=as_stated) and as_stated:
                self.packs_as_stated[row.first_chunk] = replace(row, stored=stored)

    def _read_pack(self, row: PackRow, stored: Stored, *, as_stated: bool) -> bool:
        """Chunks of a pack, as far as its pieces give them; True if all of them are proven."""
        numbers = range(row.first_chunk, row.last_chunk + 1)
        if len(numbers) > 10_000_000:
            return False
        sizes = [self.stated[number].bytes if number in self.stated else None for number in numbers]
        total = sum(size for size in sizes if size is not None) if None not in sizes else None
        parts = list(surviving(row.codec, stored, total))
        covered = total if total is not None else max((start + size for start, size, _ in parts), default=0)
        places = places_of(sizes, covered)
        all_proven = True
        for number, place in zip(numbers, places, strict=True):
            sealed = self.stated.get(number)
            if sealed is None or place is None:
                all_proven = False
                continue
            plain, whole = between(parts, place, place + sealed.bytes)
            if whole and sha256_of(plain) == sealed.sha256 and self._prove(sealed, plain, "chain"):
                continue
            all_proven = False
            if number not in self.proven:
                self._unproven(sealed.first_id, tuple(first_items(plain)), sealed.last_id)
        if row.codec == CODEC and total is not None:
            self._lines_left(stored, numbers, places)
        if None in sizes:
            self._unstated(numbers, places, parts, covered, as_stated=as_stated)
        return all_proven

    def _lines_left(self, stored: Stored, numbers: range, places: list[int | None]) -> None:
        """Lines of damaged pieces: offered where nothing better is found for their chunks."""
        place, start = 0, 0
        for start, makes in lines.heads(stored.data, stored.holes):
            inside = [
                self.stated[number]
                for number, at in zip(numbers, places, strict=True)
                if at is not None and place <= at + self.stated[number].bytes // 2 < place + makes
            ]
            place += makes
            if inside and not any(sealed.chunk in self.proven for sealed in inside):
                self.partial.append((inside[0].first_id, inside[-1].last_id, stored, start))

    def _unstated(
        self, numbers: range, places: list[int | None], parts: list[Part], covered: int, *, as_stated: bool
    ) -> None:
        """Chunks of a pack whose `raw` entries are lost: what stands between the others. The hash of the pack may hold."""
        for known, group in groupby(numbers, key=lambda number: number in self.stated):
            run = list(group)
            if known:
                continue
            before, behind = self.stated.get(run[0] - 1), self.stated.get(run[-1] + 1)
            start = places[run[0] - 1 - numbers[0]] if run[0] > numbers[0] else 0
            if start is None or (run[0] > numbers[0] and before is None):
                continue
            if before is not None and run[0] > numbers[0]:
                start += before.bytes
            stop = places[run[-1] + 1 - numbers[0]] if run[-1] < numbers[-1] else covered
            plain, whole = between(parts, start, stop if stop is not None else covered)
            items = tuple(first_items(plain))
            if before is not None:
                first, last = before.last_id + 1, behind.first_id - 1 if behind else 2**61
            elif behind is not None and whole:
                first, last = behind.first_id - len(items), behind.first_id - 1
            else:
                first, last = 1, 2**61
            if as_stated and whole and items and first > 0 and len(items) <= last - first + 1:
                self.by_pack.append(Piece(first, items, "row"))
            else:
                self._unproven(first, items, last)

    def read_orphans(self) -> None:
        """Pieces of packs whose row is lost: a piece begins with a chunk, and hashes say with which."""
        missing = {sealed.sha256: sealed for chunk, sealed in self.stated.items() if chunk not in self.proven}
        by_size: dict[int, list[Sealed]] = {}
        for sealed in missing.values():
            by_size.setdefault(sealed.bytes, []).append(sealed)
        for content in self.found.orphans if missing else ():
            for plain in lines.anywhere(content):
                first = next((known for size in by_size if (known := missing.get(sha256_of(plain[:size])))), None)
                place = 0
                while first is not None and sha256_of(plain[place : place + first.bytes]) == first.sha256:
                    self._prove(first, plain[place : place + first.bytes], "chain")
                    place += first.bytes
                    first = self.stated.get(first.chunk + 1)

    # -- tail

    def read_tail(self) -> None:
        """Rows of the tail: the live ones, and those of chunks that are not proven yet."""
        own = {number: item for number, (owner, item) in self.found.tail.items() if owner == self.number}
        for chunk, sealed in self.stated.items():
            known = self.proven.get(chunk)
            if known is not None or sealed.last_id - sealed.first_id > len(own):
                continue
            items = [own[number] for number in range(sealed.first_id, sealed.last_id + 1) if number in own]
            if len(items) == sealed.items:
                plain = canonical_items(items)
                if sha256_of(plain) == sealed.sha256:
                    self._prove(sealed, plain, "chain")
        self._check_tail(own)
        self.loose += [Piece(number, (item,), "tail") for number, item in sorted(own.items())]

    def _check_tail(self, own: dict[int, Item]) -> None:
        """The rows against what the last heartbeat says of them; one flipped bit is put right."""
        first, last, sha256 = self.found.sums.get(self.number, (0, 0, ""))
        sealed_to = max((sealed.last_id for sealed in self.stated.values()), default=0)
        if not first or sealed_to >= first:
            return
        self.tail_span = first, last
        numbers = range(first, last + 1)
        items = [own[number] for number in numbers if number in own]
        plain = canonical_items(items)
        if len(items) == len(numbers):
            mended = self._mended(Stored(plain), sha256)
            again = list(first_items(mended)) if mended is not None else []
            if len(again) == len(numbers):
                own.update(zip(numbers, again, strict=True))
                self.tail_holds = True
                self.mended |= set() if mended == plain else {0}
                return
        self.tail_broken = True

    def store_again(self) -> None:
        """Chunks whose items were found elsewhere, compressed again: mostly that gives the stored bytes of old."""
        for chunk, piece in self.proven.items():
            if chunk not in self.stored_as_stated and piece.proof == "chain" and piece.sealed is not None:
                again = chunk_of(self.number, chunk, piece.first_id, piece.items)
                if again.sealed == piece.sealed:
                    self.stored_as_stated[chunk] = ChunkRow(*_columns(piece.sealed), Stored(again.data))

    # -- in order

    def assemble(self, stream: Stream) -> None:
        """Proven chunks first, then whatever unproven items fit between them; the rest are holes."""
        taken = sorted([*self.proven.values(), *self.by_pack], key=lambda piece: (piece.first_id, piece.proof))
        pieces: list[Piece] = []
        for piece in taken:
            if not pieces or piece.first_id > pieces[-1].last_id:
                pieces.append(piece)
        filled = Filler(pieces)
        for piece in sorted(self.loose, key=lambda piece: piece.proof == "none"):
            filled.offer(piece)
        for first, last, stored, start in self.partial:
            if not filled.anything(first, last):
                items = _at_most(list(lines_left(stored, start)), last - first)
                # behind the hole, which so breaks the sentence that may be torn before it
                filled.offer(Piece(last - len(items) + 1, items, "none"))
                self.uncounted += [(first, last)] if items else []
        pieces = filled.pieces(max((sealed.last_id for sealed in self.stated.values()), default=0))
        stream.holes = list(self._holes(pieces))
        stream.pieces, stream.cut_bytes = without_bad_lines(pieces, stream.holes, tail_holds=self.tail_holds)

    def _holes(self, pieces: Sequence[Piece]) -> Iterator[Hole]:
        """Ids between the first and the last known one that nothing gives."""
        spans = [(sealed.first_id, sealed.last_id) for sealed in self.stated.values()]
        spans += [(row.first_id, row.last_id) for row in self.rows if row.chunk not in self.stated]
        spans = [span for span in spans if span[0] <= span[1]] + [(item.first_id, item.last_id) for item in pieces]
        spans += [self.tail_span] if self.tail_span else []
        if not spans:
            return
        expected, last = min(first for first, _ in spans), max(last for _, last in spans)
        for piece in [*pieces, Piece(last + 1, (), "none")]:
            if piece.first_id > expected:
                yield self._hole(expected, piece.first_id - 1, pieces)
            expected = max(expected, piece.last_id + 1)

    def _hole(self, first: int, last: int, pieces: Sequence[Piece]) -> Hole:
        """One hole. Its bytes are known where entries state every chunk in it, and each of those has this hole alone."""
        inside = [sealed for sealed in self.stated.values() if first <= sealed.last_id and sealed.first_id <= last]
        covered = sum(min(last, sealed.last_id) - max(first, sealed.first_id) + 1 for sealed in inside)
        chunks = tuple(sealed.chunk for sealed in inside)
        scattered = any(begin <= last and first <= end for begin, end in self.uncounted)
        if covered < last - first + 1 or scattered:
            return Hole(first, last, None, chunks, scattered)
        size = sum(sealed.bytes - ITEM_HEAD * sealed.items for sealed in inside)
        begin, end = min(item.first_id for item in inside), max(item.last_id for item in inside)
        there = 0
        for piece in pieces:
            if piece.sealed is None and piece.first_id <= end and begin <= piece.last_id:
                for number, item in enumerate(piece.items, piece.first_id):
                    size -= len(item.data) if begin <= number <= end else 0
                    there += begin <= number <= end
        one_hole = there + last - first + 1 == end - begin + 1
        return Hole(first, last, max(0, size) if one_hole else None, chunks)


def _judge(stream: Stream, work: _Work) -> None:
    """Whether everything is there, proven, and stored as the entries state it."""
    numbers = sorted(work.stated)
    stream.tail_holds, stream.tail_broken = work.tail_holds, work.tail_broken
    if stream.holes or stream.cut_bytes or work.tail_broken or numbers != list(range(1, len(numbers) + 1)):
        return
    work.store_again()
    in_packs: set[int] = set()
    for row in work.packs_as_stated.values():
        in_packs |= set(range(row.first_chunk, row.last_chunk + 1))
    stored = set(work.stored_as_stated) - in_packs
    if set(numbers) != in_packs | stored or set(work.packed) != set(work.packs_as_stated):
        return
    loose = [piece for piece in stream.pieces if piece.proof == "tail"]
    if any(piece.proof not in ("chain", "tail") for piece in stream.pieces):
        return
    if work.end is not None:
        tree = work.end.tree()
        total = sha256_of(b"".join(_received(stream.pieces)))
        if loose or (tree.get("received_bytes"), tree.get("received_sha256")) != (stream.received(), total):
            return
    heard = work.found.heard.get(stream.occupation)
    if work.end is None and heard is not None and heard[0] > stream.received():
        return
    stream.whole = True
    stream.packs = [row for _, row in sorted(work.packs_as_stated.items())]
    stream.chunks = [work.stored_as_stated[number] for number in sorted(stored)]


def _at_most(items: list[Item], count: int) -> tuple[Item, ...]:
    """No more items than there are ids for: those too many become part of the last one."""
    if count < 1:
        return ()
    rest = items[count - 1 :]
    if len(rest) > 1:
        joined = b"".join(item.data for item in rest)
        items = [*items[: count - 1], Item(rest[0].kind, joined, rest[0].monotonic_ms, rest[0].utc_ms)]
    return tuple(items)


def _columns(sealed: Sealed) -> tuple[int, int, int, int, int, int, str]:
    return (
        *(sealed.occupation, sealed.chunk, sealed.first_id, sealed.last_id, sealed.items, sealed.bytes),
        sealed.sha256,
    )


def _received(pieces: Iterable[Piece]) -> Iterator[bytes]:
    return (item.data for piece in pieces for item in piece.items if item.kind is ItemKind.BYTES)
