"""Rescue: what a damaged book still holds comes out, nothing is claimed that is not there, and a sound book is a copy."""

from __future__ import annotations

import importlib
import json
import shutil
import sqlite3
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from fieldbook.book.lock import RecorderLock
from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.errors import BookError, UsageError
from fieldbook.occupy.reductions import reduce_book
from fieldbook.occupy.rescuing import rescue
from fieldbook.occupy.verifying import verify_stored

CLOCK = SystemClock()


@pytest.fixture
def benchmark(monkeypatch: pytest.MonkeyPatch) -> Any:
    """The benchmark, whose damages and judge are used here in small numbers."""
    monkeypatch.syspath_prepend(str(Path(__file__).parents[1] / "benchmarks"))
    return importlib.import_module("faults_rescue")


@pytest.fixture
def book(tmp_path: Path, sample_books: dict[str, Path]) -> Path:
    """A copy of the first sample book: two ended occupations of one mark."""
    return Path(shutil.copy(sample_books["kestrel-ridge"], tmp_path / "old.book"))


def alter(path: Path, statement: str, values: tuple[Any, ...] = ()) -> int:
    """Change a book behind its triggers; the number of rows."""
    connection = sqlite3.connect(path, isolation_level=None)
    try:
        texts = [row[0] for row in connection.execute("SELECT sql FROM sqlite_master WHERE type = 'trigger'")]
        for (name,) in connection.execute("SELECT name FROM sqlite_master WHERE type = 'trigger'").fetchall():
            connection.execute(f"DROP TRIGGER {name}")
        changed = connection.execute(statement, values).rowcount
        for text in texts:
            connection.execute(text)
        return changed
    finally:
        connection.close()


def numbers_of(path: Path, occupation: int) -> dict[str, Any]:
    """Everything a reduction says of an occupation, but for its findings."""
    with Book.open(path, clock=CLOCK) as opened:
        made = [item for item in reduce_book(opened)[0] if item.reduction.occupation == occupation]
    tree = made[0].reduction.to_json()
    return {key: value for key, value in tree.items() if key not in ("findings", "leave")}


def wrong(path: Path) -> list[str]:
    """What `verify` finds."""
    return [f"{item.where}: {item.text}" for item in verify_stored(path) if not item.holds]


def destroy_head(path: Path) -> None:
    """The first page gone: SQLite refuses the file."""
    data = bytearray(path.read_bytes())
    data[:1024] = bytes(1024)
    path.write_bytes(data)


def test_a_sound_book_becomes_a_complete_copy(book: Path, tmp_path: Path) -> None:
    report = rescue(book, tmp_path / "new.book", CLOCK)
    assert (report.outcome, report.problems, report.end_known) == ("copy", [], True)
    assert report.old_id == report.new_id
    with Book.open(book, clock=CLOCK) as old, Book.open(tmp_path / "new.book", clock=CLOCK) as new:
        assert old.entries() == new.entries()
        assert old.received_digest(2) == new.received_digest(2)
    assert wrong(tmp_path / "new.book") == []


def test_wrong_epochs_are_decoded_again_and_nothing_else_changes(book: Path, tmp_path: Path) -> None:
    assert alter(book, "UPDATE epoch_pack SET data = zeroblob(length(data)) WHERE occupation = 1")
    report = rescue(book, tmp_path / "new.book", CLOCK)
    assert report.outcome == "repaired"
    assert report.old_id == report.new_id
    assert wrong(tmp_path / "new.book") == []


def test_without_its_head_everything_comes_out_and_reduces_to_the_same_last_bit(book: Path, tmp_path: Path) -> None:
    before = [numbers_of(book, number) for number in (1, 2)]
    destroy_head(book)
    report = rescue(book, tmp_path / "new.book", CLOCK)
    assert report.outcome == "rescued"
    assert report.old_id is not None
    assert report.new_id != report.old_id
    assert [item.whole for item in report.occupations] == [True, True]
    assert [numbers_of(tmp_path / "new.book", number) for number in (1, 2)] == before
    assert wrong(tmp_path / "new.book") == []
    said = next(item.text for item in verify_stored(tmp_path / "new.book") if item.where == "rescued")
    assert report.old_id in said
    assert report.old_sha256 in said
    assert "may be missing" in said


@pytest.mark.parametrize("seed", range(9))
def test_any_damage_gives_a_true_report_and_a_sound_book(seed: int, benchmark: Any, made: Any, tmp_path: Path) -> None:
    sounds = made(benchmark)
    kinds = [*benchmark.DAMAGES, "-wal missing"]
    sound = sounds[seed % 3]
    kind = kinds[seed % (6 if sound.wal else 5)]
    judged = benchmark.judge(sound, tmp_path, kind, seed)
    assert judged.wrong == []
    assert judged.again >= 0.98 * judged.survives


