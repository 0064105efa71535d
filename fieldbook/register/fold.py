"""What the entries of a register say: books, occupations, which mark is which, decisions. There is no second truth.

Marks. Every mark of every book is at first a mark of its own with a number of its own; a number is given once and stands in
the entry that gave it. Only entries change that:

    same        two numbers are one mark, known by the smaller number
    different   two numbers are settled as two marks: no proposal any more, and no `same` may join them
    reset       from a date on, a mark is a new point with a new number, or another mark that is known already
    separate    one occupation is of another mark than its book says: a new number
    exclude     one occupation takes no part
    strike      takes an entry out again; numbers it gave are not given a second time
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field

from fieldbook.model.canonical import Tree
from fieldbook.model.entry import Entry


@dataclass(frozen=True)
class Held:
    """One occupation as the register holds it. `place`: latitude, longitude, height in the client's frame, as stated."""

    book: str
    occupation: int
    number: int  # the number its mark was given; `RegisterState.mark_of` says which mark that is today
    name: str  # of the mark, in its book
    evidence: str
    reduction: str
    open: bool
    started: str | None
    ended: str | None
    frame: str | None
    epoch: str | None
    place: tuple[float, float, float | None] | None
    plan_u95_m: float
    height_u95_m: float | None
    measured_u95_m: tuple[float, float | None]  # plan, height: without the frame operation
    operation: tuple[str, ...]
    received_sha256: str | None

    @property
    def key(self) -> tuple[str, int]:
        """Book and occupation."""
        return self.book, self.occupation

    @property
    def label(self) -> str:
        """`3f2a91c0/2`: first eight digits of the book's id, number of the occupation."""
        return label_of(self.book, self.occupation)


@dataclass(frozen=True)
class HeldBook:
    """A book in its latest state that was added. `heads`: hash of every state added so far, by its number of entries."""

    id: str
    path: str
    head_seq: int
    head_hash: str
    hashes: str
    entry: Entry
    heads: dict[int, str]
    occupations: tuple[Held, ...]
    failed: tuple[Tree, ...]
    certificates: tuple[Tree, ...]
    marks: Tree
    numbers: dict[str, int]

    @property
    def prefix(self) -> str:
        """What its certificate numbers begin with."""
        return prefix_of(self.id)


@dataclass(frozen=True)
class Mark:
    """A mark of the register as of today.

    names: in books, in order of appearance. name: as decided, else the first. described: what the books say of it.
    """

    number: int
    name: str
    names: tuple[str, ...]
    numbers: tuple[int, ...]  # all that are this mark
    described: tuple[tuple[str, str, Tree], ...]  # book id, name there, tree of the mark
    occupations: tuple[Held, ...]
    from_utc: str | None  # it stands since a reset
    until_utc: str | None  # it was reset then: a new point


