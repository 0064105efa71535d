"""A book read for the register: its chain, its occupations reduced, its marks and certificates. The book is not changed."""

from __future__ import annotations

from dataclasses import dataclass
from decimal import Decimal
from pathlib import Path

from fieldbook import __version__
from fieldbook.book.store import Book
from fieldbook.clock import Clock
from fieldbook.errors import FieldbookError
from fieldbook.model.canonical import Tree, fixed
from fieldbook.model.entry import Entry
from fieldbook.occupy.reductions import reduce_book
from fieldbook.reduce.frames import versions
from fieldbook.reduce.occupation import Reduced

from .evidence import Evidence, evidence_of
from .store import as_kept

# An occupation that cannot be reduced for what was received stays so on every computer, and is entered as it is. For any other
# reason (a frame, grid, geoid model or operation that is not to be had here) the book is refused: the register would hold
# less than the book says.
IN_THE_DATA = frozenset(
    {"no_usable_fix", "no_position", "date_unknown", "no_height", "no_ellipsoidal_height", "slant_too_short"}
)


@dataclass(frozen=True)
class ReadBook:
    """What a book says. hashes: of all entries, 32 bytes each, in order. occupations: with the bytes that are kept."""

    id: str
    head_seq: int
    head_hash: str
    hashes: bytes
    versions: Tree
    occupations: tuple[tuple[Evidence, bytes, bytes], ...]  # evidence, its bytes, bytes of the whole reduction
    failed: tuple[Tree, ...]
    marks: Tree
    certificates: tuple[Tree, ...]


class Unreachable(FieldbookError):
    """Occupations of a book that cannot be reduced here, although what was received is sound."""


def head_of(path: Path, clock: Clock) -> tuple[str, int, str]:
    """(id, number of the last entry, its hash).

    Raises:
        BookError: it cannot be opened or read.
    """
    with Book.open(path, clock=clock) as book:
        state = book.state()
    return state.id, state.head_seq, state.head_hash


def read_book(path: Path, clock: Clock) -> ReadBook:
    """Everything the register keeps of a book.

    Raises:
        BookError: it cannot be opened or read.
        Unreachable: a frame, grid or geoid model cannot be reached from this computer.
    """
    with Book.open(path, clock=clock) as book:
        entries, state = book.entries(), book.state()
        reduced, failed = reduce_book(book)
    away = [item for item in failed if item.error.code not in IN_THE_DATA]
    if away:
        first = away[0].error
        named = ", ".join(str(item.occupation) for item in away)
        raise Unreachable(
            f"Occupation {named} cannot be reduced on this computer: {first.text}", first.remedy, code=first.code
        )
    occupations = []
    for item in reduced:
        occupation = state.occupations[item.reduction.occupation]
        evidence = evidence_of(item, occupation)
        occupations.append((evidence, as_kept(evidence.to_tree()), as_kept(_whole(item))))
    used = versions()
    return ReadBook(
        id=state.id,
        head_seq=entries[-1].seq,
        head_hash=entries[-1].hash,
        hashes=b"".join(bytes.fromhex(entry.hash) for entry in entries),
        versions={"fieldbook": __version__, "proj": used.proj, "epsg": used.epsg, "pyproj": used.pyproj},
        occupations=tuple(occupations),
        failed=tuple(
            {"mark": item.mark, "occupation": item.occupation, "code": item.error.code, "text": item.error.text}
            for item in failed
        ),
        marks={
            name: state.marks.get(name) or {"name": name}
            for name in dict.fromkeys([*state.marks, *(item.mark for item in state.occupations.values())])
        },
        certificates=tuple(_certificate(entry) for entry in state.documents if entry.kind == "certificate"),
    )


def _whole(item: Reduced) -> Tree:
    """R of `reduce --json`; the running mean is left out, which can be made again from the book alone."""
    return item.reduction.to_json()


def _certificate(entry: Entry) -> Tree:
    """What a register must know of a certificate to say whether it still matches."""
    body = entry.body
    position = body["facts"].get("position") or {}
    client = position.get("client")
    return {
        "number": body["number"],
        "mark": body["mark"],
        "occupation": body["occupation"],
        "occupations": body.get("occupations"),
        "digest": body["digest"],
        "supersedes": body.get("supersedes"),
        "issued_utc": body.get("issued_utc"),
        "reason": body.get("reason"),
        "sign_off": body["facts"].get("sign_off"),
        "signature": body.get("signature"),
        "seq": entry.seq,
        "hash": entry.hash,
        "client": None
        if not isinstance(client, dict)
        else {key: client.get(key) for key in ("frame", "epoch", "lat_deg", "lon_deg", "h_m")},
    }


def line_of(evidence: Evidence, evidence_sha: str, reduction_sha: str) -> Tree:
    """What the `added` entry says of one occupation: enough to tell marks apart without opening the evidence.

    Degrees to 1e-11 (a micrometre), metres to 1e-6: the exact figures are in the evidence.
    """
    place = evidence.place
    return {
        "occupation": evidence.occupation,
        "mark": evidence.mark,
        "evidence": evidence_sha,
        "reduction": reduction_sha,
        "open": evidence.open,
        "started": evidence.started,
        "ended": evidence.ended,
        "frame": None if place is None else place.frame,
        "epoch": None if place is None else epoch_text(place.epoch),
        "place": None if place is None else [fixed(place.lat_deg, 11), fixed(place.lon_deg, 11), fixed(place.h_m, 6)],
        "plan_u95_m": fixed(evidence.plan_u95_m, 6),
        "height_u95_m": fixed(evidence.height_u95_m, 6),
        "measured_u95_m": [fixed(value, 6) for value in evidence.measured_u95_m],
        "operation": list(evidence.operation),
        "received_sha256": evidence.received_sha256,
    }


def epoch_text(epoch: float | None) -> str | None:
    """A decimal year to 0.0001 (an hour), without trailing zeros beyond the first decimal."""
    if epoch is None:
        return None
    text = f"{Decimal(repr(epoch)):.4f}".rstrip("0")
    return text + "0" if text.endswith(".") else text
