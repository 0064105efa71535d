"""Audit of a rescued book: what it says it carries of the old one, computed again.

The unbroken runs of the old chain must give the hashes that are stated; a chunk that is called proven must have the
SHA-256 that an old `raw` entry states. That the old book was a true one, a rescued book cannot prove by itself: the last
hash of a run says so to whoever has it from elsewhere (a certificate, a copy).
"""

from __future__ import annotations

import json
from typing import TYPE_CHECKING

from fieldbook.model.canonical import Tree

from .salvage.plan import run_problems
from .salvage.write import old_texts

if TYPE_CHECKING:
    from .audit import Audit


def audit_rescued(audit: Audit) -> None:
    """Check every `rescued` entry."""
    for seq, body in audit.of("rescued"):
        try:
            _entry(audit, seq, body)
        except (KeyError, TypeError, ValueError, AttributeError) as error:  # no writer wrote that
            audit.find("rescued", f"entry {seq} is not in the form of its kind ({type(error).__name__})", seq)


def _entry(audit: Audit, seq: int, body: Tree) -> None:
    old_book = body["from"].get("book")
    rows = audit.connection.execute(
        "SELECT seq, utc, kind, body, observer FROM entry WHERE seq < ? ORDER BY seq", (seq,)
    ).fetchall()
    stored = old_texts(rows, old_book)
    for text in run_problems(body, stored):
        audit.find("rescued", f"entry {seq}: {text}", seq)
    _proven_chunks(audit, seq, body, stored)


def _proven_chunks(audit: Audit, seq: int, body: Tree, stored: dict[int, tuple[str, str, str, str]]) -> None:
    old = set()
    for _, kind, text, _ in stored.values():
        if kind == "raw":
            tree = json.loads(text)
            old.add((tree.get("occupation"), tree.get("sha256")))
    now = {(tree.get("occupation"), tree.get("chunk")): tree.get("sha256") for _, tree in audit.of("raw")}
    for occupation in body["occupations"]:
        number = occupation["occupation"]
        for chunks in occupation["chunks"]:
            for chunk in range(chunks["first"], chunks["last"] + 1) if chunks["proof"] == "chain" else ():
                if (number, now.get((number, chunk))) not in old:
                    text = f"chunk {chunk} of occupation {number} is called proven, but no old entry states its hash"
                    audit.find("rescued", f"entry {seq}: {text}", seq)
