"""Disks that are full or read-only, books copied without their -wal, books of another version of the program.

Full and read-only disks are small file systems in memory, mounted for the purpose: as root on Linux, else 'not run'.
"""

from __future__ import annotations

import contextlib
import hashlib
import json
import os
import random
import shutil
import signal
import sqlite3
import subprocess
import tempfile
import time
from collections.abc import Iterator
from pathlib import Path
from unittest import mock

from faults_rig import SAMPLE, Row, Scene, holes, lost, scene, until

from fieldbook.book import migrations
from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.links.sim_scenarios import SCENARIOS
from fieldbook.links.simulate import Receiver
from fieldbook.model.item import Item, ItemKind
from fieldbook.nmea.decoder import Decoder
from fieldbook.occupy.rebuild import session_decoder_options
from fieldbook.occupy.verifying import verify_stored
from fieldbook.settings.session import load_session

STALL_S = 2.5
NO_MOUNT = "needs root and `mount`"


@contextlib.contextmanager
def _small_disk(megabytes: int) -> Iterator[Path | None]:
    """The folder a small file system is mounted on; None where that cannot be done."""
    with tempfile.TemporaryDirectory(prefix="faults-disk-") as folder:
        command = ["mount", "-t", "tmpfs", "-o", f"size={megabytes}m", "tmpfs", folder]
        try:
            subprocess.run(command, check=True, capture_output=True)
        except (OSError, subprocess.CalledProcessError):
            yield None
            return
        try:
            yield Path(folder)
        finally:
            subprocess.run(["umount", "-l", folder], check=False, capture_output=True)


def disk_full(times: int) -> Row:
    """The disk fills while a recorder records: it is freed again, the recorder is killed, or told to stop."""
    row = Row("disk full while recording (tmpfs), then freed")
    words: list[str] = []
    while row.times < times:
        with _small_disk(3) as disk:
            if disk is None:
                row.note = NO_MOUNT
                return row
            with scene(folder=disk) as made:
                words.append(_filled(made, row, row.times % 3))
                row.acknowledged += made.count()
        row.times += 1
    row.note = "; ".join(sorted(set(words)))
    return row


def _filled(made: Scene, row: Row, kind: int) -> str:
    recorder = made.observe()
    made.more(10)
    filler = made.folder / "filler"
    with contextlib.suppress(OSError), filler.open("wb", buffering=0) as file:
        while file.write(bytes(4096)):
            pass
    _stalled(made)
    row.expect(recorder.poll() is None, "the recorder ended on a full disk")
    began = time.monotonic()
    if kind == 1:
        made.kill(recorder)
        row.lost += lost(made.book, made.seen)
    elif kind == 2:
        recorder.send_signal(signal.SIGTERM)
        row.expect(recorder.wait(40) == 4, "told to stop on a full disk, the recorder did not say so with exit 4")
        row.lost += lost(made.book, made.seen)
    filler.unlink()
    freed = time.monotonic()
    if kind:
        made.observe()
    made.more(1)
    row.recover_s.append(time.monotonic() - freed)
    made.more(20)
    made.judge(row)
    if kind:
        return "killed or stopped (exit 4) while full: taken up again"
    row.expect(holes(made.seen[1]) == 0, f"{holes(made.seen[1])} times epochs are missing in between")
    return f"freed after {freed - began + STALL_S:.0f} s or more: no epoch is missing in between"


def _stalled(made: Scene) -> None:
    """Wait until nothing new has been committed for a while."""
    since, count = time.monotonic(), made.look()
    end = since + 90
    while time.monotonic() - since < STALL_S:
        if time.monotonic() > end:
            raise TimeoutError("the disk did not become full")
        now = made.look()
        if now != count:
            since, count = time.monotonic(), now
        time.sleep(0.05)


def disk_low(times: int) -> Row:
    """The disk fills up to the recorder's reserve: it stops cleanly, and goes on when there is room again."""
    row = Row("disk filled to the reserve (tmpfs), then freed")
    while row.times < times:
        with _small_disk(64) as disk:
            if disk is None:
                row.note = NO_MOUNT
                return row
            with scene(folder=disk) as made:
                recorder = made.observe(stdout=subprocess.PIPE, text=True)
                made.more(20)
                filler = made.folder / "filler"
                free = shutil.disk_usage(disk).free
                filler.write_bytes(bytes(free - 1_200_000))
                out, _ = recorder.communicate(timeout=40)
                row.expect(recorder.returncode == 4, f"exit {recorder.returncode} at the reserve")
                row.expect('"disk_low"' in out, "it does not say disk_low")
                made.look()
                made.judge(row)
                with Book.open(made.book, clock=SystemClock()) as book:
                    row.expect(book.state().open_occupation is not None, "the occupation was ended")
                    state = book.recorder_state()
                    row.expect(state is not None and bool(state.stopped), "the state does not say why")
                    alarms = [entry.body["code"] for entry in book.entries() if entry.kind == "alarm"]
                    row.expect("disk_low" in alarms, "no alarm was entered")
                filler.unlink()
                made.observe()
                row.recover_s.append(made.more(1))
                made.more(10)
                made.judge(row)
                row.acknowledged += made.count()
        row.times += 1
    row.note = "exit 4 (disk_low), occupation left open, taken up again"
    return row


