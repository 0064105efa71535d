"""The new book of a rescue: written, decoded, and told what is missing.

Times of what is missing are those of the receiver's fixes on both sides where it gave a date, else of arrival.
"""

from __future__ import annotations

import hashlib
import uuid
from dataclasses import dataclass, field
from datetime import date
from pathlib import Path

from fieldbook.book.salvage.gather import Found, OldEntry
from fieldbook.book.salvage.plan import DAMAGED, DOCUMENTS, LOST, Line, numbers_without, original_of, plan_lines, runs
from fieldbook.book.salvage.streams import Stream, occupations_of, stream_of
from fieldbook.book.salvage.write import SIGNED, write_book
from fieldbook.book.store import Book
from fieldbook.clock import Clock, utc_text
from fieldbook.model.canonical import Tree
from fieldbook.model.epoch import DAY_MS, Epoch
from fieldbook.model.item import Item, ItemKind
from fieldbook.model.rescue import LostItems, RescuedOccupation, RescueReport
from fieldbook.model.state import Occupation
from fieldbook.nmea.decoder import Decoder
from fieldbook.occupy.rebuild import decoder_options
from fieldbook.occupy.verifying import verify_stored

BY = "rescue"
_UNIX_DAY = date(1970, 1, 1).toordinal()


@dataclass
class Old:
    """The damaged book: its bytes, and what was wrong with it."""

    path: str
    data: bytes
    wal: bytes
    size: int
    sha256: str
    wal_sha256: str | None
    problems: list[str] = field(default_factory=list)
    end_known: bool = False
    torn: bool = False  # the last commit in the -wal is not whole
    end_seq: int = 0  # the last entry that SQLite's own way through the book finds


def rescue_anew(old: Old, found: Found, part: Path, out: Path, clock: Clock) -> RescueReport:
    """Write the new book to `part` and report.

    Raises:
        BookError: it cannot be written.
    """
    begins = {entry.tree().get("occupation") for entry in _begins(found)}
    streams: dict[int, Stream] = {}
    for number in occupations_of(found):
        streams[number] = stream_of(found, number)
        if number in begins:
            streams[number].forget_stored()
    lines = plan_lines(found, streams)
    kept = [line.entry for line in lines if line.entry is not None and not line.reason]
    begun = {entry.tree().get("occupation") for entry in kept if entry.kind == "occupation"}
    report = _report(old, found, lines)
    report.new_id = str(uuid.uuid4())
    now = utc_text(clock.utc_ms())
    carried = [stream for number, stream in streams.items() if number in begun]
    made = write_book(part, report.new_id, lines, carried, now)
    with Book.open(part, clock=clock, write=True) as book:
        for number, stream in streams.items():
            if number in begun:
                done = _finish(book, number, stream, last=number == max(streams))
            else:
                done = _orphan(stream, out)
            _judge(done, stream, found, report)
            report.occupations.append(done)
        for done in report.occupations:
            if done.severity and done.mark is not None:
                _tell(book, done)
        _close_recorder(book)
        book.append("rescued", _body(report, found, made), SIGNED)
    report.holds = all(item.holds for item in verify_stored(part))
    return report


def _report(old: Old, found: Found, lines: list[Line]) -> RescueReport:
    report = RescueReport(old.path, None, "rescued", problems=old.problems)
    first = found.entries.get(1)
    if first is not None and first.kind == "book":
        report.old_id = str(first.tree().get("id"))
    last = found.entries.get(found.last_seq)
    if last is not None:
        report.old_head_seq, report.old_head_hash = last.seq, last.hash
    report.old_bytes, report.old_sha256, report.old_wal_sha256 = old.size, old.sha256, old.wal_sha256
    report.end_known = old.end_known and old.end_seq == found.last_seq
    report.entries_carried = sum(not line.reason for line in lines)
    report.entries_mended = [line.seq for line in lines if line.entry is not None and line.entry.mended]
    report.entries_lost = numbers_without(lines, LOST)
    report.entries_damaged = numbers_without(lines, DAMAGED)
    documents = [entry for entry in found.entries.values() if entry.kind == "certificate"]
    report.certificates = [str(entry.tree().get("number")) for entry in documents]
    return report