@dataclass
class RegisterState:
    """The folded register; `apply` takes entries in order."""

    id: str = ""
    head_seq: int = 0
    head_hash: str = ""
    entries: list[Entry] = field(default_factory=list)
    books: dict[str, HeldBook] = field(default_factory=dict)
    struck: dict[int, Entry] = field(default_factory=dict)  # seq -> the strike that stands
    next_number: int = 1
    _numbers: dict[int, tuple[str, str]] = field(default_factory=dict)  # number -> (book, name)
    _marks: dict[int, Mark] | None = None
    _excluded: dict[tuple[str, int], Entry] | None = None
    _union: _Union | None = None

    def apply(self, entry: Entry) -> None:
        """Take in the next entry."""
        self.entries.append(entry)
        self.head_seq, self.head_hash = entry.seq, entry.hash
        self._marks = self._excluded = self._union = None
        body = entry.body
        if entry.kind == "register":
            self.id = str(body["id"])
        elif entry.kind in ("added", "elsewhere"):
            self._add(entry)
        elif entry.kind in ("reset", "separate"):
            self.next_number = max(self.next_number, int(body["number"]) + 1)
        elif entry.kind == "strike":
            self._strike()

    def _add(self, entry: Entry) -> None:
        body = entry.body
        book = str(body["book"])
        before = self.books.get(book)
        numbers = {
            **({} if before is None else before.numbers),
            **{name: int(n) for name, n in body["numbers"].items()},
        }
        for name, number in numbers.items():
            self._numbers[number] = (book, name)
            self.next_number = max(self.next_number, number + 1)
        head_seq, head_hash = int(body["head_seq"]), str(body["head_hash"])
        self.books[book] = HeldBook(
            id=book,
            path=str(body["path"]),
            head_seq=head_seq,
            head_hash=head_hash,
            hashes=str(body["hashes"]),
            entry=entry,
            heads={**({} if before is None else before.heads), head_seq: head_hash},
            occupations=tuple(_held(book, item, numbers) for item in body["occupations"]),
            failed=tuple(body["failed"]),
            certificates=tuple(body["certificates"]),
            marks=body["marks"],
            numbers=numbers,
        )

    def _strike(self) -> None:
        """Which strikes stand: from the last to the first, so that a struck strike strikes nothing."""
        self.struck = {}
        for entry in reversed(self.entries):
            if entry.kind == "strike" and entry.seq not in self.struck:
                self.struck[int(entry.body["seq"])] = entry

    def standing(self, *kinds: str) -> Iterator[Entry]:
        """Entries of these kinds that are not struck, in order."""
        return (entry for entry in self.entries if entry.kind in kinds and entry.seq not in self.struck)

    # -- marks -------------------------------------------------------------------------------------------------

    def marks(self) -> dict[int, Mark]:
        """All marks by number, in order of number."""
        if self._marks is None:
            self._marks = self._grouped()
        return self._marks

    def occupations(self) -> Iterator[Held]:
        """Every occupation of every book, excluded ones too."""
        for book in self.books.values():
            yield from book.occupations

    def excluded(self) -> dict[tuple[str, int], Entry]:
        """Occupations that were set apart by decision."""
        if self._excluded is None:
            found = {(e.body["book"], int(e.body["occupation"])): e for e in self.standing("exclude")}
            self._excluded = found
        return self._excluded

    def different(self) -> dict[frozenset[int], Entry]:
        """Pairs of marks (today's numbers) that were settled as two."""
        root = self._roots()
        found: dict[frozenset[int], Entry] = {}
        for entry in self.standing("different"):
            first, second = (int(number) for number in entry.body["marks"])
            found[frozenset((root(first), root(second)))] = entry
        for entry in self.standing("reset"):
            found.setdefault(frozenset((root(int(entry.body["mark"])), root(int(entry.body["number"])))), entry)
        return found

    def root_of(self, number: int) -> int:
        """The mark that a number belongs to today."""
        return self._roots()(number)

    def frame(self) -> tuple[str, str | None] | None:
        """The frame and epoch the register is kept in, if that was decided."""
        last = None
        for entry in self.standing("frame"):
            last = (str(entry.body["frame"]), entry.body["epoch"])
        return last

    def rule(self) -> Entry | None:
        """The rule by which proposals are accepted without asking, if one stands."""
        last = None
        for entry in self.standing("rule"):
            last = entry
        return last

    def _roots(self) -> _Union:
        if self._union is None:
            self._union = _Union()
            for entry in self.standing("same"):
                first, second = (int(number) for number in entry.body["marks"])
                self._union.join(first, second)
        return self._union

    def joins(self) -> Joins:
        """Which marks are one and which are settled as two, to try further joins on."""
        apart: dict[int, set[int]] = {}
        for pair in self.different():
            for number in pair:
                apart.setdefault(number, set()).update(pair - {number})
        return Joins(self._roots().copied(), apart)

    def _grouped(self) -> dict[int, Mark]:
        root = self._roots()
        resets: dict[int, list[Entry]] = {}
        for entry in self.standing("reset"):
            resets.setdefault(root(int(entry.body["mark"])), []).append(entry)
        apart = {(e.body["book"], int(e.body["occupation"])): int(e.body["number"]) for e in self.standing("separate")}
        members: dict[int, list[Held]] = {}
        for held in self.occupations():
            first = root(apart.get(held.key, held.number))
            members.setdefault(_after_resets(first, held, resets, root), []).append(held)
        numbers: dict[int, list[int]] = {}
        for number in sorted(self._numbers):
            numbers.setdefault(root(number), []).append(number)
        given = [int(entry.body["number"]) for entries in resets.values() for entry in entries]
        for number in (*given, *apart.values()):
            own = numbers.setdefault(root(number), [])
            if number not in own:
                own.append(number)
        decided = {root(int(entry.body["mark"])): str(entry.body["name"]) for entry in self.standing("name")}
        begun = {root(int(e.body["number"])): str(e.body["from_utc"]) for list_ in resets.values() for e in list_}
        return {
            number: self._mark(number, own, members.get(number, []), decided.get(number), begun.get(number), resets)
            for number, own in sorted(numbers.items())
        }

    def _mark(
        self,
        number: int,
        own: list[int],
        members: list[Held],
        decided: str | None,
        from_utc: str | None,
        resets: dict[int, list[Entry]],
    ) -> Mark:
        described: list[tuple[str, str, Tree]] = []
        for known in own:
            if known in self._numbers:
                book, name = self._numbers[known]
                described.append((book, name, self.books[book].marks.get(name) or {"name": name}))
        if not described:  # a number given by a decision: what the books of its occupations say
            seen = dict.fromkeys((held.book, held.name) for held in members)
            described = [(book, name, self.books[book].marks.get(name) or {"name": name}) for book, name in seen]
        names = tuple(dict.fromkeys(name for _, name, _ in described))
        first = names[0] if names else f"mark {number}"
        ends = sorted(str(entry.body["from_utc"]) for entry in resets.get(number, []))
        ordered = tuple(sorted(members, key=lambda held: (held.started or "", held.book, held.occupation)))
        return Mark(
            number, decided or first, names or (first,), tuple(own), tuple(described), ordered,
            from_utc, ends[0] if ends else None,
        )  # fmt: skip


