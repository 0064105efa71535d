"""Epochs of an ended occupation: packed without loss, read back in any order, found when changed, harmless when hostile."""

from __future__ import annotations

import dataclasses
import hashlib
import json
import lzma
import sqlite3
from pathlib import Path
from typing import Any

import pytest
import small_books as small
from any_epochs import any_epoch, numbered
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from fieldbook.book import epoch_packs, migrations
from fieldbook.book.audit import audit_book
from fieldbook.book.columns import decode_column, encode_column
from fieldbook.book.store import Book
from fieldbook.errors import BookError
from fieldbook.model.epoch import Epoch, EpochFlag, Satellite
from fieldbook.model.recorder import RecorderState

_WIDE = st.none() | st.integers(-(2**63), 2**63 - 1)
_NEAR = st.none() | st.integers(-300, 300)
_STEPS = st.builds(
    lambda first, steps: [first + sum(steps[: end + 1]) for end in range(len(steps))],
    st.integers(-(2**40), 2**40),
    st.lists(st.sampled_from([0, 10, 1000, 1000, -86_400_000, 70_000]), max_size=80),
)


def rows_of(path: Path, table: str) -> int:
    """How many rows a table has."""
    connection = sqlite3.connect(path)
    try:
        return int(connection.execute(f"SELECT count(*) FROM {table}").fetchone()[0])
    finally:
        connection.close()


def ended_with(path: Path, epochs: list[Epoch]) -> Path:
    """A closed book whose only occupation has these epochs, was ended and packed."""
    with small.begun(path) as book:
        book.write_burst(1, [small.item(1)], epochs)
        small.end(book, 1, len(epochs))
        book.pack(1)
    return path


# -- columns ---------------------------------------------------------------------------------------------------


@settings(max_examples=300, deadline=None)
@given(st.lists(_WIDE, max_size=60) | st.lists(_NEAR, max_size=300) | _STEPS, st.binary(max_size=3))
def test_a_column_comes_back_exactly(values: list[int | None], behind: bytes) -> None:
    head, body = encode_column(values)
    assert json.loads(json.dumps(head)) == head
    again, taken = decode_column(head, memoryview(body + behind), len(values))
    assert list(again) == values
    assert taken == len(body)


@pytest.mark.parametrize(
    ("values", "most_bytes"),
    [
        ([7] * 5000, 0),
        ([None] * 5000, 0),
        ([3_600_000 + 1000 * step for step in range(5000)], 0),  # a regular time
        ([123_456_789_010 + 10 * (step * 7919 % 97) for step in range(5000)], 5000),  # 7 decimals: steps of ten units
        ([-(2**63), 2**63 - 1] * 10, 8 * 20),
    ],
)
def test_what_a_column_takes(values: list[int | None], most_bytes: int) -> None:
    head, body = encode_column(values)
    assert len(body) <= most_bytes
    assert list(decode_column(head, memoryview(body), len(values))[0]) == values


@pytest.mark.parametrize("value", [2**63, -(2**63) - 1])
def test_what_no_integer_of_the_book_holds_is_refused(value: int) -> None:
    with pytest.raises(ValueError, match="64 bits"):
        encode_column([1, value])


@pytest.mark.parametrize(
    "head",
    [
        None, 7, [], [0, 0, 0, 0], [0, 0, 0, 0, 1.0], [0, 0, 0, True, 1], [3, 0, 0, 0, 1], [0, 3, 1, 0, 1, 1, 1, 1],
        [0, 0, 9, 0, 1], [0, 0, -1, 0, 1], [0, 1, 1, 0, 1], [0, 0, 1, 2**90, 1], [0, 0, 0, 2**63, 1],
        [0, 0, 8, 0, 2**70], [0, 2, 1, 2**62, 1, 2**62, 2**62], [0, 0, 2, 0, 1], [1, 0, 0, 0, 1],
    ],
)  # fmt: skip
def test_a_hostile_description_of_a_column_is_refused(head: object) -> None:
    with pytest.raises(ValueError, match=r"column|64 bits"):
        decode_column(head, memoryview(b"\x07\x02\xff\xff"), 4)


# -- epochs ----------------------------------------------------------------------------------------------------


@settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.lists(any_epoch, min_size=1, max_size=25), st.integers(0, 26), st.integers(0, 26))
def test_packed_epochs_come_back_exactly(tmp_path_factory, epochs: list[Epoch], after: int, limit: int) -> None:
    epochs = numbered(epochs)
    path = ended_with(tmp_path_factory.mktemp("packed") / "a.book", epochs)
    assert rows_of(path, "epoch") == rows_of(path, "epoch_form") == 0
    with Book.open(path, clock=small.clock()) as book:
        assert book.epochs(1) == epochs
        assert book.epochs(1, after=after) == epochs[after:]
        assert book.epochs(1, after, limit) == epochs[after : after + limit]
        assert all(type(one.flags) is int for one in book.epochs(1))
    assert audit_book(path) == []


def _awkward() -> list[Epoch]:
    """Midnight, time going back and standing still, every flag, other forms now and then, outliers, things missing."""
    found = []
    for number in range(1, 301):
        epoch = small.epoch(number)
        epoch.day, epoch.time_ms = divmod(86_395_000 + 100 * number, 86_400_000)
        if number % 50 == 0:
            epoch.time_ms, epoch.code = epoch.time_ms - 30_000, "time_back"
        if number % 17 == 0:
            epoch.latitude_e8min = epoch.longitude_e8min = epoch.altitude_e5m = epoch.hdop_milli = None
            epoch.code, epoch.quality = "no_position", 0
        if number % 29 == 0:
            epoch.latitude_e8min = 324_000_000_000 - number
        epoch.flags = list(EpochFlag)[number % len(EpochFlag)] if number % 11 == 0 else 0
        epoch.day, epoch.time_ms = (None, None) if number < 4 else (epoch.day, epoch.time_ms)
        found.append(epoch)
    return found