# -- one occupation


def _finish(book: Book, number: int, stream: Stream, *, last: bool) -> RescuedOccupation:
    """Decode an occupation of the new book; end it where the old one had ended."""
    occupation = book.state().occupations.get(number)
    if occupation is None:  # struck out: its bytes are carried, nothing is made of them
        return _described(stream, None, None)
    ended = not occupation.open
    by = occupation.ended_by or _ended_by(stream, last=last)
    decoder = Decoder(decoder_options(occupation))
    watch = _Watch(stream)
    epochs: list[Epoch] = []
    for item in book.items(number):
        closed = decoder.feed(item)
        watch.saw(item, closed)
        epochs += closed
    if by is not None:
        epochs += decoder.finish()
    done = _described(stream, occupation.mark, by)
    done.epochs = len(epochs)
    if decoder.day0 is not None and decoder.day0 != occupation.day0 and occupation.day0_source != "decision":
        body = {"occupation": number, "date": decoder.day0.isoformat(), "source": decoder.day0_source}
        book.append("date", body, SIGNED)
    if by is not None and not ended:
        size, sha256 = book.received_digest(number)
        body = {"occupation": number, "by": by, "epochs": len(epochs)}
        book.append("end", {**body, "received_bytes": size, "received_sha256": sha256}, SIGNED)
    book.replace_epochs(number, epochs)
    if by is not None:
        book.pack(number)
    done.lost = watch.lost(decoder.day0, occupation)
    return done


def _ended_by(stream: Stream, *, last: bool) -> str | None:
    """By what an occupation without a standing `end` entry had ended; None: it was open."""
    if stream.end is not None:
        return str(stream.end.tree().get("by", BY))
    items = [item for piece in stream.pieces[-1:] for item in piece.items[-1:]]
    closed = stream.packed or not last or (items and items[0].kind is ItemKind.END)
    return BY if closed else None


def _described(stream: Stream, mark: str | None, by: str | None) -> RescuedOccupation:
    return RescuedOccupation(
        occupation=stream.occupation,
        mark=mark,
        whole=stream.whole,
        ended_by=by,
        received_bytes=stream.received(),
        proven_bytes=stream.received("chain"),
        own_hash_bytes=stream.received("row"),
        unsealed_bytes=stream.received("tail"),
        unproven_bytes=stream.received("none"),
        stated_bytes=None,
        cut_bytes=stream.cut_bytes,
        mended_chunks=stream.mended,
    )


class _Watch:
    """Notes what stands on both sides of each hole while the items go through the decoder."""

    def __init__(self, stream: Stream) -> None:
        self._holes = sorted(stream.holes, key=lambda hole: hole.first_id)
        self._sides: list[list[tuple[int | None, int | None]]] = []  # (fix instant, arrival) before and behind
        self._fix: int | None = None
        self._arrival: int | None = None

    def saw(self, item: Item, closed: list[Epoch]) -> None:
        """An item went by, and these epochs closed with it."""
        fixes = [epoch.instant_ms for epoch in closed if epoch.code is None and epoch.instant_ms is not None]
        behind = self._sides and len(self._sides[-1]) == 1
        if fixes and self._sides:
            sides = self._sides[-1]
            if len(sides) == 1:
                sides.append((fixes[0], item.utc_ms))
            elif sides[1][0] is None:
                sides[1] = fixes[0], sides[1][1]
        elif behind and item.kind is ItemKind.BYTES and item.utc_ms is not None:
            self._sides[-1].append((None, item.utc_ms))
        if fixes:
            self._fix = fixes[-1]
        if item.kind is ItemKind.DROPPED and len(self._sides) < len(self._holes) and self._is_ours(item):
            self._sides.append([(self._fix, self._arrival)])
        elif item.utc_ms is not None:
            self._arrival = item.utc_ms

    def _is_ours(self, item: Item) -> bool:
        return item.data == str(self._holes[len(self._sides)].data_bytes or 0).encode()

    def lost(self, day0: date | None, occupation: Occupation) -> list[LostItems]:
        """The holes with their times."""
        start = None
        if day0 is not None:
            start = (day0.toordinal() - _UNIX_DAY + 7 * occupation.rollover_weeks) * DAY_MS
        made = []
        for hole, sides in zip(self._holes, [*self._sides, *[[]] * len(self._holes)], strict=False):
            times = [_moment(start, fix, arrival) for fix, arrival in sides] + [None, None]
            until = None if hole.scattered else times[1]
            made.append(LostItems(hole.first_id, hole.last_id, hole.data_bytes, times[0], until))
        return made


