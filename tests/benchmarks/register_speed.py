"""The register: what the thousandth book costs against the first, and ten times the occupations against ten times the time.

Goals: adding 1,000 books of 10 occupations, the last hundred at most 1.2 x the first hundred; combining 10,000 occupations of
2,000 marks in at most 11 x the time of 1,000 of 200. Books of the first row are invented ones (the register's own work: evidence
kept, entry chained, state folded); the second row adds real, verified books, to an empty register and to the one of a thousand.
Processor time. `python tests/benchmarks/register_speed.py [--short]`.
"""

from __future__ import annotations

import shutil
import sqlite3
import statistics
import sys
import tempfile
import time
import uuid
from pathlib import Path

ROOT = Path(__file__).parents[2]
sys.path[:0] = [str(ROOT), str(ROOT / "tests")]

from attack.forger import change, forging, reseal  # noqa: E402
from recorded_samples import SAMPLES, record_into  # noqa: E402
from register import made  # noqa: E402

from fieldbook.clock import SystemClock  # noqa: E402
from fieldbook.commands.verify import book_findings  # noqa: E402
from fieldbook.register import decisions  # noqa: E402
from fieldbook.register.adding import add_book  # noqa: E402
from fieldbook.register.combining import combine_register  # noqa: E402
from fieldbook.register.evidence import Evidence  # noqa: E402
from fieldbook.register.from_book import read_book  # noqa: E402
from fieldbook.register.store import Register  # noqa: E402
from fieldbook.signing.keyring import Trust, trust  # noqa: E402

SHORT = "--short" in sys.argv
BOOKS, HUNDRED = (200, 20) if SHORT else (1000, 100)
REAL = 3 if SHORT else 10


def sample_book(folder: Path) -> Path:
    """A real book: the first two minutes of a sample."""
    (folder / "session").mkdir()
    shutil.copy(SAMPLES / "kestrel-ridge-1" / "session.toml", folder / "session")
    lines = (SAMPLES / "kestrel-ridge-1" / "receiver.nmea").read_bytes().splitlines(keepends=True)
    (folder / "session" / "receiver.nmea").write_bytes(b"".join(lines[:1000]))
    record_into(folder / "real.book", folder / "session" / "session.toml")
    return folder / "real.book"


def another(book: Path, number: int) -> Path:
    """The same book under an id of its own, its chain made anew: as good a book as any."""
    copy = Path(shutil.copy(book, book.with_name(f"real-{number}.book")))
    with forging(copy) as connection:
        assert isinstance(connection, sqlite3.Connection)
        change(connection, 1, lambda body: body.update(id=str(uuid.UUID(int=(0xF000 + number) << 96, version=4))))
        reseal(connection)
    return copy


def fill(register: Register, base: Evidence, books: int) -> list[float]:
    """Add invented books of ten occupations on a grid of marks, five visits each; seconds each."""
    seconds, marks = [], books * 2
    for number in range(books):
        numbers = [(number * 10 + k) % marks for k in range(10)]
        items = [
            made.occupied(
                base, k + 1, mark=f"M{n}", enu_m=(200.0 * (n % 50) + 0.001 * (number % 7), 200.0 * (n // 50), 0.0),
                hours=30.0 * number + k,
            )
            for k, n in enumerate(numbers)
        ]  # fmt: skip
        begun = time.process_time()
        made.add(register, number, items)
        register.state()
        seconds.append(time.process_time() - begun)
    return seconds


def adding(folder: Path, base: Evidence, book: Path) -> None:
    """Rows one and two. Medians, and the real books turn about, so that a neighbour on the machine does not decide."""
    known = trust()
    real = [another(book, number) for number in range(2 * REAL)]
    with made.new_register(folder / "empty.register") as empty, made.new_register(folder / "full.register") as full:
        seconds = fill(full, base, BOOKS)
        first, last = statistics.median(seconds[:HUNDRED]), statistics.median(seconds[-HUNDRED:])
        print(
            f"last {HUNDRED} of {BOOKS} invented books against the first: {last / first:.2f} (goal 1.2); "
            f"{1000 * last:.1f} ms each"
        )
        pairs = [
            (added_s(empty, one, known), added_s(full, two, known))
            for one, two in zip(real[::2], real[1::2], strict=True)
        ]
        in_empty, in_full = (statistics.median(costs) for costs in zip(*pairs, strict=True))
    print(
        f"a real book of two minutes into a register of {BOOKS} against an empty one: {in_full / in_empty:.2f} (goal 1.2); "
        f"{in_full:.2f} s each"
    )
    print(f"register file: {(folder / 'full.register').stat().st_size / BOOKS / 10:.0f} bytes an occupation")


def added_s(register: Register, path: Path, known: Trust) -> float:
    """Seconds to verify, reduce and add a real book."""
    begun = time.process_time()
    outcome = add_book(register, path, by="bench", clock=SystemClock(), verify=lambda one: book_findings(one, known))
    assert outcome.outcome == "added", outcome
    return time.process_time() - begun


def combining(folder: Path, base: Evidence) -> None:
    """Row three."""
    seconds = []
    for books in (BOOKS // 10, BOOKS):
        with made.new_register(folder / f"combine-{books}.register") as register:
            fill(register, base, books)
            decisions.decide_rule(register, 0.05, by="bench", reason="bench")
            values, tries = combine_register(register), []
            for _ in range(3):
                begun = time.process_time()
                values = combine_register(register)
                tries.append(time.process_time() - begun)
            seconds.append(statistics.median(tries))
            count = sum(len(value.members) for value in values)
            print(f"combining {count} occupations of {len(values)} marks: {seconds[-1]:.1f} s")
    print(f"ten times the occupations: {seconds[1] / seconds[0]:.1f} x the time (goal 11)")


def main() -> None:
    """All rows."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        book = sample_book(folder)
        base = read_book(book, SystemClock()).occupations[0][0]
        adding(folder, base, book)
        combining(folder, base)


if __name__ == "__main__":
    main()
