"""Epochs of an ended occupation in pieces of columns: about 5 bytes an epoch instead of a row of 54.

A piece holds at most PIECE_EPOCHS epochs of consecutive numbers: a head in JSON (the forms, a description of every
column), then the columns behind one another (`columns`), all as one raw LZMA2 stream. Positions stand in it as they
are, so a piece needs no origin. (LZMA, not bz2: measured on the samples 4.1-5.2 against 4.5-6.1 bytes an epoch; a
piece is small, so its slowness does not matter.) `sha256` of the row covers the stored bytes, so that not even a bit
that inflates to the same epochs can change unseen. Like the rows they replace, packs are a cache outside the chain:
`verify` decodes what was received again and compares every value.
"""

from __future__ import annotations

import dataclasses
import hashlib
import json
import lzma
import sqlite3
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import repeat
from operator import itemgetter
from typing import Any

from fieldbook.model.epoch import Epoch

from .columns import Column, decode_column, encode_column
from .epochs import FORM_FIELDS, PLAIN_FIELDS, Form, Origin, form_of, load_forms, plain_of, read_epochs

CODEC = "columns-lzma"
COLUMNS = ("form", "day", "time_ms", "latitude_e8min", "longitude_e8min", *PLAIN_FIELDS)
PIECE_EPOCHS = 20_000  # bounds memory in writing and in reading
MOST_PACKED = 2_000_000  # epochs of one occupation; what goes beyond stays rows, so that a small file cannot be a bomb
MOST_PLAIN_BYTES = 64 * 1024 * 1024  # of one piece; no writer makes larger ones
_FILTERS = [  # noise has no long matches: looking for them takes time and finds less
    {"id": lzma.FILTER_LZMA2, "dict_size": 1 << 20, "lc": 4, "lp": 0, "pb": 0}
    | {"mode": lzma.MODE_NORMAL, "mf": lzma.MF_HC3, "nice_len": 8, "depth": 2}
]
_HEAD_BYTES = 4
_SELECT = (
    "SELECT number, form, day, time_ms, latitude_offset_e8min, longitude_offset_e8min,"  # noqa: S608 - constants
    f" {', '.join(PLAIN_FIELDS)} FROM epoch WHERE occupation = ? AND number > ? ORDER BY number LIMIT ?"
)
_SELECT_PACKS = (
    "SELECT first, last, codec, count, sha256, data FROM epoch_pack WHERE occupation = ? AND last > ? ORDER BY rowid"
)
_EPOCH_FIELDS = tuple(field.name for field in dataclasses.fields(Epoch))[1:]  # `number` is the first


@dataclass(frozen=True)
class Piece:
    """Epochs of consecutive numbers as columns: `columns` in the order of COLUMNS, forms by their place."""

    first: int
    forms: list[Form]
    columns: list[Column]

    @property
    def count(self) -> int:
        """How many epochs."""
        return len(self.columns[0])


@dataclass(frozen=True)
class Pack:
    """A row of `epoch_pack` without its occupation."""

    first: int
    last: int
    codec: str
    count: int
    sha256: str
    data: bytes


def pieces_of_epochs(epochs: Sequence[Epoch]) -> Iterator[Piece]:
    """Pieces of decoded epochs, at most MOST_PACKED in all.

    Raises:
        ValueError: a gap in their numbers.
    """
    forms: dict[Form, int] = {}
    for begin in range(0, min(len(epochs), MOST_PACKED), PIECE_EPOCHS):
        part = epochs[begin : min(begin + PIECE_EPOCHS, MOST_PACKED)]
        own = [forms.setdefault(form_of(epoch), len(forms)) for epoch in part]
        rows = [(one.day, one.time_ms, one.latitude_e8min, one.longitude_e8min, *plain_of(one)) for one in part]
        yield _piece([epoch.number for epoch in part], own, dict(enumerate(forms)), list(zip(*rows, strict=True)))


def packs_of_rows(connection: sqlite3.Connection, occupation: int, origin: Origin | None) -> list[Pack]:
    """The epoch rows of an occupation compressed, as `pieces_of_rows` cuts them.

    Raises:
        ValueError: as `pieces_of_rows`.
    """
    forms = load_forms(connection, occupation)
    return [packed(piece) for piece in pieces_of_rows(connection, occupation, origin, forms)]


