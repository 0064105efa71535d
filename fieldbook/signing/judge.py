"""What the signatures of a book show: which entries are covered, by which key, and what is missing.

A signature over entry n covers the entries 1 to n, because the hash of n depends on all of them. It is judged only as far
as the chain of hashes holds. Missed are

    a signature over another hash than the chain's     the entries since the last good signature were replaced
    entries of a name whose key was announced before   a signature taken off the end, or written without the key;
    and that no such key covers                        nobody but the holder of the key could tell the two apart

Not to be seen: entries cut off at the end together with their signatures, a book cut off before its first `key` entry or
made anew without one, and a signature at the end that covers only what the recorder wrote.

A rescued book holds the signatures of the damaged one as `withdrawn`: they are judged against the old hashes, as far as
those can be computed again, and cover nothing of the new chain; what is missing there was lost, not taken off.
"""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

from fieldbook.model.entry import Entry

from . import ed25519
from .keyring import Trust
from .message import ALGORITHM, entry_message, fingerprint, spoken
from .rescued import old_chain, old_entry

# What a person states under a name. `draft`, `rendered` and `request` bear the observer's name too, whoever asked for them;
# everything else is written by a recorder.
STATED = frozenset({"session", "mark", "occupation", "height", "setup", "remark", "decision", "strike", "certificate"})
MOST_NAMED = 10
_HEX = re.compile(r"[0-9a-f]+")


@dataclass(frozen=True)
class Line:
    """One sentence: holds or not, and since which entry if that can be said."""

    holds: bool
    text: str
    since_seq: int | None = None


@dataclass
class _Key:
    """One announced key."""

    seq: int
    name: str
    public: bytes
    good: int = 0  # signatures that fit
    covers: int = 0  # last entry that is covered
    old: int = 0  # last entry of the damaged book, from which this one was rescued, that is covered

    @property
    def fingerprint(self) -> str:
        return fingerprint(self.public)

    def words(self) -> str:
        return f"the key that calls itself {self.name}, fingerprint {spoken(self.fingerprint)}"


def judge(entries: Sequence[Entry], trust: Trust, total: int | None = None) -> list[Line]:
    """Judge the signatures of a book.

    Args:
        entries: entries 1, 2, ... as far as the chain holds.
        trust: what the user has said of keys.
        total: number of entries in the book, if it is more than the chain bears.
    """
    total = len(entries) if total is None else total
    rescued_at, old = old_chain(entries)
    keys: list[_Key] = []
    old_keys: list[_Key] = []
    wrong: list[Line] = []
    for entry in entries:
        if entry.seq < rescued_at:
            item = old_entry(entry)
            if item.kind == "key":
                wrong += _announce(item, old_keys)
            elif item.kind == "signature":
                wrong += _weigh_old(item, old, old_keys)
        elif entry.kind == "key":
            wrong += _announce(entry, keys)
        elif entry.kind == "signature":
            wrong += _weigh(entry, entries, keys)
    wrong += [_old_line(key, trust) for key in old_keys if key.old]
    if not any(entry.kind in ("key", "signature") for entry in entries[rescued_at:]):
        unsigned = Line(True, f"unsigned: no signature stands over any of {_counted(total)}")
        return [*wrong, unsigned, *_broken(entries, total)]
    lines = [*wrong, *_missed(entries[rescued_at:], keys)]
    for key in keys:
        lines.append(_key_line(key, keys, trust, total))
    covered = max((key.covers for key in keys), default=0)
    # the signatures at the very end are the last word themselves
    left = [entry for entry in entries[covered:] if not (entry.kind == "signature" and entry.seq > covered)]
    if left:
        kinds = ", ".join(sorted({entry.kind for entry in left}))
        which = (
            f"entry {left[0].seq} ({kinds}) is"
            if len(left) == 1
            else f"entries {left[0].seq} to {left[-1].seq} ({kinds}) are"
        )
        lines.append(Line(True, f"{which} covered by no signature"))
    return lines + _broken(entries, total)


def _counted(total: int) -> str:
    return f"its {total} entries" if total != 1 else "its one entry"


def _broken(entries: Sequence[Entry], total: int) -> list[Line]:
    if len(entries) >= total:
        return []
    text = f"the chain breaks at entry {len(entries) + 1}: what was signed from there on cannot be judged"
    return [Line(True, text, len(entries) + 1)]


def _announce(entry: Entry, keys: list[_Key]) -> Iterator[Line]:
    body = entry.body
    if body.get("algorithm") != ALGORITHM:
        yield Line(True, f"entry {entry.seq} announces a key of a kind this version does not know", entry.seq)
        return
    public = _bytes(body.get("public_key"), ed25519.PUBLIC_BYTES)
    name = body.get("name")
    sound = public is not None and name == entry.observer and body.get("fingerprint") == fingerprint(public)
    if not sound or public is None or ed25519.is_weak(public):
        yield Line(False, f"entry {entry.seq} announces a key that is none", entry.seq)
        return
    if not any(key.public == public and key.name == name for key in keys):
        keys.append(_Key(entry.seq, str(name), public))


