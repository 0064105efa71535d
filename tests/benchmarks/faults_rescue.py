"""Damaged books, rescued: what of the received bytes survives on undamaged pages, and what of that comes out again.

`python tests/benchmarks/faults_rescue.py [--times 300]`. Three books are damaged at random: a file recorded at full speed,
a live occupation that has ended, a live one still open with its -wal. A piece of what was received (a row of the tail, a
chunk, a piece of a pack) survives if no damaged byte lies on a page it stands on; its pages are taken from the sound book.
Every claim of the report is counted again in the new book, and what is called proven is compared with what was received.
"""

from __future__ import annotations

import argparse
import collections
import json
import random
import sys
import tempfile
import threading
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from itertools import groupby
from pathlib import Path

from faults_rig import Row

from fieldbook.book import connect, lines, raw
from fieldbook.book.salvage import cells
from fieldbook.book.salvage.pages import Pages, page_size_of, pages_of
from fieldbook.book.store import Book
from fieldbook.clock import FakeClock, SystemClock
from fieldbook.errors import BookError
from fieldbook.links.address import parse_link
from fieldbook.links.sim_scenarios import SCENARIOS
from fieldbook.links.simulate import Receiver
from fieldbook.model.item import Item, ItemKind
from fieldbook.model.recorder import RecorderState
from fieldbook.model.rescue import RescueReport
from fieldbook.nmea.decoder import Decoder
from fieldbook.occupy.ending import end_directly
from fieldbook.occupy.foreground import Wish, observe
from fieldbook.occupy.rebuild import session_decoder_options
from fieldbook.occupy.rescuing import rescue
from fieldbook.occupy.verifying import verify_stored
from fieldbook.settings.session import load_session

ROOT = Path(__file__).resolve().parents[2]
SAMPLE = ROOT / "tests" / "settings" / "contract_sample.toml"
MOST_TORN = 8  # lines at holes in one occupation
START_MS = 1_804_122_600_000  # 2027-03-04T01:10:00Z


@dataclass(frozen=True)
class Unit:
    """A piece of what was received that is whole or lost: its bytes, the pages it stands on, whether a hash proves it."""

    occupation: int
    received: int
    pages: frozenset[int]
    hashed: bool


@dataclass
class Sound:
    """A book before it is damaged."""

    name: str
    data: bytes
    wal: bytes
    truth: dict[int, bytes] = field(default_factory=dict)
    epochs: dict[int, list[object]] = field(default_factory=dict)
    units: list[Unit] = field(default_factory=list)
    spots: dict[int, tuple[bool, int]] = field(default_factory=dict)  # page -> (in the -wal, offset)
    page_size: int = 1024


# -- the sound books


def live_book(path: Path, *, bursts: int = 700, end: bool) -> Book:
    """An occupation of the simulated receiver, written as a recorder writes it; the book is returned open."""
    session = load_session(SAMPLE)
    clock = FakeClock(1000, START_MS)
    book = Book.create(path, clock=clock, observer="R. Kell", session_tree=session.tree)
    body = {"occupation": 1, "mark": "KR-07", "session": session.tree, "link": "serial:///dev/ttyUSB0?baud=115200"}
    book.append("occupation", {**body, "simulated": False}, "R. Kell")
    book.append("recorder", {"occupation": 1, "state": "running", "program": "0"}, "R. Kell")
    decoder = Decoder(session_decoder_options(session, session.receiver.talker))
    receiver = Receiver(SCENARIOS["rtk"], seed=7, first_utc_ms=START_MS, rate_hz=1.0)
    heard = epochs = 0
    book.write_burst(1, [Item(ItemKind.OPENED, b"serial:///dev/ttyUSB0?baud=115200", 1000, START_MS)])
    for number in range(1, bursts + 1):
        clock.advance(1000)
        item = Item(ItemKind.BYTES, receiver.next_burst().data, clock.monotonic_ms(), clock.utc_ms())
        closed = decoder.feed(item)
        heard, epochs = heard + len(item.data), epochs + len(closed)
        state = RecorderState(1, received_bytes=heard, epochs=epochs, last_commit_utc_ms=clock.utc_ms())
        book.write_burst(1, [item], closed, state)
        if number % 60 == 0:
            book.seal(1)
        if number % 200 == 0:
            body = {"occupation": 1, "method": "vertical", "value": f"1.49{number // 100}", "unit": "m"}
            book.append("height", {**body, "when": "during"}, "R. Kell")
    if end:
        book.append("recorder", {"occupation": 1, "state": "closed", "program": "0"}, "R. Kell")
        end_directly(book, 1, clock)
    return book