def pieces_of_rows(
    connection: sqlite3.Connection, occupation: int, origin: Origin | None, forms: dict[Form, int]
) -> Iterator[Piece]:
    """Pieces of an occupation's epoch rows, read one after the other, at most MOST_PACKED epochs in all.

    Raises:
        ValueError: a gap in their numbers, a form that is not there, or an offset without origin.
    """
    named = {number: form for form, number in forms.items()}
    have = connection.execute("SELECT coalesce(sum(count), 0) FROM epoch_pack WHERE occupation = ?", (occupation,))
    after, left = 0, MOST_PACKED - have.fetchone()[0]
    while left > 0 and (rows := connection.execute(_SELECT, (occupation, after, min(PIECE_EPOCHS, left))).fetchall()):
        numbers, own, day, time_ms, north, east, *plain = zip(*rows, strict=True)
        places = [_placed(offsets, origin[axis] if origin else None) for axis, offsets in enumerate((north, east))]
        yield _piece(numbers, own, named, [day, time_ms, *places, *plain])
        after, left = numbers[-1], left - len(numbers)


def _placed(offsets: Column, origin: int | None) -> Column:
    if origin is not None:
        return [None if offset is None else offset + origin for offset in offsets]
    if any(offset is not None for offset in offsets):
        raise ValueError("epochs have positions but no origin")
    return offsets


def _piece(numbers: Sequence[int], own: Sequence[int], named: dict[int, Form], columns: Sequence[Column]) -> Piece:
    """A piece of epochs whose forms have other numbers: here they get their own, in order of first use."""
    if numbers[-1] - numbers[0] + 1 != len(numbers):
        raise ValueError(f"epochs {numbers[0]} to {numbers[-1]} have a gap")
    places = {number: place for place, number in enumerate(dict.fromkeys(own))}
    if not named.keys() >= places.keys():
        raise ValueError("epochs name a form that is not there")
    return Piece(numbers[0], [named[number] for number in places], [list(map(places.__getitem__, own)), *columns])


def packed(piece: Piece) -> Pack:
    """A piece as it is stored, read back and compared before the rows are let go.

    Raises:
        ValueError: it did not read back as it was (failing memory), or is larger than any reader would take.
    """
    heads, bodies = zip(*map(encode_column, piece.columns), strict=True)
    tree = {"columns": heads, "forms": piece.forms}
    head = json.dumps(tree, ensure_ascii=False, separators=(",", ":")).encode("utf-8")
    plain = len(head).to_bytes(_HEAD_BYTES, "big") + head + b"".join(bodies)
    data = lzma.compress(plain, lzma.FORMAT_RAW, filters=_FILTERS)
    last = piece.first + piece.count - 1
    pack = Pack(piece.first, last, CODEC, piece.count, hashlib.sha256(data).hexdigest(), data)
    again = unpacked(pack)
    same = again.forms == piece.forms and all(
        list(one) == list(other) for one, other in zip(again.columns, piece.columns, strict=True)
    )
    if not same:
        raise ValueError("packed epochs did not read back as they were; nothing was let go")
    return pack


def unpacked(pack: Pack) -> Piece:
    """The piece of a stored row, every size checked.

    Raises:
        ValueError: anything that no writer makes.
    """
    if pack.codec != CODEC:
        raise ValueError(f"its codec is {pack.codec!r:.20}, not '{CODEC}'")
    if not 1 <= pack.first <= pack.last < 2**62 or pack.count != pack.last - pack.first + 1:
        raise ValueError(f"its numbers run from {pack.first} to {pack.last}, but it states {pack.count} epochs")
    if pack.count > PIECE_EPOCHS:
        raise ValueError(f"it claims {pack.count} epochs, more than any writer puts into one piece")
    if hashlib.sha256(pack.data).hexdigest() != pack.sha256:
        raise ValueError("its data is not what its SHA-256 states")
    plain = _inflated(pack.data)
    size = int.from_bytes(plain[:_HEAD_BYTES], "big")
    body = memoryview(plain)[_HEAD_BYTES + size :]
    forms, heads = _head(plain[_HEAD_BYTES : _HEAD_BYTES + size])
    columns: list[Column] = []
    for head in heads:
        values, taken = decode_column(head, body, pack.count)
        columns.append(values)
        body = body[taken:]
    if len(body) or set(columns[0]) != set(range(len(forms))):
        raise ValueError("its columns do not fit its forms")
    return Piece(pack.first, forms, columns)


def _inflated(data: bytes) -> bytes:
    worker = lzma.LZMADecompressor(lzma.FORMAT_RAW, filters=_FILTERS)
    try:
        plain = worker.decompress(data, MOST_PLAIN_BYTES)
    except (lzma.LZMAError, EOFError) as error:
        raise ValueError(f"its data is damaged ({error})") from error
    if not worker.eof or worker.unused_data:
        raise ValueError("its data does not end where it should, or is larger than any writer makes it")
    return plain


