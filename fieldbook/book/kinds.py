"""Which entries there are, and what their bodies must hold (DEVELOPERS.md section 2).

Checked when an entry is written, never when it is read: a later version may add kinds and keys, and an older
program must still read what it knows.
"""

from __future__ import annotations

from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree, normalised

_INT: tuple[type, ...] = (int,)
_TEXT: tuple[type, ...] = (str,)
_TREE: tuple[type, ...] = (dict,)
_LIST: tuple[type, ...] = (list,)
_BOOL: tuple[type, ...] = (bool,)
_INT_OR_NONE: tuple[type, ...] = (int, type(None))
_TEXT_OR_NONE: tuple[type, ...] = (str, type(None))
_ANY: tuple[type, ...] = (object,)

MAX_BODY_BYTES = 8 * 1024 * 1024

KINDS: dict[str, dict[str, tuple[type, ...]]] = {
    "book": {"id": _TEXT, "format": _INT, "program": _TEXT, "migrations": _LIST},
    "migrated": {"migrations": _LIST},
    "session": {"tree": _TREE},
    "mark": {"name": _TEXT},
    "occupation": {
        "occupation": _INT,
        "mark": _TEXT,
        "session": _TREE,
        "link": _TEXT,
        "simulated": _BOOL,
    },
    "origin": {"occupation": _INT, "latitude_e8min": _INT, "longitude_e8min": _INT},
    "date": {"occupation": _INT, "date": _TEXT, "source": _TEXT},
    "recorder": {"occupation": _INT, "state": _TEXT, "program": _TEXT},
    "gap": {"occupation": _INT, "reason": _TEXT},
    "resumed": {"occupation": _INT},
    "raw": {
        "occupation": _INT,
        "chunk": _INT,
        "first_id": _INT,
        "last_id": _INT,
        "items": _INT,
        "bytes": _INT,
        "sha256": _TEXT,
        "stored_sha256": _TEXT,
    },
    "packed": {
        "occupation": _INT,
        "first_chunk": _INT,
        "last_chunk": _INT,
        "codec": _TEXT,
        "bytes": _INT,
        "sha256": _TEXT,
    },
    "end": {
        "occupation": _INT,
        "by": _TEXT,
        "epochs": _INT,
        "received_bytes": _INT,
        "received_sha256": _TEXT,
    },
    "height": {"occupation": _INT, "method": _TEXT, "value": _TEXT, "unit": _TEXT, "when": _TEXT},
    "setup": {"occupation": _INT},
    "remark": {"occupation": _INT_OR_NONE, "text": _TEXT},
    "decision": {"occupation": _INT, "reason": _TEXT},
    "finding": {"occupation": _INT_OR_NONE, "code": _TEXT, "severity": _TEXT, "text": _TEXT},
    "alarm": {"occupation": _INT_OR_NONE, "code": _TEXT, "text": _TEXT, "acknowledged": _BOOL},
    "request": {"occupation": _INT, "action": _TEXT},  # asks the running recorder
    "strike": {"seq": _INT, "reason": _TEXT},
    "operation": {"occupation": _INT, "steps": _LIST},
    "local_grid": {"name": _TEXT, "frame": _TEXT, "tilt": _BOOL, "source": _TEXT, "marks": _LIST},
    "certificate": {"number": _TEXT, "facts": _TREE, "digest": _TEXT},
    "draft": {"facts": _TREE, "digest": _TEXT},
    "rescued": {"from": _TREE, "carried": _LIST, "occupations": _LIST, "certificates": _LIST},
    "withdrawn": {"reason": _TEXT, "original": (dict, type(None))},
    "rendered": {"digest": _TEXT, "format": _TEXT, "name": _TEXT, "sha256": _TEXT},
    "key": {"name": _TEXT, "algorithm": _TEXT, "public_key": _TEXT, "fingerprint": _TEXT},
    "signature": {"seq": _INT, "hash": _TEXT, "fingerprint": _TEXT, "signature": _TEXT},
}

DECISIONS = (
    "date",
    "rollover_weeks",
    "datum",
    "talker",
    "initialisation",
    "operation",
    "accuracy_over_limit",
    "outside_area",
    "outside_hull",
    "grid_file",
    "height_difference",
    "not_met",
)

# What an observer wrote and may take back. What a machine wrote (bytes, gaps, findings, ends) stands, and a
# certificate is superseded, not struck.
STRIKABLE = frozenset(
    {"session", "mark", "occupation", "height", "setup", "remark", "decision", "local_grid", "strike"}
)


def checked_body(kind: str, body: Tree) -> Tree:
    """The body with texts in NFC and Decimals as text.

    Raises:
        UsageError: unknown kind, a missing key, a value of the wrong type, a float, or a text without UTF-8.
    """
    needed = KINDS.get(kind)
    if needed is None:
        raise UsageError(f"'{kind}' is no kind of entry.", f"Use one of: {', '.join(sorted(KINDS))}.")
    try:
        tree: Tree = normalised(body)
    except TypeError as error:
        raise UsageError(f"The entry '{kind}' cannot be stored: {error}.", "Write numbers as text.") from error
    for key, types in needed.items():
        value = tree.get(key)
        wrong = not isinstance(value, types) or (isinstance(value, bool) and bool not in types)
        if (key not in tree and types is not _ANY) or wrong:
            names = " or ".join("null" if item is type(None) else item.__name__ for item in types)
            raise UsageError(f"The entry '{kind}' needs '{key}' ({names}).", "Give it and try again.")
    if kind == "decision":
        _check_decision(tree)
    return tree


def _check_decision(tree: Tree) -> None:
    if not any(name in tree for name in DECISIONS):
        raise UsageError("The decision decides nothing.", f"Set one of: {', '.join(DECISIONS)}.")
    if "initialisation" in tree and not isinstance(tree.get("used"), bool):
        raise UsageError(
            "A decision on an initialisation needs 'used'.", "Set used=true or used=false beside its number."
        )