def read_only(times: int) -> Row:
    """A killed recorder's book, -wal and all, on a medium that has become read-only."""
    row = Row("medium read-only, book with its -wal")
    while row.times < times:
        with _small_disk(16) as disk:
            if disk is None:
                row.note = NO_MOUNT
                return row
            with scene(folder=disk) as made:
                recorder = made.observe()
                made.more(20)
                made.kill(recorder)
                _mount_again(disk, "ro")
                made.judge(row)
                before = _digest(made.book)
                refused, said = _said(made)
                row.expect(refused == 4, f"observe on a read-only medium: exit {refused}, {said}")
                row.expect(_digest(made.book) == before, "the book was changed")
                _mount_again(disk, "rw")
                made.observe()
                row.recover_s.append(made.more(1))
                made.judge(row)
                row.acknowledged += made.count()
        row.times += 1
        row.note = f"read and verified in place; recording is refused ({said})"
    return row


def _mount_again(disk: Path, how: str) -> None:
    subprocess.run(["mount", "-o", f"remount,{how}", str(disk)], check=True, capture_output=True)


def _digest(path: Path) -> str:
    return hashlib.sha256(path.read_bytes()).hexdigest()


def _said(made: Scene) -> tuple[int, str]:
    """Exit and error code of an `observe` that is to be refused."""
    asked = made.observe(stdout=subprocess.PIPE, text=True)
    out, _ = asked.communicate(timeout=30)
    return asked.returncode, json.loads(out)["error"]["code"] if out.strip() else "no word"


def copied_without_wal(times: int) -> Row:
    """Another process copies BOOK alone while it is recorded: the copy must say so, the original must not mind."""
    row, luck = Row("book copied without its -wal while it is recorded"), random.Random(45)
    said = 0
    with scene() as made:
        made.observe()
        made.more(5)
        while row.times < times:
            time.sleep(luck.uniform(0.2, 1.5))
            made.look()
            copy = made.folder / f"copy{row.times}.book"
            subprocess.run(["cp", str(made.book), str(copy)], check=True)
            wrong = [item for item in verify_stored(copy) if not item.holds]
            said += any("without its -wal" in item.text for item in wrong)
            row.times += 1
            row.recover_s.append(made.more(1))
        made.judge(row)
        row.acknowledged = made.count()
        row.expect(said == row.times, "a copy does not say that its -wal is missing")
        row.note = f"counted in the original; {said} of {row.times} copies say that they miss what came last"
    return row


def older_version(times: int) -> Row:
    """A book of the first version, its occupation open: taken up again, killed three times around the upgrade."""
    row, luck = Row("book of an older version, kill -9 around the upgrade"), random.Random(46)
    while row.times < times:
        with scene() as made:
            _older(made)
            for _ in range(3):
                recorder = made.observe()
                time.sleep(luck.uniform(0.1, 0.6))
                made.kill(recorder)
            made.observe()
            began = time.monotonic()
            count = made.count()
            until(lambda: made.look() > count, 30, "the upgraded book to go on")  # noqa: B023 - called at once
            row.recover_s.append(time.monotonic() - began)
            made.judge(row)
            row.acknowledged += made.count()
        row.times += 1
    row.note = f"version 1 to {migrations.version()}, the same occupation goes on"
    return row


def _older(made: Scene) -> None:
    """Made by this program as it was before the second migration."""
    session = load_session(SAMPLE)
    decoder = Decoder(session_decoder_options(session, session.receiver.talker))
    start_ms = time.time_ns() // 10**9 * 1000 - 60_000
    receiver = Receiver(SCENARIOS["rtk"], seed=7, first_utc_ms=start_ms, rate_hz=1.0)
    with mock.patch.object(migrations, "MIGRATIONS", migrations.MIGRATIONS[:1]):
        with Book.create(made.book, clock=SystemClock(), observer="R. Kell", session_tree=session.tree) as book:
            book.append("mark", session.tree["mark"], "R. Kell")
            body = {"occupation": 1, "mark": "KR-07", "session": session.tree, "link": made.wire.link}
            book.append("occupation", {**body, "simulated": False}, "R. Kell")
            made.seen[1] = []
            items = [Item(ItemKind.OPENED, made.wire.link.encode(), 0, start_ms)]
            for number in range(40):
                moment = start_ms + 1000 * number
                items.append(Item(ItemKind.BYTES, receiver.next_burst().data, 1000 * number, moment))
            for item in items:
                epochs = decoder.feed(item)
                book.write_burst(1, [item], epochs)
                made.seen[1] += epochs
    os.sync()


def newer_version(times: int) -> Row:
    """A book of a version this program does not know: refused, and not a byte of it touched."""
    row = Row("book of a newer version")
    while row.times < times:
        with scene() as made:
            recorder = made.observe()
            made.more(10)
            made.kill(recorder, signal.SIGTERM)
            made.look()
            known = made.folder / "known.book"
            shutil.copy(made.book, known)
            connection = sqlite3.connect(made.book)
            connection.execute(f"PRAGMA user_version = {migrations.version() + 1}")
            connection.commit()
            connection.close()
            before = _digest(made.book)
            code = _said(made)
            row.expect(code == (4, "newer"), f"observe: {code}")
            row.expect(_digest(made.book) == before, "the book was changed")
            known.replace(made.book)
            made.judge(row)
            row.acknowledged += made.count()
        row.times += 1
    row.note = "refused (newer), not a byte changed"
    return row