def _head(data: bytes) -> tuple[list[Form], list[object]]:
    try:
        tree: Any = json.loads(data)
        forms = [tuple(form) for form in tree["forms"]]
        heads = list(tree["columns"])
    except (ValueError, RecursionError, LookupError, TypeError) as error:
        raise ValueError("its head cannot be read") from error
    if len(heads) != len(COLUMNS) or not forms or not all(map(_is_form, forms)):
        raise ValueError("its head does not describe epochs")
    return forms, heads


_TEXTS = frozenset(FORM_FIELDS.index(name) for name in ("source", "talker", "code", "station", "datum"))
_NEEDED = frozenset(FORM_FIELDS.index(name) for name in ("source", "talker", "flags"))


def _is_form(form: Form) -> bool:
    if len(form) != len(FORM_FIELDS):
        return False
    for place, value in enumerate(form):
        if value is None:
            good = place not in _NEEDED
        elif place in _TEXTS:
            good = isinstance(value, str) and not any("\ud800" <= letter <= "\udfff" for letter in value)
        else:
            good = type(value) is int and -(2**63) <= value < 2**63
        if not good:
            return False
    return True


def epochs_of(piece: Piece, after: int = 0) -> list[Epoch]:
    """The epochs of a piece with a number above `after`."""
    skip = max(0, after + 1 - piece.first)
    fields: dict[str, Any] = {
        name: column[skip:] if skip else column for name, column in zip(COLUMNS, piece.columns, strict=True)
    }
    own = fields.pop("form")
    for place, name in enumerate(FORM_FIELDS):
        values = [form[place] for form in piece.forms]
        fields[name] = repeat(values[0]) if len(values) == 1 else map(values.__getitem__, own)
    numbers = range(piece.first + skip, piece.first + piece.count)
    return list(map(Epoch, numbers, *itemgetter(*_EPOCH_FIELDS)(fields)))


def stored(connection: sqlite3.Connection, occupation: int, after: int = 0) -> Iterator[Pack]:
    """The packs of an occupation that hold a number above `after`, in order."""
    return (Pack(*row) for row in connection.execute(_SELECT_PACKS, (occupation, after)))


def insert(connection: sqlite3.Connection, occupation: int, packs: Sequence[Pack]) -> None:
    """Write packs. The caller holds the transaction."""
    connection.executemany(
        "INSERT INTO epoch_pack (occupation, first, last, codec, count, sha256, data) VALUES (?, ?, ?, ?, ?, ?, ?)",
        [(occupation, one.first, one.last, one.codec, one.count, one.sha256, one.data) for one in packs],
    )


def clear_rows(connection: sqlite3.Connection, occupation: int, packs: Sequence[Pack]) -> None:
    """Take the epochs that packs hold from the rows. The caller holds the transaction.

    Raises:
        ValueError: there are not exactly these rows any more.
    """
    last, count = packs[-1].last, sum(one.count for one in packs)
    ends = "SELECT occupation, number FROM epoch ORDER BY occupation {0}, number {0} LIMIT 1"
    lowest, highest = (connection.execute(ends.format(way)).fetchone() for way in ("ASC", "DESC"))
    if lowest == (occupation, packs[0].first) and highest == (occupation, last):
        gone = connection.execute("DELETE FROM epoch")  # without WHERE: pages, not rows, are let go
    else:
        gone = connection.execute("DELETE FROM epoch WHERE occupation = ? AND number <= ?", (occupation, last))
    if gone.rowcount != count:
        raise ValueError(f"the epochs of occupation {occupation} changed while they were packed")
    connection.execute(
        "DELETE FROM epoch_form WHERE occupation = ?1 AND form NOT IN (SELECT form FROM epoch WHERE occupation = ?1)",
        (occupation,),
    )


def read(
    connection: sqlite3.Connection, occupation: int, origin: Origin | None, after: int = 0, limit: int | None = None
) -> list[Epoch]:
    """Epochs of an occupation with a number above `after`, in order, at most `limit`, across packs and rows.

    The caller holds a read transaction.

    Raises:
        ValueError: damaged.
    """
    found: list[Epoch] = []
    last = count = 0
    for pack in stored(connection, occupation, after):
        piece = unpacked(pack)
        count += pack.count
        if pack.first <= last or count > MOST_PACKED:
            raise ValueError("its packed epochs are more than any writer makes, or stand there twice")
        last = pack.last
        found += epochs_of(piece, after)
        if limit is not None and len(found) >= limit:
            return found[:limit]
    left = None if limit is None else limit - len(found)
    return found + read_epochs(connection, occupation, origin, max(after, last), left)