@pytest.fixture(scope="session")
def made(tmp_path_factory: pytest.TempPathFactory) -> Callable[[Any], Any]:
    """The three sound books of the benchmark, made once."""
    known: list[Any] = []

    def get(benchmark: Any) -> Any:
        if not known:
            known.extend(benchmark.sound_books(tmp_path_factory.mktemp("sound")))
        return known

    return get


def test_a_lost_entry_is_named_and_stops_what_it_may_bear_on(book: Path, tmp_path: Path) -> None:
    with Book.open(book, clock=CLOCK, write=True) as old:
        old.append(
            "height", {"occupation": 1, "method": "vertical", "value": "1.4946", "unit": "m", "when": "after"}, "A"
        )
        old.append("remark", {"occupation": 1, "text": "wind"}, "A")
        lost = old.state().head_seq - 1
        kept = old.entries()
    assert alter(book, "DELETE FROM entry WHERE seq = ?", (lost,)) == 1
    report = rescue(book, tmp_path / "new.book", CLOCK)
    assert report.entries_lost == [[lost, lost]]
    assert {item.severity for item in report.occupations} == {"stop"}
    with Book.open(tmp_path / "new.book", clock=CLOCK) as new:
        entries = new.entries()
        assert entries[lost - 1].kind == "withdrawn"
        assert entries[lost - 1].body == {"reason": "lost", "original": None}
        for entry in kept[1:]:
            if entry.seq != lost:
                twin = entries[entry.seq - 1]
                assert (twin.utc, twin.kind, twin.body, twin.observer) == (
                    entry.utc,
                    entry.kind,
                    entry.body,
                    entry.observer,
                )
        findings = [item.body for item in new.state().occupations[1].findings if item.body["code"] == "rescued"]
        assert str(lost) in findings[0]["text"]
    assert wrong(tmp_path / "new.book") == []


def test_one_flipped_bit_in_an_entry_is_put_right_and_said(book: Path, tmp_path: Path) -> None:
    with Book.open(book, clock=CLOCK, write=True) as old:
        seq = old.append("remark", {"occupation": 1, "text": "gusts of wind"}, "R. Kell").seq
        old.append("remark", {"occupation": 1, "text": "calm"}, "R. Kell")
    assert alter(book, "UPDATE entry SET body = replace(body, 'wind', 'wine') WHERE seq = ?", (seq,)) == 1
    report = rescue(book, tmp_path / "new.book", CLOCK)
    assert (report.entries_mended, report.entries_damaged) == ([seq], [])
    with Book.open(tmp_path / "new.book", clock=CLOCK) as new:
        assert new.entries()[seq - 1].body["text"] == "gusts of wind"
    assert wrong(tmp_path / "new.book") == []


def test_an_entry_changed_by_more_than_a_bit_is_kept_as_damaged(book: Path, tmp_path: Path) -> None:
    with Book.open(book, clock=CLOCK, write=True) as old:
        seq = old.append("remark", {"occupation": 1, "text": "gusts of wind"}, "R. Kell").seq
        old.append("remark", {"occupation": 1, "text": "calm"}, "R. Kell")
    assert alter(book, "UPDATE entry SET body = replace(body, 'wind', 'rain') WHERE seq = ?", (seq,)) == 1
    report = rescue(book, tmp_path / "new.book", CLOCK)
    assert (report.entries_mended, report.entries_damaged) == ([], [[seq, seq]])
    with Book.open(tmp_path / "new.book", clock=CLOCK) as new:
        placeholder = new.entries()[seq - 1]
        assert placeholder.kind == "withdrawn"
        assert "gusts of rain" in placeholder.body["original"]["body"]
    assert wrong(tmp_path / "new.book") == []


def test_an_occupation_without_a_beginning_becomes_a_file(book: Path, tmp_path: Path) -> None:
    with Book.open(book, clock=CLOCK) as old:
        seq = next(entry.seq for entry in old.entries() if entry.kind == "occupation")
        truth = b"".join(old.received(1))
    assert alter(book, "DELETE FROM entry WHERE seq = ?", (seq,)) == 1
    report = rescue(book, tmp_path / "new.book", CLOCK)
    first = report.occupations[0]
    assert first.mark is None
    assert first.file is not None
    assert Path(first.file).read_bytes() == truth
    assert wrong(tmp_path / "new.book") == []


def test_certificates_of_the_old_book_do_not_stand(
    book: Path, tmp_path: Path, run_fieldbook: Callable[..., tuple[int, str, str]]
) -> None:
    paper = tmp_path / "paper.json"
    code, _, _ = run_fieldbook(
        "certify", book, "KR-07", "--occupation", 1, "--out", paper, "--sign-off", "A. B.; licence 1"
    )
    assert code == 0
    destroy_head(book)
    code, out, _ = run_fieldbook("rescue", book, "--out", tmp_path / "new.book", "--json")
    assert code == 0
    report = json.loads(out)
    assert report["schema"] == "fieldbook.rescue/1"
    assert len(report["certificates"]) == 1
    with Book.open(tmp_path / "new.book", clock=CLOCK) as new:
        assert new.state().documents == []
    code, out, _ = run_fieldbook("verify", paper, tmp_path / "new.book")
    assert code == 1
    assert "It does not stand here" in out


