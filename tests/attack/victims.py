"""Sound books to be attacked, and everything a book says: what an attack may not change unseen.

open        one occupation left open by a recorder that was stopped: sealed chunks, a tail, epoch rows
packed      one ended occupation, packed
certified   the same with two certificates (one superseded), a draft, a struck remark and a struck reading
combined    two occupations of one mark and the certificate of both together
killed      one occupation left open by a recorder that was killed: the file and a -wal beside it
"""

from __future__ import annotations

import contextlib
import gzip
import io
import json
import shutil
import sys
from collections.abc import Callable
from pathlib import Path
from typing import Any

ROOT = Path(__file__).parents[2]
sys.path.insert(0, str(ROOT / "tests"))

from recorded_samples import SAMPLES, record_into  # noqa: E402

from fieldbook.book.store import Book  # noqa: E402
from fieldbook.certificate.combined import WholeMarkEvidence, build_combined_facts  # noqa: E402
from fieldbook.certificate.facts import build_facts  # noqa: E402
from fieldbook.certificate.issue import program_versions  # noqa: E402
from fieldbook.certificate.repeats import repeats_of  # noqa: E402
from fieldbook.clock import FakeClock, SystemClock  # noqa: E402
from fieldbook.commands import run  # noqa: E402
from fieldbook.issuing import issue  # noqa: E402
from fieldbook.model.item import Item, ItemKind  # noqa: E402
from fieldbook.occupy.marks_combined import combine_marks  # noqa: E402
from fieldbook.occupy.rebuild import occupation_of  # noqa: E402
from fieldbook.occupy.reductions import reduce_book, search_dirs  # noqa: E402
from fieldbook.occupy.whole_mark import whole_mark  # noqa: E402
from fieldbook.occupy.writer import Writer  # noqa: E402
from fieldbook.settings.session import load_session  # noqa: E402

NAMES = ("open", "packed", "certified", "combined", "killed")
SIGN_OFF = "A. Marlow; licence 4411"
START_MS = 1_804_122_600_000  # 2027-03-04T01:10:00Z
LINES = 900  # of a sample: about two minutes


def sample(name: str, folder: Path, lines: int = LINES) -> Path:
    """A session file whose receiver log holds the first lines of a sample."""
    folder.mkdir(parents=True, exist_ok=True)
    session = Path(shutil.copy(SAMPLES / name / "session.toml", folder / "session.toml"))
    plain, packed = SAMPLES / name / "receiver.nmea", SAMPLES / name / "receiver.nmea.gz"
    log = gzip.decompress(packed.read_bytes()) if packed.exists() else plain.read_bytes()
    text = session.read_text(encoding="utf-8").replace("receiver.nmea.gz", "receiver.nmea")
    session.write_text(text, encoding="utf-8")
    (folder / "receiver.nmea").write_bytes(b"".join(log.splitlines(keepends=True)[:lines]))
    return session


def made(name: str, folder: Path) -> Path:
    """One of the books above."""
    folder.mkdir(parents=True, exist_ok=True)
    path = folder / f"{name}.book"
    if name == "open":
        return left_open(path, folder)
    if name == "killed":
        return killed(path, folder)
    record_into(path, sample("kestrel-ridge-1", folder / "first"))
    if name == "combined":
        record_into(path, sample("kestrel-ridge-2", folder / "second"))
        with Book.open(path, clock=SystemClock(), write=True) as book:
            issue(book, "KR-07", folder / "whole.json", occupation=None, sign_off=None)
            issue(book, "KR-07", folder / "one.json", occupation=1, sign_off=SIGN_OFF)
    if name == "certified":
        _certify(path, folder)
    return path


def _certify(path: Path, folder: Path) -> None:
    reading = {"occupation": 1, "method": "vertical", "unit": "m", "when": "after", "reader": "R. Kell"}
    with Book.open(path, clock=SystemClock(), write=True) as book:
        issue(book, "KR-07", folder / "first.json", occupation=1, sign_off=SIGN_OFF)
        remark = book.append("remark", {"occupation": 1, "text": "wind from the west"}, "R. Kell")
        book.append("strike", {"seq": remark.seq, "reason": "it was from the east"}, "R. Kell")
        height = book.append("height", {**reading, "value": "1.5100"}, "R. Kell")
        book.append("strike", {"seq": height.seq, "reason": "tape slipped"}, "R. Kell")
        issue(book, "KR-07", folder / "second.json", occupation=1, sign_off=SIGN_OFF, supersede="a reading was struck")
        issue(book, "KR-07", folder / "draft.html", occupation=1, sign_off=None)