def _moment(start_ms: int | None, fix_ms: int | None, arrival_ms: int | None) -> str | None:
    if start_ms is not None and fix_ms is not None:
        return utc_text(start_ms + fix_ms)
    return None if arrival_ms is None else utc_text(arrival_ms)


def _orphan(stream: Stream, out: Path) -> RescuedOccupation:
    """Bytes of an occupation whose beginning is lost: nobody knows its mark and frame, so they become a file."""
    done = _described(stream, None, None)
    data = b"".join(item.data for piece in stream.pieces for item in piece.items if item.kind is ItemKind.BYTES)
    if not data:
        return done
    for attempt in range(1, 1000):
        name = f"{out.name}.occupation-{stream.occupation}{'' if attempt == 1 else f'-{attempt}'}.received"
        try:
            with (out.parent / name).open("xb") as file:
                file.write(data)
        except FileExistsError:
            continue
        done.file, done.file_sha256 = str(out.parent / name), hashlib.sha256(data).hexdigest()
        break
    return done


# -- what is said of it


def _judge(done: RescuedOccupation, stream: Stream, found: Found, report: RescueReport) -> None:
    """The finding `rescued`: how bad, and why."""
    if stream.end is not None:
        stated = stream.end.tree().get("received_bytes")
        done.stated_bytes = stated if type(stated) is int else None
    elif stream.occupation in found.heard:
        done.stated_bytes = found.heard[stream.occupation][0]
    said, severity = [], ""
    begun = [entry.seq for entry in _begins(found) if entry.tree().get("occupation") == stream.occupation]
    missing = [span for span in report.entries_lost + report.entries_damaged if begun and span[1] > begun[0]]
    if done.lost or done.cut_bytes or (done.stated_bytes or 0) > done.received_bytes:
        severity = "caution"
        said.append(_loss(done))
    if done.own_hash_bytes:
        severity = "caution"
        said.append(
            f"the entries that state the hash of {done.own_hash_bytes} bytes are lost; another hash in the book holds"
        )
    if done.unsealed_bytes and stream.tail_broken:
        severity = "stop"
        said.append(f"the last {done.unsealed_bytes} bytes are not those that the recorder wrote")
    elif done.unsealed_bytes and not stream.whole and not stream.tail_holds:
        severity = "caution"
        said.append(
            f"{done.unsealed_bytes} bytes had no hash yet: only the checksums of their sentences speak for them"
        )
    if done.unproven_bytes:
        severity = "stop"
        said.append(f"{done.unproven_bytes} bytes come from damaged pieces: only the checksums of their sentences hold")
    if missing:
        severity = "stop"
        numbers = ", ".join(str(a) if a == b else f"{a} to {b}" for a, b in missing)
        said.append(f"entries {numbers} are lost: a height, a change of the set-up or a strike may be among them")
    if not report.end_known:
        severity = severity or "caution"
        said.append("the end of the old book cannot be read for certain: what was written last may be missing")
    if said:
        remedy = ""
        if severity == "stop":
            remedy = (
                " Compare it with the notes on paper; to use the bytes all the same, export and observe them again."
            )
        done.severity = severity
        done.finding = f"Rescued from a damaged book: {'; '.join(said)}.{remedy}"