class _Union:
    """Union-find that knows every set by its smallest number."""

    def __init__(self, parent: dict[int, int] | None = None) -> None:
        self._parent: dict[int, int] = {} if parent is None else parent

    def copied(self) -> _Union:
        return _Union(dict(self._parent))

    def __call__(self, number: int) -> int:
        path = []
        while (above := self._parent.get(number, number)) != number:
            path.append(number)
            number = above
        for passed in path:
            self._parent[passed] = number
        return number

    def join(self, first: int, second: int) -> None:
        low, high = sorted((self(first), self(second)))
        if low != high:
            self._parent[high] = low


class Joins:
    """Marks as they would be after further joins, without folding thousands of entries again for each."""

    def __init__(self, union: _Union, apart: dict[int, set[int]]) -> None:
        self._union = union
        self._apart = apart

    def join(self, first: int, second: int) -> bool:
        """Make two marks one; False, and nothing done, if they are one already or settled as two."""
        one, two = self._union(first), self._union(second)
        if one == two or two in self._apart.get(one, ()):
            return False
        self._union.join(one, two)
        kept, gone = min(one, two), max(one, two)
        for other in self._apart.pop(gone, set()):
            self._apart[other].discard(gone)
            self._apart[other].add(kept)
            self._apart.setdefault(kept, set()).add(other)
        return True


def _after_resets(number: int, held: Held, resets: dict[int, list[Entry]], root: _Union) -> int:
    """The mark an occupation belongs to: of the latest reset before it began, and so on from there."""
    seen = {number}
    while True:
        passed = [e for e in resets.get(number, []) if held.started is not None and held.started >= e.body["from_utc"]]
        if not passed:
            return number
        number = root(int(max(passed, key=lambda e: str(e.body["from_utc"])).body["number"]))
        if number in seen:
            return number
        seen.add(number)


def _held(book: str, item: Tree, numbers: dict[str, int]) -> Held:
    place = item["place"]
    name = str(item["mark"])
    return Held(
        book=book,
        occupation=int(item["occupation"]),
        number=numbers[name],
        name=name,
        evidence=str(item["evidence"]),
        reduction=str(item["reduction"]),
        open=bool(item["open"]),
        started=item["started"],
        ended=item["ended"],
        frame=item["frame"],
        epoch=item["epoch"],
        place=None if place is None else (float(place[0]), float(place[1]), _number(place[2])),
        plan_u95_m=float(item["plan_u95_m"]),
        height_u95_m=_number(item["height_u95_m"]),
        measured_u95_m=(float(item["measured_u95_m"][0]), _number(item["measured_u95_m"][1])),
        operation=tuple(item["operation"]),
        received_sha256=item["received_sha256"],
    )


def _number(text: str | None) -> float | None:
    return None if text is None else float(text)


def prefix_of(book_id: str) -> str:
    """First eight hex digits of a book's id, as in the numbers of its certificates."""
    return book_id.replace("-", "")[:8].lower()


def label_of(book_id: str, occupation: int) -> str:
    """How an occupation is named in the register."""
    return f"{prefix_of(book_id)}/{occupation}"