def sound_books(folder: Path) -> list[Sound]:
    """The three books, with where everything stands."""
    filed = folder / "file.book"
    for name in ("kestrel-ridge-1", "kestrel-ridge-2"):
        session = load_session(ROOT / "sample_sessions" / name / "session.toml")
        address = parse_link(session.receiver.link, ROOT / "sample_sessions" / name)
        observe(filed, Wish(session, address), SystemClock(), threading.Event())
    ended = folder / "ended.book"
    live_book(ended, end=True).close()
    opened = folder / "open.book"
    writer = live_book(opened, end=False)
    made = [_sound("file, ended", filed), _sound("live, ended", ended), _sound("live, open, with -wal", opened)]
    writer.close()
    return made


def _sound(name: str, path: Path) -> Sound:
    wal = Path(f"{path}-wal")
    made = Sound(name, path.read_bytes(), wal.read_bytes() if wal.exists() else b"")
    with Book.open(path, clock=SystemClock()) as book:
        for number in book.state().occupations:
            made.truth[number] = b"".join(book.received(number))
            made.epochs[number] = list(book.epochs(number))
    made.page_size = page_size_of(made.data, made.wal)
    pages = pages_of(made.data, made.wal, made.page_size)
    made.spots = dict(_spots(made, pages))
    made.units = list(_units(path, pages))
    return made


def _spots(sound: Sound, pages: Pages) -> Iterator[tuple[int, tuple[bool, int]]]:
    size = pages.size
    for number in range(1, pages.count + 1):
        if number not in pages.overlay:
            yield number, (False, (number - 1) * size)
    for start in range(32, len(sound.wal) - size - 23, size + 24):
        number = int.from_bytes(sound.wal[start : start + 4], "big")
        if sound.wal[start + 24 : start + 24 + size] == pages.overlay.get(number):
            yield number, (True, start + 24)


def _units(path: Path, pages: Pages) -> Iterator[Unit]:
    """Every piece of what was received, with the pages it stands on."""
    connection = connect.open_reader(path)
    try:
        where = _where(pages)
        for occupation, ident, data in connection.execute("SELECT occupation, id, data FROM raw_tail WHERE kind = 'B'"):
            yield Unit(occupation, len(data), frozenset(where["nit", ident][0]), hashed=False)
        for row in connection.execute("SELECT rowid, occupation, bytes, data FROM raw_chunk").fetchall():
            plain = raw.inflate_chunk(row[3], row[2])
            yield Unit(row[1], _received(plain), frozenset(where["iii", row[0]][0]), hashed=True)
        for row in connection.execute(
            "SELECT rowid, occupation, first_chunk, last_chunk, data FROM raw_pack"
        ).fetchall():
            yield from _pack_units(connection, row, *where["pack", row[0]], pages.size)
    finally:
        connection.close()


def _where(pages: Pages) -> dict[tuple[str, int], tuple[list[int], int]]:
    """(table, rowid) -> the pages of a row in the order of its bytes, and how many bytes stand in the leaf."""
    chains = cells.Chains(pages)
    found: dict[tuple[str, int], tuple[list[int], int]] = {}
    for row in cells.rows(pages, chains):
        if not row.newest or row.loose:
            continue
        image = pages.newest(row.page)
        for place in cells.cell_places(image, 0) or []:
            size, after = cells.varint(image, place)
            rowid, after = cells.varint(image, after)
            local = cells._local_bytes(size, pages.size)
            if rowid == row.rowid and after + local <= len(image):
                chain = []
                if local < size:
                    first = int.from_bytes(image[after + local : after + local + 4], "big")
                    chain = chains._trail(first, pages.count)
                kind = "pack" if row.kinds == cells.PACK else row.kinds[:3]
                head = size - len(row.values[-1]) if isinstance(row.values[-1], bytes) else 0
                found.setdefault((kind, rowid), ([row.page, *chain], local - head))
    return found


