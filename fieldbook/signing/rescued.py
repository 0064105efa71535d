"""A rescued book holds signatures of another chain: the hashes they were made over, computed again from what is carried.

`rescued` states the unbroken runs of the old chain; a carried entry has the old time, kind, text and observer, and
`withdrawn` holds the old entry whose place it takes. What does not recompute is left out: `verify` says so elsewhere.
"""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import replace

from fieldbook.model.canonical import Tree, canonical_json
from fieldbook.model.entry import Entry, entry_hash

Texts = tuple[str, str, str, str]  # utc, kind, body, observer


def old_chain(entries: Sequence[Entry]) -> tuple[int, dict[int, str]]:
    """(seq of the last `rescued` entry, old hash of each old entry that is carried); (0, {}) in any other book."""
    rescued = next((entry for entry in reversed(entries) if entry.kind == "rescued"), None)
    if rescued is None:
        return 0, {}
    found: dict[int, str] = {}
    try:
        texts = dict(_old_texts(entries[: rescued.seq - 1], rescued.body["from"].get("book")))
        for run in rescued.body["carried"]:
            found.update(_run(texts, run["first"], run["last"], run["previous_hash"], run["hash"]))
    except (KeyError, TypeError, ValueError, AttributeError):
        return rescued.seq, {}  # not in the form of its kind
    return rescued.seq, found


def _old_texts(entries: Sequence[Entry], first: Tree | None) -> list[tuple[int, Texts]]:
    found: list[tuple[int, Texts]] = []
    for entry in entries:
        original = first if entry.seq == 1 else entry.body.get("original") if entry.kind == "withdrawn" else None
        if original is not None:
            found.append((entry.seq, (original["utc"], original["kind"], original["body"], original["observer"])))
        elif entry.seq > 1 and entry.kind != "withdrawn":
            found.append((entry.seq, (entry.utc, entry.kind, canonical_json(entry.body), entry.observer)))
    return found


def _run(texts: dict[int, Texts], first: int, last: int, previous: str, stated: str) -> dict[int, str]:
    hashes: dict[int, str] = {}
    for seq in range(first, min(last, max(texts, default=0)) + 1):
        if seq not in texts:
            return {}
        utc, kind, body, observer = texts[seq]
        previous = hashes[seq] = entry_hash(seq, utc, kind, body, observer, previous)
    return hashes if hashes.get(last) == stated else {}


def old_entry(entry: Entry) -> Entry:
    """The old entry whose place `withdrawn` takes, under the number it had; any other entry as it is."""
    original = entry.body.get("original") if entry.kind == "withdrawn" else None
    if not isinstance(original, dict):
        return entry
    try:
        body = json.loads(original["body"])
    except (KeyError, TypeError, ValueError, RecursionError):
        return entry
    if not isinstance(body, dict):
        return entry
    return replace(entry, kind=str(original.get("kind")), body=body, observer=str(original.get("observer")))
