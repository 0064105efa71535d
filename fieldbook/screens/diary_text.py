"""Every entry of the book as one line a person can read; unknown kinds show their content, never nothing."""

from __future__ import annotations

import json
from collections.abc import Callable

from fieldbook.model.canonical import Tree
from fieldbook.model.entry import Entry
from fieldbook.screens.plain import clean
from fieldbook.signing.message import spoken

OWN = frozenset(
    {"raw", "recorder", "origin", "date", "migrated", "operation", "rendered", "request", "packed", "signature"}
)  # written by the program


def entry_text(entry: Entry) -> str:
    """What the entry says."""
    body = entry.body
    maker = _TEXTS.get(entry.kind)
    if maker is None:
        return clean(json.dumps(body, ensure_ascii=False, sort_keys=True), 300)
    try:
        return clean(maker(body), 400)
    except (KeyError, TypeError, AttributeError):
        return clean(json.dumps(body, ensure_ascii=False, sort_keys=True), 300)


def _height(body: Tree) -> str:
    at = f" at {body['at']}" if body.get("at") else ""
    reader = f", read by {body['reader']}" if body.get("reader") else ""
    tape = f" tape {body['tape_offset_m']} m" if body.get("tape_offset_m") else ""
    return f"{body['method']} {body['value']} {body['unit']}{tape} {body['when']}{at}{reader}"


def _setup(body: Tree) -> str:
    parts = []
    for table, keys in body.items():
        if isinstance(keys, dict):
            # a calibration is a page of figures: its file says enough here
            parts += [
                f"{table}.{key} = {value['file'] if key == 'calibration' else value}" for key, value in keys.items()
            ]
    return "; ".join(parts)


def _decision(body: Tree) -> str:
    rest = ", ".join(f"{key} {value}" for key, value in body.items() if key not in ("occupation", "reason"))
    return f"{rest}: {body.get('reason', '')}"


def _occupation(body: Tree) -> str:
    return f"begins: {body['mark']} on {body['link']}" + (" (simulated)" if body.get("simulated") else "")


def _end(body: Tree) -> str:
    return f"ended by {body['by']}, {body.get('epochs')} epochs"


def _session(body: Tree) -> str:
    tree = body["tree"]
    assert isinstance(tree, dict)  # noqa: S101 - a TypeError would do as well; see entry_text
    readings = len(tree.get("setup", {}).get("height", []))
    return f"next: {tree['mark']['name']}, {tree['antenna']['model']}, {readings} height readings"


def _gap(body: Tree) -> str:
    return f"{body.get('reason')}: {body.get('seconds')} s without data"


def _document(body: Tree) -> str:
    number = body.get("number")
    old = f", supersedes {body['supersedes']}: {body.get('reason')}" if body.get("supersedes") else ""
    return f"{body.get('mark')}, {occupations_of(body)}" + (f", number {number}{old}" if number else "")


def occupations_of(body: Tree) -> str:
    """`occupation 2`, or `occupations 1, 2` where a document combines them."""
    if body.get("occupation") is not None:
        return f"occupation {body['occupation']}"
    return "occupations " + ", ".join(str(number) for number in body.get("occupations") or [])


_TEXTS: dict[str, Callable[[Tree], str]] = {
    "book": lambda body: f"begun with {body.get('program')}",
    "session": _session,
    "mark": lambda body: f"{body['name']}: {body.get('description', 'not described')}",
    "occupation": _occupation,
    "height": _height,
    "setup": _setup,
    "remark": lambda body: str(body["text"]),
    "decision": _decision,
    "strike": lambda body: f"strikes out entry {body['seq']}: {body['reason']}",
    "end": _end,
    "gap": _gap,
    "resumed": lambda body: f"recording again after {body.get('after_s')} s",
    "recorder": lambda body: f"recorder {body.get('state')}",
    "raw": lambda body: f"{body.get('bytes')} bytes sealed in chunk {body.get('chunk')}",
    "date": lambda body: f"{body.get('date')} by {body.get('source')}",
    "request": lambda body: f"asks the recorder to {body.get('action')}",
    "finding": lambda body: f"{body.get('severity')}: {body.get('text')}",
    "alarm": lambda body: f"{body.get('text')}" + (" (acknowledged)" if body.get("acknowledged") else ""),
    "certificate": _document,
    "draft": _document,
    "key": lambda body: f"{body['name']} signs from here on, fingerprint {spoken(str(body['fingerprint']))}",
    "signature": lambda body: f"signature over the entries up to {body['seq']}",
    "rescued": lambda body: f"salvaged from book {(body.get('from') or {}).get('id') or 'of unknown id'}",
    "withdrawn": lambda body: f"in place of an old entry: {body.get('reason')}",
    "rendered": lambda body: f"{body.get('format')} file {body.get('name')}",
}
