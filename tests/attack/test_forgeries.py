"""What a clever forger does, who makes every hash anew: what `verify` still sees, and what it says it cannot see."""

from __future__ import annotations

import hashlib
import json
import shutil
import sqlite3
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from fieldbook.book import epoch_packs
from fieldbook.book.store import Book
from fieldbook.certificate.identity import facts_digest
from fieldbook.clock import SystemClock
from fieldbook.commands import run
from fieldbook.model.item import Item, ItemKind
from fieldbook.occupy.rebuild import rebuild

from .forger import change, forging, put_items, reseal, resum, seqs
from .victims import holds, made


@pytest.fixture(scope="module")
def certified(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return made("certified", tmp_path_factory.mktemp("forged"))


@pytest.fixture
def book(certified: Path, tmp_path: Path) -> Path:
    return Path(shutil.copy(certified, tmp_path / "forged.book"))


def _forge(book: Path, how: Callable[[sqlite3.Connection], object]) -> list[str]:
    with forging(book) as connection:
        how(connection)
        reseal(connection)
    return holds(book)[1]


def _facts_changed(connection: sqlite3.Connection, edit: Callable[[dict[str, Any]], object], which: int = -1) -> None:
    def both(body: dict[str, Any]) -> None:
        edit(body["facts"])
        body["digest"] = facts_digest(body["facts"])

    change(connection, seqs(connection, "certificate")[which], both)


def test_a_reading_changed_and_every_hash_made_anew_is_seen_through_the_certificate(book: Path) -> None:
    """The chain is sound in itself; the certificates were issued on another one, and say what the reading was."""
    lines = _forge(book, lambda db: change(db, seqs(db, "height")[0], lambda body: body.update(value="1.4100")))
    assert any("was issued on another chain" in line for line in lines)


def test_the_same_with_the_heads_and_digests_of_the_certificates_made_to_fit(book: Path) -> None:
    """Only making the facts again tells: antenna height before issue in the session, coordinates on the certificate."""

    def how(db: sqlite3.Connection) -> None:
        (begun,) = seqs(db, "occupation")
        change(db, begun, lambda body: body["session"]["setup"]["height"][0].update(value="1.4320"))

    with forging(book) as db:
        how(db)
        _heads_made_to_fit(db)
    lines = holds(book)[1]
    assert any("made again from the book as it stood then, it says something else: " in line for line in lines)


def _heads_made_to_fit(db: sqlite3.Connection) -> None:
    """Certificates and drafts state the head before them: from first to last, so that each finds the new one."""
    for seq in sorted([*seqs(db, "certificate"), *seqs(db, "draft")]):
        reseal(db)
        (text,) = db.execute("SELECT body FROM entry WHERE seq = ?", (seq,)).fetchone()
        head = json.loads(text)["facts"]["book"]["head_seq"]
        (hash_,) = db.execute("SELECT hash FROM entry WHERE seq = ?", (head,)).fetchone()

        def fit(body: dict[str, Any], known: str = hash_) -> None:
            body["facts"]["book"]["head_hash"] = known
            body["digest"] = facts_digest(body["facts"])

        change(db, seq, fit)
    reseal(db)


@pytest.mark.parametrize(
    ("path", "value"),
    [
        (("uncertainty", "client", "horizontal95_m"), "0.0010000"),
        (("position", "client", "printed", "h"), "231.000"),
        (("position", "client", "lat_deg"), "-34.000000000000"),
        (("mark", "name"), "KR-08"),
        (("job", "client"), "somebody else"),
        (("requirement", "source"), "a better one"),
        (("occupation", "kept_s"), "3600.0"),
        (("corrections", "kind"), "network"),
        (("findings",), []),
        (("setup", "readings"), []),
        (("struck",), []),
        (("cautions",), []),
        (("trace", "epochs"), 7),
    ],
)
@pytest.mark.parametrize("which", [0, -1])
def test_any_fact_of_a_certificate_changed_with_digest_and_chain(
    book: Path, path: tuple[str, ...], value: Any, which: int
) -> None:
    """Superseded ones too: paper of them is out there."""
    touched = []

    def edit(facts: dict[str, Any]) -> None:
        tree: Any = facts
        for key in path[:-1]:
            tree = tree[key]
        touched.append(tree.get(path[-1]) != value)
        tree[path[-1]] = value

    def how(db: sqlite3.Connection) -> None:
        _facts_changed(db, edit, which)
        _heads_made_to_fit(db)

    with forging(book) as db:
        how(db)
    lines = holds(book)[1]
    if touched == [True]:
        wanted = f"something else: {'.'.join(path)}"
        assert any(wanted in line for line in lines), lines
    else:
        assert path[0] in {"findings", "struck", "cautions", "setup"}, "the forged value was the true one"


def test_epochs_changed_with_the_hash_of_their_pack(book: Path) -> None:
    with Book.open(book, clock=SystemClock()) as opened:
        epochs = opened.epochs(1)
    epochs[40] = replace(epochs[40], altitude_e5m=(epochs[40].altitude_e5m or 0) + 100)
    (pack,) = [epoch_packs.packed(piece) for piece in epoch_packs.pieces_of_epochs(epochs)]
    with forging(book) as db:
        db.execute("UPDATE epoch_pack SET sha256 = ?, data = ?", (pack.sha256, pack.data))
    assert any("altitude_e5m is" in line for line in holds(book)[1])


def _items(book: Path) -> list[Item]:
    with Book.open(book, clock=SystemClock()) as opened:
        return list(opened.items(1))


def _decoded_anew(book: Path) -> epoch_packs.Pack:
    """The epoch pack as a decoder makes it of the forged bytes."""
    with Book.open(book, clock=SystemClock()) as opened:
        epochs, _ = rebuild(opened, 1)
    (pack,) = [epoch_packs.packed(piece) for piece in epoch_packs.pieces_of_epochs(epochs)]
    return pack


def _summed(line: bytes) -> bytes:
    body = line.strip()[1:].split(b"*")[0]
    total = 0
    for byte in body:
        total ^= byte
    return b"$" + body + b"*%02X\r\n" % total


def _moved(data: bytes) -> bytes:
    """Every altitude a metre lower, checksums right."""
    lines = []
    for line in data.splitlines(keepends=True):
        fields = line.split(b",")
        if fields[0].endswith(b"GGA") and fields[9]:
            fields[9] = b"%.4f" % (float(fields[9]) - 1)
            lines.append(_summed(b",".join(fields)))
        else:
            lines.append(line)
    return b"".join(lines)


@pytest.mark.parametrize("decoded_too", [False, True])
def test_received_bytes_changed_with_all_hashes(book: Path, decoded_too: bool) -> None:
    """Heights a metre lower in every sentence. Without the epochs the rebuild finds it, with them the certificate."""
    items = _items(book)
    data = b"".join(item.data for item in items if item.kind is ItemKind.BYTES)
    forged = [item for item in items if item.kind is not ItemKind.BYTES]
    forged.insert(1, Item(ItemKind.BYTES, _moved(data)))
    with forging(book) as db:
        put_items(db, 1, forged)
        _heads_made_to_fit(db)
    if decoded_too:
        pack = _decoded_anew(book)
        with forging(book) as db:
            db.execute("UPDATE epoch_pack SET sha256 = ?, data = ?", (pack.sha256, pack.data))
    lines = holds(book)[1]
    wanted = "reduced again, the book gives something else" if decoded_too else "altitude_e5m is"
    assert any(wanted in line for line in lines), lines


def test_received_items_in_another_order(book: Path) -> None:
    items = _items(book)
    data = b"".join(item.data for item in items if item.kind is ItemKind.BYTES)
    half = data.index(b"\r\n", len(data) // 2) + 2
    rest = [item for item in items if item.kind is not ItemKind.BYTES]
    swapped = [rest[0], Item(ItemKind.BYTES, data[half:]), Item(ItemKind.BYTES, data[:half]), *rest[1:]]
    with forging(book) as db:
        put_items(db, 1, swapped)
        _heads_made_to_fit(db)
    assert any("in the book" in line and "decoded from the raw rows" in line for line in holds(book)[1])


def test_chunks_that_change_places(tmp_path: Path) -> None:
    book = made("open", tmp_path)
    with forging(book) as db:
        rows = db.execute("SELECT chunk, first_id, last_id, items, bytes, sha256, data FROM raw_chunk").fetchall()
        assert len(rows) == 1
        db.execute("UPDATE raw_chunk SET chunk = 2")
        for seq in seqs(db, "raw"):
            change(db, seq, lambda body: body.update(chunk=2))
        reseal(db)
    assert any("does not follow the chunk before it" in line for line in holds(book)[1])


def test_the_tail_changed_with_its_sum_is_seen_only_where_it_decodes_to_something_else(tmp_path: Path) -> None:
    """A satellite sentence of the last minute can be forged unseen: `verify` says so of every open occupation."""
    book = made("open", tmp_path)
    with forging(book) as db:
        row, data = db.execute("SELECT id, data FROM raw_tail WHERE instr(data, 'GSV') ORDER BY id DESC").fetchone()
        at = data.index(b"GSV,")
        line = data[data.rindex(b"$", 0, at) : data.index(b"\r\n", at) + 2]
        forged = _summed(line.replace(b",1", b",2", 1))
        db.execute("UPDATE raw_tail SET data = ? WHERE id = ?", (data.replace(line, forged), row))
        resum(db)
    good, lines = holds(book)
    assert good or any("decoded from the raw rows" in line for line in lines)
    assert any("was not changed on purpose" in text for text in _not_proven(book))


def _not_proven(book: Path) -> list[str]:
    import contextlib
    import io

    said = io.StringIO()
    with contextlib.redirect_stdout(said):
        run(["verify", str(book), "--json"])
    found: list[str] = json.loads(said.getvalue())["files"][0]["not_proven"]
    return found


@pytest.mark.parametrize("entries", [1, 2, 7])
def test_entries_cut_off_at_the_end_show_in_nothing_but_paper(
    book: Path, certified: Path, entries: int, capsys: pytest.CaptureFixture[str]
) -> None:
    """A chain has no end mark. What was cut off with a certificate in it shows when that certificate turns up."""
    with forging(book) as db:
        db.execute("DELETE FROM entry WHERE seq > (SELECT max(seq) FROM entry) - ?", (entries,))
        (last,) = db.execute("SELECT max(seq) FROM entry").fetchone()
    assert holds(book) == (True, [])
    assert any(f"that entry {last} of" in text for text in _not_proven(book))
    code = run(["verify", str(book), str(certified.with_name("second.json"))])
    out = capsys.readouterr().out
    assert code == (1 if entries == 7 else 0)
    assert ("was not issued from this book" in out) is (entries == 7)


def test_what_was_received_cut_off_with_its_entries(book: Path) -> None:
    """Raw entries gone, bytes left, or the other way round: both are found."""
    with forging(book) as db:
        (first,) = seqs(db, "raw")
        db.execute("DELETE FROM entry WHERE seq >= ?", (first,))
    assert any("fits no entries" in line for line in holds(book)[1])


def test_a_book_forged_from_first_to_last_holds_and_only_paper_tells(
    tmp_path: Path, certified: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """The limit of every chain, said with each verification: compare the number and digest on paper."""
    book = made("certified", tmp_path)  # everything done again, an hour of a forger's work
    with Book.open(certified, clock=SystemClock()) as opened:
        theirs = opened.state().id
    with forging(book) as db:
        change(db, 1, lambda body: body.update(id=theirs))
        _heads_made_to_fit(db)
    assert any("not made anew as a whole" in text for text in _not_proven(book))
    assert run(["verify", str(book), str(certified.with_name("second.json"))]) == 1
    assert "was not issued from this book" in capsys.readouterr().out


def test_other_migrations_in_table_and_chain(book: Path) -> None:
    def how(db: sqlite3.Connection) -> None:
        db.execute("UPDATE _sqlite_migrations SET name = 'm002_other' WHERE id = 2")
        change(db, 1, lambda body: body["migrations"][1].__setitem__(1, "m002_other"))

    assert any("does not name the migrations of this version" in line for line in _forge(book, how))


def test_certificates_struck_out_of_the_documents(book: Path) -> None:
    """A strike cannot take a certificate back: forged in, it changes nothing."""

    def how(db: sqlite3.Connection) -> None:
        (target, *_) = seqs(db, "certificate")
        change(db, seqs(db, "strike")[0], lambda body: body.update(seq=target))

    assert _forge(book, how)


def test_two_forged_certificates_of_one_number(book: Path) -> None:
    def how(db: sqlite3.Connection) -> None:
        first, second = seqs(db, "certificate")
        (text,) = db.execute("SELECT body FROM entry WHERE seq = ?", (first,)).fetchone()
        number = json.loads(text)["number"]

        def same(body: dict[str, Any]) -> None:
            body["number"] = body["facts"]["document"]["number"] = number
            body["digest"] = facts_digest(body["facts"])

        change(db, second, same)

    assert any("certificate 2 of this book bears the number" in line for line in _forge(book, how))


def test_a_hash_is_over_bytes_nobody_can_shift_between_fields(book: Path) -> None:
    """Kind and body, body and observer: lengths are part of what is hashed."""
    with forging(book) as db:
        seq, kind, body = db.execute("SELECT seq, kind, body FROM entry WHERE kind = 'remark'").fetchone()
        db.execute("UPDATE entry SET kind = ?, body = ? WHERE seq = ?", (kind[:-1], kind[-1] + body, seq))
    assert any("was changed" in line for line in holds(book)[1])
    assert hashlib.sha256(b"remark{}").hexdigest() == hashlib.sha256(b"remar" + b"k{}").hexdigest()