def test_signatures_over_the_old_chain_are_withdrawn_with_it(
    book: Path,
    tmp_path: Path,
    run_fieldbook: Callable[..., tuple[int, str, str]],
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))
    assert run_fieldbook("key", "new", "--name", "R. Kell", "--no-passphrase")[0] == 0
    assert run_fieldbook("entry", book, "remark", "--set", "text=dry", "--by", "R. Kell")[0] == 0
    with Book.open(book, clock=CLOCK) as old:
        signed = [entry.seq for entry in old.entries() if entry.kind in ("key", "signature")]
    assert signed
    destroy_head(book)
    assert run_fieldbook("rescue", book, "--out", tmp_path / "new.book")[0] == 0
    with Book.open(tmp_path / "new.book", clock=CLOCK) as new:
        kinds = {entry.seq: entry for entry in new.entries()}
    assert all(kinds[seq].kind == "withdrawn" and kinds[seq].body["original"] for seq in signed)
    code, out, _ = run_fieldbook("verify", tmp_path / "new.book")
    assert code == 0
    assert "where they are carried, are those signed by the key that calls itself R. Kell" in out
    assert "unsigned: no signature stands over any of" in out


def test_a_damaged_wal_is_not_called_sound(benchmark: Any, made: Any, tmp_path: Path) -> None:
    """SQLite reads such a book without a word, and leaves out every commit behind the damage."""
    sound = made(benchmark)[2]
    wal = bytearray(sound.wal)
    wal[5000] ^= 1
    (tmp_path / "old.book").write_bytes(sound.data)
    (tmp_path / "old.book-wal").write_bytes(wal)
    report = rescue(tmp_path / "old.book", tmp_path / "new.book", CLOCK)
    assert report.outcome == "rescued"
    assert any("commits stand behind" in text for text in report.problems)
    with Book.open(tmp_path / "new.book", clock=CLOCK) as new:
        assert b"".join(new.received(1)) == sound.truth[1]
        assert new.state().occupations[1].open


def test_what_a_rescued_book_claims_is_checked(book: Path, tmp_path: Path) -> None:
    destroy_head(book)
    rescue(book, tmp_path / "new.book", CLOCK)
    path = tmp_path / "new.book"
    from fieldbook.book import chain, connect
    from fieldbook.book.salvage.plan import run_problems

    with Book.open(path, clock=CLOCK) as new:
        body = json.loads(json.dumps(next(entry.body for entry in new.entries() if entry.kind == "rescued")))
    body["carried"][0]["hash"] = "0" * 64
    assert list(run_problems(body, {}))
    connection = connect.open_writer(path)
    connection.execute("BEGIN IMMEDIATE")
    chain.insert_entry(connection, "rescued", body, "a forger", "2027-03-04T01:10:00.000Z")
    connection.execute("COMMIT")
    connection.close()
    assert any("do not give the hash that is stated" in text for text in wrong(path))


def test_refusals(book: Path, tmp_path: Path, run_fieldbook: Callable[..., tuple[int, str, str]]) -> None:
    with pytest.raises(UsageError, match="exists already"):
        rescue(book, book, CLOCK)
    (tmp_path / "paper.pdf").write_bytes(b"%PDF-1.7 no book at all" * 100)
    assert run_fieldbook("rescue", tmp_path / "paper.pdf", "--out", tmp_path / "new.book")[0] == 4
    assert run_fieldbook("rescue", tmp_path / "none.book", "--out", tmp_path / "new.book")[0] == 2
    lock = RecorderLock(book)
    lock.acquire()
    try:
        with pytest.raises(BookError, match="recorder is recording"):
            rescue(book, tmp_path / "new.book", CLOCK)
    finally:
        lock.release()
    assert sorted(path.name for path in tmp_path.iterdir() if "part" in path.name or path.name == "new.book") == []


def test_the_old_book_is_only_read(book: Path, tmp_path: Path) -> None:
    destroy_head(book)
    before = book.read_bytes(), sorted(path.name for path in tmp_path.iterdir())
    rescue(book, tmp_path / "new.book", CLOCK)
    assert book.read_bytes() == before[0]
    assert sorted(path.name for path in tmp_path.iterdir()) == sorted([*before[1], "new.book"])


pytestmark = pytest.mark.skipif(sys.platform == "win32", reason="not run: the benchmark's pseudo-terminals are missing")
