"""What makes two certificates the same: digest, comparison, number.

The digest is the SHA-256 of the canonical facts without the digest (contract, sections 1 and 4) and without the signature
that is made over it. Facts are compared
without program versions, book head and issue: a newer program that finds the same figures issues nothing new.
"""

from __future__ import annotations

import copy
from typing import Any

from fieldbook.model import canonical
from fieldbook.model.canonical import Tree, normalised

SCHEMA = "fieldbook.certificate/1"
# Parts of the facts that say when and by which program, not what was found.
ISSUE_PARTS = ("digest", "signature", "document", "versions")
# Beside the facts, not among them: made from them.
ENVELOPE = ("digest", "signature")
BOOK_HEAD = ("head_seq", "head_hash")


def facts_digest(facts: Tree) -> str:
    """SHA-256 of the canonical facts without their digest, 64 lower-case hex digits."""
    return canonical.digest(bare(facts))


def bare(facts: Tree) -> Tree:
    """The facts themselves, without digest and signature."""
    return {key: value for key, value in facts.items() if key not in ENVELOPE}


def sealed(facts: Tree) -> Tree:
    """A copy of the facts carrying their digest, unsigned."""
    body = bare(normalised(facts))
    return {**body, "digest": facts_digest(body)}


def comparable(facts: Tree) -> Tree:
    """The facts that count when two certificates are compared."""
    tree: Tree = copy.deepcopy({key: value for key, value in facts.items() if key not in ISSUE_PARTS})
    book = tree.get("book")
    if isinstance(book, dict):
        for key in BOOK_HEAD:
            book.pop(key, None)
    return tree


def facts_equal(one: Tree, other: Tree) -> bool:
    """Whether two sets of facts say the same, whoever issued them and whenever."""
    return canonical.canonical_json(comparable(one)) == canonical.canonical_json(comparable(other))


def changed_parts(one: Any, other: Any, where: str = "", limit: int = 12) -> list[str]:
    """Dotted paths at which two trees differ, at most `limit`, in order of their names."""
    if isinstance(one, dict) and isinstance(other, dict):
        found: list[str] = []
        for key in sorted(set(one) | set(other)):
            path = f"{where}.{key}" if where else str(key)
            if key not in one or key not in other:
                found.append(path)
            else:
                found += changed_parts(one[key], other[key], path, limit)
            if len(found) >= limit:
                break
        return found[:limit]
    if isinstance(one, list) and isinstance(other, list) and len(one) == len(other):
        found = []
        for index, (left, right) in enumerate(zip(one, other, strict=True), 1):
            found += changed_parts(left, right, f"{where}[{index}]", limit)
            if len(found) >= limit:
                break
        return found[:limit]
    return [] if one == other and isinstance(one, bool) == isinstance(other, bool) else [where]


def certificate_number(book_id: str, running: int) -> str:
    """`3f2a91c0-1`: the first eight hex digits of the book's id, and the running number in that book."""
    return f"{book_id.replace('-', '')[:8].lower()}-{running}"
