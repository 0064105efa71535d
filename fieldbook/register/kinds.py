"""Which entries a register has, and what their bodies must hold.

Checked when an entry is written, never when it is read: a later version may add kinds and keys.
"""

from __future__ import annotations

from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree, normalised

MAX_BODY_BYTES = 8 * 1024 * 1024

_TEXT: tuple[type, ...] = (str,)
_INT: tuple[type, ...] = (int,)
_LIST: tuple[type, ...] = (list,)
_TREE: tuple[type, ...] = (dict,)
_TEXT_OR_NONE: tuple[type, ...] = (str, type(None))

_ADDED: dict[str, tuple[type, ...]] = {
    "book": _TEXT,
    "path": _TEXT,
    "head_seq": _INT,
    "head_hash": _TEXT,
    "hashes": _TEXT,
    "versions": _TREE,
    "occupations": _LIST,
    "failed": _LIST,
    "marks": _TREE,
    "numbers": _TREE,
    "certificates": _LIST,
    "changes": _LIST,
}
KINDS: dict[str, dict[str, tuple[type, ...]]] = {
    "register": {"id": _TEXT, "format": _INT, "program": _TEXT, "migrations": _LIST},
    "migrated": {"migrations": _LIST},
    "added": _ADDED,  # one state of one book
    "elsewhere": _ADDED,  # a list of coordinates from elsewhere, in the same shape
    "same": {"marks": _LIST, "reason": _TEXT},
    "different": {"marks": _LIST, "reason": _TEXT},
    "reset": {"mark": _INT, "from_utc": _TEXT, "number": _INT, "reason": _TEXT},
    "separate": {"book": _TEXT, "occupation": _INT, "number": _INT, "reason": _TEXT},
    "exclude": {"book": _TEXT, "occupation": _INT, "reason": _TEXT},
    "name": {"mark": _INT, "name": _TEXT, "reason": _TEXT},
    "frame": {"frame": _TEXT, "epoch": _TEXT_OR_NONE, "reason": _TEXT},
    "rule": {"rule": _TEXT, "within_m": _TEXT, "reason": _TEXT},
    "published": {
        "number": _TEXT,
        "mark": _INT,
        "name": _TEXT,
        "place": _TREE,
        "datum_accuracy": _TREE,
        "between_accuracy": _TREE,
        "method": _TEXT,
        "evidence": _LIST,
        "supersedes": _TEXT_OR_NONE,
        "change": _TREE,
        "reason": _TEXT,
    },
    "withdrawn": {"mark": _INT, "number": _TEXT, "reason": _TEXT},
    "strike": {"seq": _INT, "reason": _TEXT},
}
DECISIONS = ("same", "different", "reset", "separate", "exclude", "name", "frame", "rule")
STRIKABLE = (*DECISIONS, "strike")


def checked_body(kind: str, body: Tree) -> Tree:
    """The body in canonical values.

    Raises:
        UsageError: unknown kind, missing key, wrong type, or something canonical bytes do not know.
    """
    if kind not in KINDS:
        raise UsageError(f'A register has no entry "{kind}".', "This is a fault of the program.")
    try:
        tree: Tree = normalised(body)
    except TypeError as error:
        raise UsageError(f"The entry '{kind}' cannot be stored: {error}.", "This is a fault of the program.") from error
    for key, types in KINDS[kind].items():
        value = tree.get(key)
        if key not in tree or not isinstance(value, types) or (isinstance(value, bool) and types == _INT):
            raise UsageError(f"The entry '{kind}' lacks a proper '{key}'.", "This is a fault of the program.")
    if "reason" in KINDS[kind] and not tree["reason"].strip():
        raise UsageError(f"A '{kind}' needs a reason.", "Give --reason.", code="no_reason")
    return tree
