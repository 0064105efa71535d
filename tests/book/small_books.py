"""Small invented books for the tests of the book: one ended occupation with packs, one open with a tail."""

from __future__ import annotations

import hashlib
import sqlite3
from pathlib import Path
from typing import Any

from fieldbook.book.store import Book
from fieldbook.clock import FakeClock
from fieldbook.model.epoch import Epoch
from fieldbook.model.item import Item, ItemKind
from fieldbook.model.recorder import RecorderState
from fieldbook.settings.session import load_session

SAMPLE = Path(__file__).parents[1] / "settings" / "contract_sample.toml"
START_MS = 1_804_122_600_000  # 2027-03-04T01:10:00Z


def tree() -> dict[str, Any]:
    """The session tree of contract section 2's sample."""
    return load_session(SAMPLE).tree


def clock() -> FakeClock:
    """A clock in March 2027."""
    return FakeClock(1000, START_MS)


def occupation_body(number: int = 1, mark: str = "KR-07") -> dict[str, Any]:
    """The body of an `occupation` entry."""
    return {
        "occupation": number,
        "mark": mark,
        "session": tree(),
        "link": "file:receiver.nmea",
        "simulated": False,
    }


def begun(path: Path) -> Book:
    """A new book with occupation 1 begun, open for writing."""
    book = Book.create(path, clock=clock(), observer="R. Kell", session_tree=tree())
    book.append("occupation", occupation_body(), "R. Kell")
    return book


def line(number: int) -> bytes:
    """A line of invented receiver text."""
    body = f"GNGGA,01{number // 60 % 60:02d}{number % 60:02d}.00,3715.{number * 7919 % 9999999:07d},S"
    return f"${body}*00\r\n".encode()


def item(number: int) -> Item:
    """A received burst with times."""
    return Item(ItemKind.BYTES, line(number), 1000 * number, START_MS + 1000 * number)


def epoch(number: int) -> Epoch:
    """An epoch of an RTK receiver, sometimes set aside."""
    return Epoch(
        number=number,
        source="GGA",
        talker="GN",
        day=0,
        time_ms=4_200_000 + 1000 * number,
        code="dop" if number % 7 == 0 else None,
        latitude_e8min=-223_612_345_678 + number * 37 % 991,
        longitude_e8min=866_412_345_678 + number * 53 % 997,
        latitude_decimals=7,
        longitude_decimals=7,
        altitude_e5m=12_345_600 + number % 900,
        altitude_decimals=3,
        separation_e5m=-312_300,
        separation_decimals=3,
        quality=4,
        satellites=17,
        hdop_milli=620,
        age_ms=1000,
        station="0042",
        sigma_latitude_e5m=800,
        received_monotonic_ms=1000 * number,
        received_utc_ms=START_MS + 1000 * number,
    )


def record(book: Book, occupation: int, first: int, last: int, *, seal_every: int = 20) -> None:
    """Record bursts and epochs `first` to `last`, sealing as a recorder does."""
    for number in range(first, last + 1):
        book.write_burst(occupation, [item(number)], [epoch(number)], RecorderState(occupation, epochs=number))
        if number % seal_every == 0:
            book.seal(occupation)


def end(book: Book, occupation: int, epochs: int) -> None:
    """Seal, end and pack an occupation."""
    book.seal(occupation)
    size, sha256 = book.received_digest(occupation)
    body = {
        "occupation": occupation,
        "by": "end of file",
        "epochs": epochs,
        "received_bytes": size,
        "received_sha256": sha256,
    }
    book.append("end", body, "R. Kell")


def ended(path: Path, *, pack: bool = True) -> Path:
    """A closed book whose occupations 1 (packed) and 2 (chunks only) have ended."""
    with begun(path) as book:
        book.append("recorder", {"occupation": 1, "state": "running", "program": "0"}, "R. Kell")
        book.write_burst(1, [Item(ItemKind.OPENED, b"file:receiver.nmea")])
        record(book, 1, 1, 50)
        book.append("recorder", {"occupation": 1, "state": "closed", "program": "0"}, "R. Kell")
        end(book, 1, 50)
        if pack:
            book.pack(1)
        book.append("occupation", occupation_body(2), "R. Kell")
        record(book, 2, 1, 25)
        end(book, 2, 25)
    return path


def names(folder: Path) -> list[str]:
    """What lies in a folder."""
    return sorted(path.name for path in folder.iterdir())


def received(first: int, last: int) -> tuple[int, str]:
    """Size and SHA-256 of what `record` wrote, computed without the book."""
    data = b"".join(line(number) for number in range(first, last + 1))
    return len(data), hashlib.sha256(data).hexdigest()


def tamper(path: Path, statement: str, values: tuple[Any, ...] = ()) -> None:
    """Change values as a forger would: triggers dropped, value changed, triggers restored letter by letter."""
    connection = sqlite3.connect(path, isolation_level=None)
    try:
        triggers = connection.execute("SELECT name, sql FROM sqlite_master WHERE type = 'trigger'").fetchall()
        for name, _ in triggers:
            connection.execute(f"DROP TRIGGER {name}")
        connection.execute("PRAGMA foreign_keys = OFF")
        changed = connection.execute(statement, values).rowcount
        for _, text in triggers:
            connection.execute(text)
    finally:
        connection.close()
    assert changed == 1, f"{statement} changed {changed} rows"