def left_open(
    path: Path, folder: Path, *, lines: int = LINES, rest: int = 190, before_the_end: Callable[[], None] = lambda: None
) -> Path:
    """As a recorder leaves it that was told to stop: bursts of one second, sealed every 60 rows, the last in the tail."""
    session_path = sample("kestrel-ridge-1", folder / "open", lines)
    session, clock = load_session(session_path), FakeClock(1000, START_MS)
    text = (folder / "open" / "receiver.nmea").read_bytes().splitlines(keepends=True)
    with Book.create(path, clock=clock, observer=session.job.observer, session_tree=session.tree) as book:
        body = {
            "occupation": 1,
            "mark": session.mark.name,
            "session": session.tree,
            "link": "serial:///dev/ttyX?baud=9600",
        }
        book.append("mark", session.tree["mark"], session.job.observer)
        book.append("occupation", {**body, "simulated": False}, session.job.observer)
        writer = Writer(book, occupation_of(book, 1), clock)
        writer.append("recorder", state="running", program="0")
        writer.write([Item(ItemKind.OPENED, b"serial:///dev/ttyX?baud=9600", clock.monotonic_ms(), clock.utc_ms())])
        for first in range(0, len(text), 8):
            clock.advance(1000)
            data = b"".join(text[first : first + 8])
            writer.write([Item(ItemKind.BYTES, data, clock.monotonic_ms(), clock.utc_ms())])
            if first >= len(text) - rest:
                writer._sealed_ms = clock.monotonic_ms()  # what is left stays in the tail
                writer._rows = 0
        writer.show_state(now=True)
        before_the_end()
        writer.state.link_state = "closed"
        writer.show_state(now=True)
        writer.append("recorder", state="closed", program="0")
    return path


def killed(path: Path, folder: Path) -> Path:
    """The files as they stand while a recorder writes: a kill leaves just that."""
    work, taken = folder / "being_recorded.book", {}

    def take() -> None:
        taken.update({ending: Path(f"{work}{ending}").read_bytes() for ending in ("", "-wal")})

    left_open(work, folder, lines=330, before_the_end=take)  # short enough that the -wal never begins anew
    for ending, data in taken.items():
        Path(f"{path}{ending}").write_bytes(data)
    return path


def everything(path: Path) -> dict[str, Any]:
    """All that a book says, without its path: entries, folded state, received items, epochs, every number of
    `reduce --json`, and the facts a certificate of it would state today."""
    with Book.open(path, clock=SystemClock()) as book:
        state = book.state()
        reduced, failed = reduce_book(book)
        marks = combine_marks(state, reduced, search_dirs(book), failed)
        facts = []
        for item in reduced:
            number = item.reduction.occupation
            others = [one.reduction for one in reduced if one is not item and one.reduction.mark == item.reduction.mark]
            versions = {**program_versions(), "proj": "", "epsg": "", "pyproj": ""}
            repeats = repeats_of(item.reduction, others)
            occupation = state.occupations[number]
            facts.append(
                build_facts(state, occupation, item.reduction, item.trace, sign_off=SIGN_OFF, repeats=repeats, versions=versions)
            )  # fmt: skip
            if others and item is reduced[0]:
                whole = whole_mark(book, item.reduction.mark)
                members = [(one, member.reduction) for one, member in whole.members]
                evidence = WholeMarkEvidence(whole.result, whole.principal, whole.reduction, whole.trace, members)
                facts.append(build_combined_facts(state, evidence, sign_off=SIGN_OFF, versions=versions))
        return {
            "entries": book.entries(),
            "state": repr(state),
            "items": {number: list(book.items(number)) for number in state.occupations},
            "epochs": {number: book.epochs(number) for number in state.occupations},
            "reductions": json.dumps([{**item.reduction.to_json(), "convergence": item.convergence().to_json()} for item in reduced]),
            "marks": json.dumps([item.to_json() for item in marks]),
            "failed": [(item.mark, item.occupation, item.error.text.replace(str(path), "")) for item in failed],
            "facts": json.dumps(facts, default=str, sort_keys=True),
        }  # fmt: skip


def holds(path: Path) -> tuple[bool, list[str]]:
    """What `fieldbook verify` says of a book: whether it holds, and the lines that do not."""
    said = io.StringIO()
    with contextlib.redirect_stdout(said):
        code = run(["verify", str(path), "--json"])
    tree = json.loads(said.getvalue())
    lines = [line for item in tree.get("files", []) for line in item["lines"] if not line["holds"]]
    assert code == (0 if tree["holds"] else 1)
    return bool(tree["holds"]), [f"{line['where']}: {line['text']}" for line in lines]