def _pack_units(
    connection: connect.BookConnection, row: tuple[int, int, int, int, bytes], stood: list[int], local: int, size: int
) -> Iterator[Unit]:
    occupation, first, last, data = row[1:]
    stated = [
        raw.Sealed.from_body(json.loads(body))
        for (body,) in connection.execute("SELECT body FROM entry WHERE kind = 'raw' ORDER BY seq")
    ]
    chunks = [sealed for sealed in stated if sealed.occupation == occupation and first <= sealed.chunk <= last]
    spans, place = [], 0
    heads = [(start, makes) for start, makes in lines.heads(data, ())]
    for number, (start, makes) in enumerate(heads):
        stop = heads[number + 1][0] if number + 1 < len(heads) else len(data)
        spans.append((place, place + makes, start, stop))
        place += makes
    position = 0
    for sealed, plain in raw.split_pack("lines", data, chunks):
        pages = {stood[0]}
        for begin, end, start, stop in spans:
            if begin < position + sealed.bytes and position < end:
                for byte in (*range(start, stop, size - 4), stop - 1):
                    pages.add(stood[0] if byte < local else stood[1 + (byte - local) // (size - 4)])
        position += sealed.bytes
        yield Unit(occupation, _received(plain), frozenset(pages), hashed=True)


def _received(plain: bytes) -> int:
    return sum(len(item.data) for item in raw.parse_items(plain) if item.kind is ItemKind.BYTES)


# -- damage


def _ranges_zeroed(data: bytearray, luck: random.Random) -> None:
    for _ in range(luck.randrange(1, 5)):
        start = luck.randrange(len(data))
        end = min(len(data), start + luck.randrange(1, 6000))
        data[start:end] = bytes(end - start)


def _cut_off(data: bytearray, luck: random.Random) -> None:
    del data[luck.randrange(len(data)) :]


def _pages_garbled(data: bytearray, luck: random.Random) -> None:
    for _ in range(luck.randrange(1, 4)):
        start = luck.randrange(len(data)) // 1024 * 1024
        data[start : start + 1024] = luck.randbytes(len(data[start : start + 1024]))


def _bits_flipped(data: bytearray, luck: random.Random) -> None:
    for _ in range(luck.randrange(1, 4)):
        data[luck.randrange(len(data))] ^= 1 << luck.randrange(8)


def _head_gone(data: bytearray, luck: random.Random) -> None:
    size = luck.choice([100, 1024, 4096])
    data[:size] = luck.randbytes(size) if luck.random() < 0.5 else bytes(size)


DAMAGES: dict[str, Callable[[bytearray, random.Random], None]] = {
    "ranges zeroed": _ranges_zeroed,
    "file cut off": _cut_off,
    "pages garbled": _pages_garbled,
    "bits flipped": _bits_flipped,
    "head destroyed": _head_gone,
}


def damaged(sound: Sound, kind: str, luck: random.Random) -> tuple[bytes, bytes]:
    """File and -wal after one damage; with a -wal it is hit as often as its share of the bytes says."""
    data, wal = bytearray(sound.data), bytearray(sound.wal)
    if kind == "-wal missing":
        return bytes(data), b""
    in_wal = bool(wal) and kind != "head destroyed" and luck.random() < len(wal) / (len(wal) + len(data))
    DAMAGES[kind](wal if in_wal else data, luck)
    return bytes(data), bytes(wal)


def surviving(sound: Sound, data: bytes, wal: bytes) -> list[Unit]:
    """Pieces none of whose pages has a changed byte."""
    good = set()
    for number, (in_wal, start) in sound.spots.items():
        before, now = (sound.wal, wal) if in_wal else (sound.data, data)
        if before[start : start + sound.page_size] == now[start : start + sound.page_size]:
            good.add(number)
    return [unit for unit in sound.units if unit.pages <= good]


# -- one rescue, judged


@dataclass
class Judged:
    """What came of one rescue."""

    kind: str
    outcome: str
    survives: int = 0  # received bytes on undamaged pages
    again: int = 0  # of those, salvaged
    hashed: int = 0  # bytes on undamaged pages that have a hash
    proven: int = 0  # of those, salvaged and proven
    salvaged: int = 0
    received: int = 0
    seconds: float = 0.0
    wrong: list[str] = field(default_factory=list)


def judge(sound: Sound, folder: Path, kind: str, seed: int) -> Judged:
    """Damage, rescue, and hold the report against the truth."""
    data, wal = damaged(sound, kind, random.Random(seed))
    path, new = folder / f"damaged{seed}.book", folder / f"new{seed}.book"
    path.write_bytes(data)
    if wal:
        Path(f"{path}-wal").write_bytes(wal)
    left = surviving(sound, data, wal)
    made = Judged(kind, "nothing", sum(unit.received for unit in left), received=sum(map(len, sound.truth.values())))
    began = time.monotonic()
    try:
        report = rescue(path, new, SystemClock())
    except BookError as error:
        made.wrong += [] if error.code == "nothing_salvageable" and not left else [f"{error.code}: {error.text}"]
        return made
    finally:
        made.seconds = time.monotonic() - began
        path.unlink()
    made.outcome = report.outcome
    if path.with_name(f"{path.name}-wal").exists():
        path.with_name(f"{path.name}-wal").unlink()
    _hold(sound, new, report, left, made)
    new.unlink()
    return made


def _hold(sound: Sound, new: Path, report: RescueReport, left: list[Unit], made: Judged) -> None:
    wrong = [item for item in verify_stored(new) if not item.holds]
    made.wrong += [f"{item.where}: {item.text}" for item in wrong[:3]]
    with Book.open(new, clock=SystemClock()) as book:
        if report.outcome != "rescued":
            for number, truth in sound.truth.items() if report.end_known else ():
                if b"".join(book.received(number)) != truth or list(book.epochs(number)) != sound.epochs[number]:
                    made.wrong.append(f"occupation {number} of a complete copy differs")
            made.salvaged = sum(len(data) for number in sound.truth for data in book.received(number))
            made.again = min(made.survives, made.salvaged)
            return
        for done in report.occupations:
            truth = sound.truth.get(done.occupation)
            if truth is None:
                made.wrong.append(f"there never was an occupation {done.occupation}")
                continue
            if done.mark is not None:
                got = b"".join(book.received(done.occupation))
                if len(book.epochs(done.occupation)) != done.epochs:
                    made.wrong.append(f"occupation {done.occupation}: not {done.epochs} epochs")
                if (
                    done.whole
                    and list(book.epochs(done.occupation))[: done.epochs]
                    != sound.epochs[done.occupation][: done.epochs]
                ):
                    made.wrong.append(f"occupation {done.occupation} is called whole, and its epochs differ")
            else:
                got = Path(done.file).read_bytes() if done.file else b""
                Path(done.file or "/nowhere").unlink(missing_ok=True)
            if len(got) != done.received_bytes:
                made.wrong.append(f"occupation {done.occupation}: {len(got)} bytes, not {done.received_bytes}")
            if not is_part(got, truth):
                made.wrong.append(
                    f"occupation {done.occupation}: salvaged lines are not lines of the original, in order"
                )
            if done.mark is not None:
                made.wrong += _proven(book, done.occupation, report, truth)
            made.salvaged += len(got)
            own = [unit for unit in left if unit.occupation == done.occupation]
            made.again += min(sum(unit.received for unit in own), len(got))
            hashed = sum(unit.received for unit in own if unit.hashed)
            made.hashed += hashed
            made.proven += min(hashed, done.proven_bytes + done.own_hash_bytes)


def _proven(book: Book, occupation: int, report: RescueReport, truth: bytes) -> list[str]:
    """Chunks that are called proven, byte for byte somewhere in what was received, in order."""
    stated = next(entry.body for entry in reversed(book.entries()) if entry.kind == "rescued")
    tree = next(item for item in stated["occupations"] if item["occupation"] == occupation)
    sealed = {
        entry.body["chunk"]: entry.body
        for entry in book.entries()
        if entry.kind == "raw" and entry.body["occupation"] == occupation
    }
    items = list(book.items(occupation))
    place = at = 0
    wrong = []
    for number in sorted(sealed):
        count = sealed[number]["items"]
        data = b"".join(item.data for item in items[at : at + count] if item.kind is ItemKind.BYTES)
        at += count
        if tree["whole"] or any(
            part["first"] <= number <= part["last"] and part["proof"] == "chain" for part in tree["chunks"]
        ):
            found = truth.find(data, place)
            if found < 0:
                wrong.append(f"chunk {number} of occupation {occupation} is called proven, and was never received")
            place = max(place, found + len(data))
    return wrong


def is_part(got: bytes, truth: bytes) -> bool:
    """Whether the lines come from the truth, in its order.

    At a hole a line may be torn: the rest of a line, or the beginning of one before a whole one; few of them.
    """
    lines, place, torn = truth.split(b"\n"), 0, 0

    def after(wanted: Callable[[bytes], bool]) -> bool:
        nonlocal place
        found = next((at for at in range(place, len(lines)) if wanted(lines[at])), None)
        place = place if found is None else found + 1
        return found is not None

    for line in got.split(b"\n")[:-1]:
        if after(lambda other, line=line: other == line):
            continue
        torn += 1
        head, dollar, tail = line.rpartition(b"$")
        if head and not after(lambda other, head=head: other.startswith(head)):
            return False
        ending = tail if not dollar else dollar + tail
        if torn > MOST_TORN or not after(lambda other, ending=ending: other.endswith(ending)):
            return False
    return True


def rescues(times: int, folder: Path) -> list[Judged]:
    """So many random damages over the three books."""
    books = sound_books(folder)
    kinds = [*DAMAGES, "-wal missing"]
    done = []
    for seed in range(times):
        luck = random.Random(1000 + seed)
        sound = books[seed % len(books)]
        kind = luck.choice(kinds if sound.wal else kinds[:-1])
        done.append(judge(sound, folder, kind, seed))
        done[-1].kind = f"{sound.name}: {done[-1].kind}"
        done[-1].wrong = [f"seed {seed}, {done[-1].kind}: {text}" for text in done[-1].wrong]
    return done


def rescued(times: int) -> Row:
    """One row of the table of faults."""
    row = Row("book damaged at random (zeroed, cut off, garbled, bits flipped, head gone, -wal missing), rescued")
    with tempfile.TemporaryDirectory(prefix="faults-rescue-") as folder:
        done = rescues(times, Path(folder))
    row.times = len(done)
    row.failed = [text for item in done for text in item.wrong][:3]
    row.recover_s = [item.seconds for item in done]
    survives, again = sum(item.survives for item in done), sum(item.again for item in done)
    row.note = (
        f"counted in received bytes: {survives:,} on undamaged pages, {100 * again / survives:.2f} % of them salvaged; "
        f"{sum(bool(item.wrong) for item in done)} reports not true"
    )
    return row


def main() -> int:
    """Print a table by kind of damage."""
    parser = argparse.ArgumentParser(description="Damages books at random and rescues them.")
    parser.add_argument("--times", type=int, default=300)
    times = parser.parse_args().times
    with tempfile.TemporaryDirectory(prefix="faults-rescue-") as folder:
        done = rescues(times, Path(folder))
    print(
        "| book: damage | times | received bytes salvaged | of those on undamaged pages | with a hash: proven | outcomes | wrong |"
    )
    print("|---|---|---|---|---|---|---|")
    key: Callable[[Judged], str] = lambda item: item.kind  # noqa: E731
    for kind, group in groupby(sorted(done, key=key), key=key):
        _print(kind, list(group))
    _print("all", done)
    wrong = [text for item in done for text in item.wrong]
    print("\n".join(wrong[:20]))
    return 1 if wrong else 0


def _print(kind: str, items: list[Judged]) -> None:
    received, survives = sum(item.received for item in items), sum(item.survives for item in items)
    share = f"{100 * sum(item.again for item in items) / survives:.2f} %" if survives else "none survive"
    outcomes = ", ".join(
        f"{name} {count}" for name, count in collections.Counter(item.outcome for item in items).items()
    )
    hashed = sum(item.hashed for item in items)
    proven = f"{100 * sum(item.proven for item in items) / hashed:.2f} %" if hashed else ""
    total = 100 * sum(item.salvaged for item in items) / received
    print(
        f"| {kind} | {len(items)} | {total:.1f} % | {share} | {proven} | {outcomes} | {sum(bool(item.wrong) for item in items)} |"
    )


if __name__ == "__main__":
    sys.exit(main())
