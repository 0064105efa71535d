"""Changing any one value of an ended book, or of its certificate, makes `verify` exit 1 and name what changed.

Every column of every table but `recorder_state` is changed in its first and last row by a plain SQLite connection, with
the append-only triggers taken off and put back, so that only the value differs.
"""

from __future__ import annotations

import shutil
import sqlite3
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest
from recorded_samples import record_into

SIGN_OFF = "A. Marlow; licence 4411"


@pytest.fixture(scope="module")
def certified(short_session: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """An ended book of two minutes with the certificate of its mark in three formats."""
    from fieldbook.book.store import Book
    from fieldbook.clock import SystemClock
    from fieldbook.issuing import issue

    folder = tmp_path_factory.mktemp("certified")
    path = folder / "short.book"
    record_into(path, short_session)
    with Book.open(path, clock=SystemClock(), write=True) as book:
        for ending in ("json", "html", "pdf"):
            issue(book, "KR-07", folder / f"KR-07.{ending}", occupation=1, sign_off=SIGN_OFF)
    return path


@pytest.fixture(scope="module")
def unpacked(short_session: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """An ended book whose recorder stopped before packing, as an older version left every book: chunks and epoch rows."""
    from fieldbook.book.store import Book

    path = tmp_path_factory.mktemp("unpacked") / "short.book"
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(Book, "pack", lambda _, __: 0)
        record_into(path, short_session)
    return path


def cells(path: Path) -> Iterator[tuple[str, str, int]]:
    """(table, column, row offset) of every column in the first and last row of every table."""
    with sqlite3.connect(path) as connection:
        tables = [name for (name,) in connection.execute("SELECT name FROM sqlite_master WHERE type = 'table'")]
        for table in sorted(tables):
            if table == "recorder_state":
                continue
            count = connection.execute(f'SELECT count(*) FROM "{table}"').fetchone()[0]
            for column in [row[1] for row in connection.execute(f'PRAGMA table_info("{table}")')]:
                for offset in sorted({0, count - 1}) if count else []:
                    yield table, column, offset
    connection.close()


def changed(value: Any) -> Any:
    """Another value of the same type."""
    if isinstance(value, bytes):
        return bytes([value[0] ^ 1]) + value[1:] if value else b"\x00"
    if isinstance(value, str):
        return ("X" if value[:1] != "X" else "Y") + value[1:]
    if isinstance(value, int):
        return value + 1
    return 1 if value is None else value + 1.0


def tamper(path: Path, table: str, column: str, offset: int) -> bool:
    """Change one cell; False where the schema itself refuses the value (then nothing was changed)."""
    connection = sqlite3.connect(path, isolation_level=None)
    try:
        triggers = connection.execute("SELECT name, sql FROM sqlite_master WHERE type = 'trigger'").fetchall()
        connection.execute("PRAGMA foreign_keys=OFF")
        for name, _ in triggers:
            connection.execute(f'DROP TRIGGER "{name}"')
        keys = [row[1] for row in connection.execute(f'PRAGMA table_info("{table}")') if row[5]]
        where = " AND ".join(f'"{key}" = ?' for key in keys) if keys else "rowid = ?"
        chosen = ", ".join(f'"{key}"' for key in keys) if keys else "rowid"
        row = connection.execute(f'SELECT "{column}", {chosen} FROM "{table}" LIMIT 1 OFFSET {offset}').fetchone()
        try:
            connection.execute(f'UPDATE "{table}" SET "{column}" = ? WHERE {where}', (changed(row[0]), *row[1:]))
            done = True
        except sqlite3.IntegrityError:
            done = False
        for _, sql in triggers:
            connection.execute(sql)
        return done
    finally:
        connection.close()


def test_an_untouched_book_holds(certified: Path, run_fieldbook: Callable[..., tuple[int, str, str]]) -> None:
    papers = [certified.with_name(f"KR-07.{ending}") for ending in ("json", "html", "pdf")]
    code, out, _ = run_fieldbook("verify", certified, *papers)
    assert code == 0, out
    assert "an independent reader finds the same" in out


def missed_changes(
    book: Path, copy: Path, run_fieldbook: Callable[..., tuple[int, str, str]], tables: tuple[str, ...] = ()
) -> tuple[int, list[tuple[str, str, int, int]]]:
    """How many values were changed, and those that `verify` did not find; of some tables, or of all."""
    missed, tried = [], 0
    for table, column, offset in cells(book):
        if tables and table not in tables:
            continue
        shutil.copy(book, copy)
        if not tamper(copy, table, column, offset):
            continue
        tried += 1
        code, out, _ = run_fieldbook("verify", copy)
        named = any(line.strip().startswith("NOT") for line in out.splitlines())
        if code != 1 or not named:
            missed.append((table, column, offset, code))
    print(f"{tried} values changed, {len(missed)} missed")
    return tried, missed


def test_any_changed_value_is_found(
    certified: Path, tmp_path: Path, run_fieldbook: Callable[..., tuple[int, str, str]]
) -> None:
    tables = {table for table, _, _ in cells(certified)}
    assert tables == {"_sqlite_migrations", "entry", "epoch_pack", "raw_pack"}
    tried, missed = missed_changes(certified, tmp_path / "copy.book", run_fieldbook)
    assert tried >= 30
    assert missed == []


def test_any_changed_value_of_what_is_not_packed_is_found(
    unpacked: Path, tmp_path: Path, run_fieldbook: Callable[..., tuple[int, str, str]]
) -> None:
    tables = ("epoch", "epoch_form", "raw_chunk")
    tried, missed = missed_changes(unpacked, tmp_path / "copy.book", run_fieldbook, tables)
    assert tried > 50
    assert missed == []


@pytest.mark.parametrize("ending", ["json", "html"])
def test_a_changed_digit_of_a_certificate_is_found(
    certified: Path, tmp_path: Path, ending: str, run_fieldbook: Callable[..., tuple[int, str, str]]
) -> None:
    text = certified.with_name(f"KR-07.{ending}").read_text(encoding="utf-8")
    place = text.index("231.") + 4
    forged = tmp_path / f"KR-07.{ending}"
    forged.write_text(text[:place] + str((int(text[place]) + 1) % 10) + text[place + 1 :], encoding="utf-8")
    code, out, _ = run_fieldbook("verify", certified, forged)
    assert code == 1
    assert "DOES NOT HOLD" in out


def test_a_changed_pdf_is_found(
    certified: Path, tmp_path: Path, run_fieldbook: Callable[..., tuple[int, str, str]]
) -> None:
    data = bytearray(certified.with_name("KR-07.pdf").read_bytes())
    data[len(data) // 2] ^= 1
    forged = tmp_path / "KR-07.pdf"
    forged.write_bytes(bytes(data))
    code, out, _ = run_fieldbook("verify", certified, forged)
    assert code == 1
    assert "NOT" in out


def test_a_struck_reading_after_the_certificate_is_told(
    certified: Path, tmp_path: Path, run_fieldbook: Callable[..., tuple[int, str, str]]
) -> None:
    copy = tmp_path / "later.book"
    shutil.copy(certified, copy)
    code, _, err = run_fieldbook(
        "entry", copy, "height", "--occupation", 1, "--set", "method=vertical", "--set", "value=1.5100",
        "--set", "unit=m", "--set", "when=after", "--by", "R. Kell",
    )  # fmt: skip
    assert code == 0, err
    code, out, _ = run_fieldbook("verify", copy)
    assert code == 1
    assert "reduced again, the book gives something else" in out