def _weigh(entry: Entry, entries: Sequence[Entry], keys: list[_Key]) -> Iterator[Line]:
    """One signature: it fits, and then covers; or it does not."""
    since = max((item.covers for item in keys), default=0) + 1
    key, seq, signed_hash, problem = _read(entry, keys)
    if key is None or problem:
        yield Line(False, problem, since)
    elif entries[seq - 1].hash != signed_hash:
        text = (
            f"{key.words()} signed another entry {seq}: entries {since} to {seq} are not all those that were signed, and "
            "their hashes were computed anew, which damage does not do"
        )
        yield Line(False, text, since)
    else:
        key.good += 1
        key.covers = max(key.covers, seq)


def _weigh_old(entry: Entry, old: Mapping[int, str], keys: list[_Key]) -> Iterator[Line]:
    """A signature carried over from a damaged book."""
    key, seq, signed_hash, problem = _read(entry, keys)
    if key is None or problem:
        # the announcement of its key can have been lost with the damaged pages
        yield Line(key is None, f"{problem} (carried from a damaged book)", entry.seq)
    elif seq not in old:
        yield Line(
            True, f"what the signature of entry {entry.seq} was made over was lost with the damaged book", entry.seq
        )
    elif old[seq] != signed_hash:
        yield Line(False, f"{key.words()} signed another entry {seq} of the damaged book than is carried", seq)
    else:
        key.old = max(key.old, seq)


def _read(entry: Entry, keys: list[_Key]) -> tuple[_Key | None, int, str, str]:
    """(key, seq and hash that it signed, what is wrong: empty if the signature is the key's)."""
    body = entry.body
    key = next(
        (item for item in keys if item.fingerprint == body.get("fingerprint") and item.name == entry.observer), None
    )
    if key is None:
        return None, 0, "", f"the signature of entry {entry.seq} is of a key that no entry before it announces"
    seq, signed_hash = body.get("seq"), body.get("hash")
    signature = _bytes(body.get("signature"), ed25519.SIGNATURE_BYTES)
    if not isinstance(seq, int) or not 0 < seq < entry.seq or not isinstance(signed_hash, str) or signature is None:
        return key, 0, "", f"the signature of entry {entry.seq} is damaged"
    if not ed25519.fits(key.public, signature, entry_message(key.name, seq, signed_hash)):
        return key, 0, "", f"the signature of entry {entry.seq} was not made by {key.words()}"
    return key, seq, signed_hash, ""


def _bytes(value: object, size: int) -> bytes | None:
    if isinstance(value, str) and len(value) == 2 * size and _HEX.fullmatch(value):
        return bytes.fromhex(value)
    return None


def _missed(entries: Sequence[Entry], keys: list[_Key]) -> list[Line]:
    """Entries of an announced name that no key of that name covers."""
    missed = []
    for entry in entries:
        if entry.kind in STATED:
            announced = [key for key in keys if key.name == entry.observer and key.seq < entry.seq]
            if announced and all(key.covers < entry.seq for key in announced):
                missed.append((entry, announced[0]))
    lines = [
        Line(
            False,
            f"entry {entry.seq} ({entry.kind}) by {entry.observer} is not signed, though entry {key.seq} says that "
            f"{entry.observer} signs from there on: a signature was taken off, or it was written without the key "
            "(`fieldbook key sign` by its holder puts the latter right)",
            entry.seq,
        )
        for entry, key in missed[:MOST_NAMED]
    ]
    if len(missed) > MOST_NAMED:
        lines.append(Line(False, f"and {len(missed) - MOST_NAMED} more entries", missed[MOST_NAMED][0].seq))
    return lines


def _old_line(key: _Key, trust: Trust) -> Line:
    standing = trust.standing(key.name, key.public)
    text = f"entries of the damaged book up to {key.old}, where they are carried, are those signed by {key.words()}"
    return Line(not standing.suspicious, f"{text}; {standing.value}")


def _key_line(key: _Key, keys: list[_Key], trust: Trust, total: int) -> Line:
    standing = trust.standing(key.name, key.public)
    if key.good:
        number = f"{key.good} signature{'s' if key.good > 1 else ''}"
        text = f"entries 1 to {key.covers} of {total} are covered by {number} of {key.words()}; {standing.value}"
    else:
        text = f"{key.words()} is announced by entry {key.seq} and has signed nothing that holds; {standing.value}"
    earlier = [item for item in keys if item.name == key.name and item.seq < key.seq]
    if earlier and all(item.covers < key.seq for item in earlier):
        text += f"; an earlier key of that name (entry {earlier[0].seq}) has not signed this one"
    if standing.suspicious:
        text += ". Ask that person for the fingerprint before you rely on it"
    return Line(not standing.suspicious, text, key.seq if standing.suspicious else None)