def _begins(found: Found) -> list[OldEntry]:
    return [entry for entry in found.entries.values() if entry.kind == "occupation"]


def _loss(done: RescuedOccupation) -> str:
    if done.stated_bytes is not None:
        said = f"{max(0, done.stated_bytes - done.received_bytes)} of {done.stated_bytes} received bytes are lost"
    elif any(item.bytes is None for item in done.lost):
        said = "received bytes are lost, how many is not known"
    else:
        said = f"{sum(item.bytes or 0 for item in done.lost) + done.cut_bytes} received bytes are lost"
    spans = [f"{item.from_utc or '?'} to {item.to_utc or '?'}" for item in done.lost if item.from_utc or item.to_utc]
    more = f" and {len(spans) - 3} more" if len(spans) > 3 else ""
    return said + (f", between {', '.join(spans[:3])}{more}" if spans else "")


def _tell(book: Book, done: RescuedOccupation) -> None:
    figures = {
        "received_bytes": done.received_bytes,
        "stated_bytes": done.stated_bytes,
        "unproven_bytes": done.unproven_bytes,
        "holes": len(done.lost),
    }
    body = {"occupation": done.occupation, "code": "rescued", "severity": done.severity, "text": done.finding}
    book.append("finding", {**body, "figures": figures}, SIGNED)


def _close_recorder(book: Book) -> None:
    """Nobody records into the new book, whatever the old one's last entry says."""
    states = [entry.body for entry in book.entries() if entry.kind == "recorder"]
    if states and states[-1].get("state") == "running":
        body = {"occupation": states[-1]["occupation"], "state": "closed", "program": SIGNED}
        book.append("recorder", body, SIGNED)


def _body(report: RescueReport, found: Found, made: dict[int, list[Tree]]) -> Tree:
    """The `rescued` entry."""
    first = found.entries.get(1)
    return {
        "from": {
            "id": report.old_id,
            "head_seq": report.old_head_seq,
            "head_hash": report.old_head_hash,
            "bytes": report.old_bytes,
            "sha256": report.old_sha256,
            "wal_sha256": report.old_wal_sha256,
            "book": None if first is None else original_of(first),
            "end_known": report.end_known,
        },
        "carried": runs(found),
        "lost": report.entries_lost,
        "damaged": report.entries_damaged,
        "mended": report.entries_mended,
        "occupations": [_of_occupation(done, made) for done in report.occupations],
        "certificates": [_of_document(entry) for entry in found.entries.values() if entry.kind in DOCUMENTS[:2]],
    }


def _of_occupation(done: RescuedOccupation, made: dict[int, list[Tree]]) -> Tree:
    return {
        "occupation": done.occupation,
        "whole": done.whole,
        "received_bytes": done.received_bytes,
        "proven_bytes": done.proven_bytes,
        "own_hash_bytes": done.own_hash_bytes,
        "unsealed_bytes": done.unsealed_bytes,
        "unproven_bytes": done.unproven_bytes,
        "stated_bytes": done.stated_bytes,
        "cut_bytes": done.cut_bytes,
        "mended_chunks": done.mended_chunks,
        "chunks": made.get(done.occupation, []),
        "lost": [vars(item) for item in done.lost],
        "file": None if done.file is None else {"name": Path(done.file).name, "sha256": done.file_sha256},
    }


def _of_document(entry: OldEntry) -> Tree:
    tree = entry.tree()
    return {
        "seq": entry.seq,
        "number": tree.get("number"),
        "mark": tree.get("mark"),
        "digest": tree.get("digest"),
        "issued_utc": tree.get("issued_utc"),
    }