def test_pieces_join_without_a_seam(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(epoch_packs, "PIECE_EPOCHS", 64)
    epochs = _awkward()
    path = ended_with(tmp_path / "a.book", epochs)
    assert rows_of(path, "epoch_pack") == 5
    with Book.open(path, clock=small.clock()) as book:
        assert book.epochs(1) == epochs
        for after, limit in (
            (0, 64),
            (0, 65),
            (63, 1),
            (64, None),
            (64, 64),
            (200, 100),
            (299, 5),
            (300, None),
            (999, 1),
        ):
            assert book.epochs(1, after, limit) == epochs[after : None if limit is None else after + limit]
    assert audit_book(path) == []


def test_an_open_occupation_keeps_rows(tmp_path: Path) -> None:
    path = tmp_path / "a.book"
    with small.begun(path) as book:
        small.record(book, 1, 1, 40)
        book.pack(1)
        small.record(book, 1, 41, 50)
        assert book.epochs(1) == [small.epoch(number) for number in range(1, 51)]
        assert book.epochs(1, after=30, limit=2) == [small.epoch(31), small.epoch(32)]
    assert rows_of(path, "epoch_pack") == 0
    assert audit_book(path) == []


def test_two_occupations_are_packed_apart(tmp_path: Path) -> None:
    path = small.ended(tmp_path / "a.book")  # 1 is packed, 2 not yet
    assert (rows_of(path, "epoch"), rows_of(path, "epoch_pack")) == (25, 1)
    with Book.open(path, clock=small.clock(), write=True) as book:
        book.append("occupation", small.occupation_body(3), "R. Kell")
        small.record(book, 3, 1, 5)
        book.pack(2)
        assert [len(book.epochs(number)) for number in (1, 2, 3)] == [50, 25, 5]
    assert (rows_of(path, "epoch"), rows_of(path, "epoch_pack")) == (5, 2)
    assert audit_book(path) == []


def test_replaced_epochs_of_an_ended_occupation_are_packed_too(tmp_path: Path) -> None:
    path = ended_with(tmp_path / "a.book", [small.epoch(number) for number in range(1, 51)])
    again = [dataclasses.replace(small.epoch(number), talker="GP") for number in range(1, 51)]
    with Book.open(path, clock=small.clock(), write=True) as book:
        book.replace_epochs(1, again)
        assert book.epochs(1) == again
        book.replace_epochs(1, [])
        assert book.epochs(1) == []
        book.replace_epochs(1, again)
    assert (rows_of(path, "epoch"), rows_of(path, "epoch_form"), rows_of(path, "epoch_pack")) == (0, 0, 1)
    assert audit_book(path) == []


def test_more_epochs_than_may_be_packed_stay_rows(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(epoch_packs, "PIECE_EPOCHS", 16)
    monkeypatch.setattr(epoch_packs, "MOST_PACKED", 40)
    epochs = [small.epoch(number) for number in range(1, 101)]
    path = ended_with(tmp_path / "a.book", epochs)
    with Book.open(path, clock=small.clock(), write=True) as book:
        book.pack(1)
        assert book.epochs(1) == epochs
        assert book.epochs(1, after=35, limit=10) == epochs[35:45]
        assert (rows_of(path, "epoch"), rows_of(path, "epoch_pack")) == (60, 3)
        book.replace_epochs(1, epochs)
        assert book.epochs(1) == epochs
        assert (rows_of(path, "epoch"), rows_of(path, "epoch_pack")) == (60, 3)
    assert audit_book(path) == []
    monkeypatch.setattr(epoch_packs, "MOST_PACKED", 39)
    assert "more epochs are packed" in audit_book(path)[0].text
    with Book.open(path, clock=small.clock()) as book, pytest.raises(BookError, match="more than any writer"):
        book.epochs(1)


def test_a_pack_that_does_not_read_back_lets_nothing_go(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "a.book"
    with small.begun(path) as book:
        small.record(book, 1, 1, 30)
        small.end(book, 1, 30)
        with monkeypatch.context() as patch:
            patch.setattr(epoch_packs, "encode_column", lambda values: encode_column(values[::-1]))
            with pytest.raises(BookError, match="did not read back"):
                book.pack(1)
        assert len(book.epochs(1)) == 30
    assert (rows_of(path, "epoch"), rows_of(path, "epoch_pack")) == (30, 0)
    assert audit_book(path) == []


def test_the_sky_of_an_ended_occupation_is_let_go(tmp_path: Path) -> None:
    sky = [Satellite("GPS", number, 40, 120, 44.0, True) for number in range(1, 31)]
    with small.begun(tmp_path / "a.book") as book:
        book.write_burst(1, [small.item(1)], [small.epoch(1)], RecorderState(1, epochs=1, sky=sky))
        book.pack(1)
        state = book.recorder_state()
        assert state is not None
        assert state.sky == sky
        small.end(book, 1, 1)
        book.pack(1)
        assert book.recorder_state() == RecorderState(1, epochs=1)


def test_ended_epochs_take_a_few_bytes(tmp_path: Path) -> None:
    """What noise and arrival times cost: below 12 bytes, against 54 of a row."""
    import random

    luck = random.Random(20270304)
    epochs = [
        dataclasses.replace(
            small.epoch(number),
            code=None,
            latitude_e8min=-223_612_345_670 + 10 * round(luck.gauss(0, 40)),
            longitude_e8min=866_412_345_670 + 10 * round(luck.gauss(0, 40)),
            altitude_e5m=12_345_600 + 100 * round(luck.gauss(0, 12)),
            received_monotonic_ms=1000 * number + luck.randrange(30),
            received_utc_ms=small.START_MS + 1000 * number + luck.randrange(30),
        )
        for number in range(1, 3001)
    ]
    (piece,) = epoch_packs.pieces_of_epochs(epochs)
    pack = epoch_packs.packed(piece)
    print(f"{len(pack.data) / len(epochs):.2f} bytes an epoch")
    assert len(pack.data) / len(epochs) < 12
    assert epoch_packs.epochs_of(epoch_packs.unpacked(pack)) == epochs


# -- an older book, and the guards -----------------------------------------------------------------------------


def test_a_book_of_the_first_version_is_brought_up_to_date(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "a.book"
    with monkeypatch.context() as patch:
        patch.setattr(migrations, "MIGRATIONS", migrations.MIGRATIONS[:1])
        with small.begun(path) as book:
            small.record(book, 1, 1, 50)
            small.end(book, 1, 50)
    assert rows_of(path, "epoch") == 50
    assert audit_book(path) == []  # as it is, by this program
    with pytest.raises(BookError) as caught:
        Book.open(path, clock=small.clock())
    assert caught.value.code == "older"
    with Book.open(path, clock=small.clock(), write=True) as book:
        assert [row[1] for row in book.entries()[-1].body["migrations"]] == ["m002_epoch_pack"]
        assert len(book.epochs(1)) == 50
    assert audit_book(path) == []
    with Book.open(path, clock=small.clock(), write=True) as book:
        assert book.pack(1) == 3
        assert book.epochs(1) == [small.epoch(number) for number in range(1, 51)]
    assert (rows_of(path, "epoch"), rows_of(path, "epoch_pack")) == (0, 1)
    assert audit_book(path) == []
    connection = sqlite3.connect(path)
    assert migrations.schema_of(connection) == migrations.expected_schema(2)
    connection.close()


@pytest.mark.parametrize(
    "statement",
    [
        "UPDATE epoch_pack SET count = count",
        "INSERT INTO epoch_pack SELECT occupation, 50, 60, codec, 11, sha256, data FROM epoch_pack",
        "INSERT OR REPLACE INTO epoch_pack SELECT * FROM epoch_pack",
        "INSERT INTO epoch_pack SELECT occupation, 90, 80, codec, 11, sha256, data FROM epoch_pack",
    ],
)
def test_the_table_refuses(tmp_path: Path, statement: str) -> None:
    path = ended_with(tmp_path / "a.book", [small.epoch(number) for number in range(1, 51)])
    connection = sqlite3.connect(path, isolation_level=None)
    try:
        for recursive in ("ON", "OFF"):
            connection.execute(f"PRAGMA recursive_triggers = {recursive}")
            with pytest.raises(sqlite3.IntegrityError):
                connection.execute(statement)
    finally:
        connection.close()


def test_rows_beside_a_pack_that_holds_them_are_found(tmp_path: Path) -> None:
    path = ended_with(tmp_path / "a.book", [small.epoch(number) for number in range(1, 51)])
    small.tamper(path, "INSERT INTO epoch_form (occupation, form, source, talker, flags) VALUES (1, 1, 'GGA', 'GN', 0)")
    small.tamper(path, "INSERT INTO epoch (occupation, number, form) VALUES (1, 50, 1)")
    with Book.open(path, clock=small.clock()) as book:
        assert book.epochs(1) == [small.epoch(number) for number in range(1, 51)]
    assert "rows begin with 50" in " ".join(finding.text for finding in audit_book(path))


def test_a_pack_of_an_open_or_unknown_occupation_is_found(tmp_path: Path) -> None:
    path = ended_with(tmp_path / "a.book", [small.epoch(number) for number in range(1, 51)])
    small.tamper(path, "INSERT INTO epoch_pack SELECT 7, first, last, codec, count, sha256, data FROM epoch_pack")
    texts = " ".join(finding.text for finding in audit_book(path))
    assert "has not ended" in texts
    assert "no entry begins" in texts


# -- hostile packs ---------------------------------------------------------------------------------------------


def _stored(plain: bytes) -> dict[str, Any]:
    data = lzma.compress(plain, lzma.FORMAT_RAW, filters=epoch_packs._FILTERS)
    return {"data": data, "sha256": hashlib.sha256(data).hexdigest()}


def _plain(head: Any, body: bytes = b"") -> bytes:
    text = head if isinstance(head, bytes) else json.dumps(head).encode()
    return len(text).to_bytes(4, "big") + text + body


_FORM = ["GGA", "GN", None, 7, 7, 3, 0, 3, 4, None, None, 0]
_EMPTY = [2, 0, 0, 0, 1]
_HEADS = [[0, 0, 0, 0, 1], *[_EMPTY] * 15]
_HOSTILE: list[dict[str, Any]] = [
    _stored(bytes(epoch_packs.MOST_PLAIN_BYTES + 1)),
    _stored(b""),
    _stored(b"\xff\xff\xff\xff"),
    _stored(_plain(b"[" * 100_000)),
    _stored(_plain(b'{"forms":' + b"9" * 5000 + b"}")),
    _stored(_plain({"forms": [], "columns": _HEADS})),
    _stored(_plain({"forms": [_FORM[:-1]], "columns": _HEADS})),
    _stored(_plain({"forms": [[None, *_FORM[1:]]], "columns": _HEADS})),
    _stored(_plain({"forms": [[*_FORM[:-1], 1.5]], "columns": _HEADS})),
    _stored(_plain({"forms": [[*_FORM[:-1], 2**64]], "columns": _HEADS})),
    _stored(_plain({"forms": [["\ud800", *_FORM[1:]]], "columns": _HEADS})),
    _stored(_plain({"forms": [_FORM], "columns": _HEADS[:-1]})),
    _stored(_plain({"forms": [_FORM], "columns": [_EMPTY, *_HEADS[1:]]})),
    _stored(_plain({"forms": [_FORM], "columns": [[0, 0, 0, 1, 1], *_HEADS[1:]]})),
    _stored(_plain({"forms": [_FORM], "columns": [[0, 0, 8, 0, 1], *_HEADS[1:]]})),
    _stored(_plain({"forms": [_FORM, _FORM], "columns": _HEADS})),
    _stored(_plain({"forms": [_FORM], "columns": _HEADS}, b"more")),
    _stored(_plain({"forms": [_FORM], "columns": [*_HEADS[:-1], [0, 0, 0, 2**63, 1]]})),
    {"codec": "zip"},
    {"data": b"", "sha256": hashlib.sha256(b"").hexdigest()},
    {"data": b"\0" * 50, "sha256": hashlib.sha256(b"\0" * 50).hexdigest()},
    {"last": 10**12, "count": 10**12},
    {"last": 10**12},
    {"first": -1, "count": 52},
    {"sha256": "\x1b[2J"},
]


@pytest.mark.parametrize("values", _HOSTILE, ids=range(len(_HOSTILE)))
def test_a_hostile_pack_is_a_finding_and_a_book_error(tmp_path: Path, values: dict[str, Any]) -> None:
    path = ended_with(tmp_path / "a.book", [small.epoch(number) for number in range(1, 51)])
    assert _stored(_plain({"forms": [_FORM], "columns": _HEADS}))  # without a fault it is read: the next test
    changes = ", ".join(f"{name} = ?" for name in values)
    small.tamper(path, f"UPDATE epoch_pack SET {changes}", tuple(values.values()))
    findings = audit_book(path)
    assert {finding.where for finding in findings} == {"epoch"}
    assert all(finding.text.isprintable() for finding in findings)
    with Book.open(path, clock=small.clock()) as book, pytest.raises(BookError) as caught:
        book.epochs(1)
    assert caught.value.code == "damaged"


def test_the_sound_twin_of_the_hostile_packs_is_read(tmp_path: Path) -> None:
    path = ended_with(tmp_path / "a.book", [small.epoch(number) for number in range(1, 51)])
    values = _stored(_plain({"forms": [_FORM], "columns": _HEADS}))
    small.tamper(path, "UPDATE epoch_pack SET data = ?, sha256 = ?", (values["data"], values["sha256"]))
    assert audit_book(path) == []  # other values in a sound form: found by the rebuild, which the caller makes
    with Book.open(path, clock=small.clock()) as book:
        assert book.epochs(1) == [
            Epoch(number, "GGA", "GN", latitude_decimals=7, longitude_decimals=7, altitude_decimals=3,
                  separation_e5m=0, separation_decimals=3, quality=4)
            for number in range(1, 51)
        ]  # fmt: skip


@settings(max_examples=150, deadline=None)
@given(st.data())
def test_random_damage_inside_a_pack_raises_nothing_but_value_errors(data: st.DataObject) -> None:
    (piece,) = epoch_packs.pieces_of_epochs([small.epoch(number) for number in range(1, 31)])
    plain = bytearray(epoch_packs._inflated(epoch_packs.packed(piece).data))
    for _ in range(data.draw(st.integers(1, 3))):
        plain[data.draw(st.integers(0, len(plain) - 1))] = data.draw(st.integers(0, 255))
    forged = epoch_packs.Pack(1, 30, epoch_packs.CODEC, 30, **_stored(bytes(plain)))
    try:
        again = epoch_packs.epochs_of(epoch_packs.unpacked(forged))
    except ValueError:
        return
    assert [epoch.number for epoch in again] == list(range(1, 31))
