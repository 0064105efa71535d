"""Power cuts: the recorder's own writes, logged as they happen (`faults_writes.c`), replayed up to an arbitrary point.

A cut after the k-th write leaves on the disk everything that was synced before, and of what was not synced any part: each
unsynced write is kept, dropped, or torn at a sector of 512 bytes; by turns a -wal is simply cut short within what was not
synced. An epoch is acknowledged if the witness had read it before that write. Two minutes of a book that checkpoints, seals
and, in the last of them, ends and packs. Creating and deleting files is taken as durable at once: that is the file
system's affair. The first of the two recorders makes the book; the second one is logged.
"""

from __future__ import annotations

import random
import shutil
import signal
import struct
import subprocess
import time
from dataclasses import dataclass
from pathlib import Path

from faults_rig import ENVIRONMENT, Row, Scene, damaged, scene

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.model.epoch import Epoch

SHIM = Path(__file__).with_name("faults_writes.c")
HEAD = struct.Struct("<5q")
SECTOR = 512


@dataclass
class Write:
    """One thing done to a file."""

    kind: str  # W, T, S, U
    ns: int
    at: int
    name: str
    data: bytes


@dataclass
class Glance:
    """How many epochs of each occupation the witness had read by a moment."""

    ns: int
    counts: dict[int, int]


def power_cuts(times: int, *, seconds: float) -> Row:
    """Record, log, and cut the power `times` times."""
    row, luck = Row("power cut (writes replayed to a random point, unsynced ones torn)"), random.Random(44)
    compiler = shutil.which("cc")
    if compiler is None:
        row.note = "needs a C compiler"
        return row
    with scene() as made:
        shim = made.folder / "writes.so"
        subprocess.run([compiler, "-shared", "-fPIC", "-O1", "-w", "-o", shim, SHIM, "-ldl", "-lpthread"], check=True)
        base, glances = _recorded(made, shim, seconds)
        writes = _read(made.folder / "writes.log")
        for number in range(times):
            cut = luck.randrange(1, len(writes) + 1)
            folder = made.folder / f"cut{number}"
            folder.mkdir()
            shutil.copy(base, folder / "job.book")
            _replay(writes[:cut], folder, luck)
            known = max((item for item in glances if item.ns <= writes[cut - 1].ns), key=lambda item: item.ns)
            _judge(row, folder / "job.book", made.seen, known)
            row.times += 1
            shutil.rmtree(folder)
        syncs = sum(item.kind == "S" for item in writes)
        row.note = f"{len(writes)} writes, {syncs} syncs in {seconds:.0f} s at 10 Hz; sum over all cuts"
    return row


def _recorded(made: Scene, shim: Path, seconds: float) -> tuple[Path, list[Glance]]:
    """A book that is there, then a logged recorder on it; the book before, and what was seen when."""
    first = made.observe()
    made.more(3)
    made.kill(first, signal.SIGTERM)
    base = made.folder / "base"
    shutil.copy(made.book, base)  # nobody records now, and this process has no connection to it
    made.look()
    glances = [Glance(0, _counts(made))]
    logging = {"LD_PRELOAD": str(shim), "FAULTS_FOLDER": str(made.book), "FAULTS_LOG": str(made.folder / "writes.log")}
    second = made.observe("--for", f"{seconds:.0f}s", environment={**ENVIRONMENT, **logging})
    while second.poll() is None:
        made.look()
        glances.append(Glance(time.time_ns(), _counts(made)))
        time.sleep(0.02)
    made.look()
    return base, glances


def _counts(made: Scene) -> dict[int, int]:
    return {number: len(rows) for number, rows in made.seen.items()}


def _read(log: Path) -> list[Write]:
    data, at, found = log.read_bytes(), 0, []
    while at < len(data):
        kind, ns, offset, name_bytes, size = HEAD.unpack_from(data, at)
        at += HEAD.size
        name = Path(data[at : at + name_bytes].decode()).name
        at += name_bytes
        found.append(Write(chr(kind), ns, offset, name, data[at : at + size]))
        at += size
    return found


def _replay(writes: list[Write], folder: Path, luck: random.Random) -> None:
    """The files as they could stand after a power cut just after the last of these writes."""
    synced = {item.name: number for number, item in enumerate(writes) if item.kind == "S"}
    short = luck.random() < 0.5  # the -wal cut short, instead of sectors chosen at random
    ended: set[str] = set()
    for number, item in enumerate(writes):
        path = folder / item.name
        if item.kind == "U":
            path.unlink(missing_ok=True)
            ended.discard(item.name)
        elif item.kind == "T":
            path.touch()
            with path.open("r+b") as file:
                file.truncate(item.at)
        elif item.kind == "W" and item.name not in ended:
            data = item.data
            if number > synced.get(item.name, -1):
                data = _kept(data, luck)
                if short and len(data) < len(item.data):
                    ended.add(item.name)
            path.touch()
            with path.open("r+b") as file:
                file.seek(item.at)
                file.write(data)


def _kept(data: bytes, luck: random.Random) -> bytes:
    """All of an unsynced write, nothing, or its first sectors."""
    kind = luck.randrange(3)
    if kind == 0:
        return data
    return b"" if kind == 1 else data[: luck.randrange(0, len(data) + 1) // SECTOR * SECTOR]


def _judge(row: Row, path: Path, seen: dict[int, list[Epoch]], known: Glance) -> None:
    """What had been seen is there; what is there beyond it is what came next; and the book is sound."""
    with Book.open(path, clock=SystemClock(), write=True) as book:  # as the next recorder would: the -wal is recovered
        occupations = book.state().occupations
        for number, count in known.counts.items():
            stored = book.epochs(number) if number in occupations else []
            row.acknowledged += count
            row.lost += sum(stored[index : index + 1] != [seen[number][index]] for index in range(count))
            row.expect(stored == seen[number][: len(stored)], "epochs beyond the acknowledged ones differ")
        alarms = [entry.body["code"] for entry in book.entries() if entry.kind == "alarm"]
        row.expect("wal_damaged" not in alarms, "a torn -wal was taken for a damaged one")
    row.damaged += damaged(path, row)
