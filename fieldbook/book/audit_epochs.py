"""Audit of decoded epochs: rows and packs together are complete, consistent and readable.

Their values are no part of the chain: whoever audits decodes the received bytes again and compares with `Book.epochs`.
One pack is in memory at a time.
"""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass
from typing import TYPE_CHECKING

from . import connect, epoch_packs, heartbeat

if TYPE_CHECKING:
    from .audit import Audit

_PACK_COLUMNS = "first, last, codec, count, sha256, data"


@dataclass
class _Numbers:
    """What one occupation's epochs are, so far: count, first and last number."""

    count: int
    first: int
    last: int


def audit_epochs(audit: Audit) -> None:
    """Compare the epochs with the entries and with each other."""
    found = _packs(audit)
    _rows(audit, found)
    known = {occupation for occupation, _, _ in audit.by_occupation("occupation")}
    ended = {occupation: (seq, body.get("epochs")) for occupation, seq, body in audit.by_occupation("end")}
    for occupation, numbers in found.items():
        where = f"epochs of occupation {occupation}"
        if occupation not in known:
            audit.find("epoch", f"{where}: no entry begins this occupation")
        if (numbers.first, numbers.last) != (1, numbers.count):
            text = f"numbers run from {numbers.first} to {numbers.last}, but there are {numbers.count}"
            audit.find("epoch", f"{where}: {text}")
        seq, stated = ended.pop(occupation, (None, numbers.count))
        if stated != numbers.count:
            audit.find("epoch", f"{where}: there are {numbers.count}, entry {seq} states {stated!r:.40}", seq)
    for occupation, (seq, stated) in ended.items():
        if stated != 0:
            audit.find("epoch", f"epochs of occupation {occupation}: none, entry {seq} states {stated!r:.40}", seq)
    _forms(audit)
    _stored(audit, found)


def _stored(audit: Audit, found: dict[int, _Numbers]) -> None:
    """The heartbeat of an open occupation never says more epochs than are stored; an entry may have had them decoded again."""
    try:
        said = heartbeat.tree(audit.connection)
    except ValueError:
        return  # a finding of the tail
    occupation, count = said.get("occupation"), said.get("epochs")
    ended = {number for number, _, _ in audit.by_occupation("end")}
    changed = {number for kind in ("decision", "setup") for number, _, _ in audit.by_occupation(kind)} | ended
    if type(occupation) is int and type(count) is int and occupation not in changed:
        there = found.get(occupation, _Numbers(0, 0, 0)).count
        if count > there:
            audit.find(
                "epoch", f"epochs of occupation {occupation}: there are {there}, the recorder had stored {count}"
            )


def _packs(audit: Audit) -> dict[int, _Numbers]:
    """Every pack, decoded once. A book of the first version has no such table."""
    found: dict[int, _Numbers] = {}
    packed: Counter[int] = Counter()
    connection = audit.connection
    if not connection.execute("SELECT 1 FROM sqlite_master WHERE name = 'epoch_pack'").fetchone():
        return found
    ended = {occupation for occupation, _, _ in audit.by_occupation("end")}
    for occupation, *columns in connection.execute(
        f"SELECT occupation, {_PACK_COLUMNS} FROM epoch_pack ORDER BY rowid"  # noqa: S608 - a constant
    ):
        audit.in_time("epoch")
        pack = epoch_packs.Pack(*columns)
        where = f"the pack of epochs {pack.first} to {pack.last} of occupation {occupation}"
        try:
            epoch_packs.unpacked(pack)
        except (ValueError, TypeError, OverflowError, MemoryError) as error:
            audit.find("epoch", connect.printable(f"{where}: {error}"))
            continue
        packed[occupation] += pack.count
        if packed[occupation] > epoch_packs.MOST_PACKED:
            audit.find("epoch", f"{where}: more epochs are packed than any writer packs")
        if occupation not in ended:
            audit.find("epoch", f"{where}: the occupation has not ended")
        before = found.get(occupation)
        if before and pack.first != before.last + 1:
            audit.find("epoch", f"{where}: the pack before it ends with epoch {before.last}")
        found[occupation] = _Numbers(packed[occupation], before.first if before else pack.first, pack.last)
    return found


def _rows(audit: Audit, found: dict[int, _Numbers]) -> None:
    """The rows, counted to what is packed."""
    origins = {occupation for occupation, _, _ in audit.by_occupation("origin")}
    for occupation, count, first, last, placed in audit.connection.execute(
        "SELECT occupation, count(*), min(number), max(number),"
        " count(latitude_offset_e8min) + count(longitude_offset_e8min) FROM epoch GROUP BY occupation"
    ).fetchall():
        where = f"epochs of occupation {occupation}"
        if placed and occupation not in origins:
            audit.find("epoch", f"{where}: they have positions and no origin")
        before = found.get(occupation)
        if before and first != before.last + 1:
            audit.find("epoch", f"{where}: packs end with {before.last}, rows begin with {first}")
        packed = before or _Numbers(0, first, last)
        found[occupation] = _Numbers(packed.count + count, packed.first, last)


def _forms(audit: Audit) -> None:
    connection = audit.connection
    forms, used = "SELECT occupation, form FROM epoch_form", "SELECT DISTINCT occupation, form FROM epoch"
    for row in connection.execute(f"{used} EXCEPT {forms} LIMIT 5").fetchall():
        audit.find("epoch", f"epochs of occupation {row[0]} name form {row[1]}, which is missing")
    for row in connection.execute(f"{forms} EXCEPT {used} LIMIT 5").fetchall():
        audit.find("epoch", f"form {row[1]} of occupation {row[0]} belongs to no epoch")
    for occupation, form, *texts in connection.execute(
        "SELECT occupation, form, source, talker, code, station, datum FROM epoch_form"
    ):
        if any(text is not None and not _is_text(text) for text in texts):
            audit.find("epoch", f"form {form} of occupation {occupation} holds a damaged text")


def _is_text(value: object) -> bool:
    return isinstance(value, str) and not any("\ud800" <= letter <= "\udfff" for letter in value)
