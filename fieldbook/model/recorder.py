"""What a running recorder says of itself: one row of the book, overwritten at each commit, not chained."""

from __future__ import annotations

import dataclasses
import json
from dataclasses import dataclass, field
from typing import Any

from fieldbook.model.epoch import Satellite


@dataclass
class RecorderState:
    """Heartbeat and counters of the recorder, for screens, `status` and `watch`."""

    occupation: int
    mark: str = ""
    observer: str = ""
    program: str = ""
    pid: int = 0  # for information; liveness is the lock, never the pid
    link: str = ""
    link_state: str = "opening"  # opening, open, stale, lost, ended, closed
    link_reason: str = ""
    started_utc_ms: int = 0
    last_byte_utc_ms: int | None = None
    last_commit_utc_ms: int | None = None
    last_commit_took_ms: float | None = None
    received_bytes: int = 0
    epochs: int = 0
    waiting_bytes: int = 0  # in memory, not yet committed
    dropped_bytes: int = 0
    stopped: str = ""  # why the recorder stopped by itself
    disk_free_bytes: int | None = None
    disk_left_s: float | None = None  # of recording, at the measured rate
    backup_path: str = ""  # where copies go; empty: none are made
    backup_utc_ms: int | None = None  # the moment the last good copy shows the book at
    backup_problem: str = ""  # why there is no newer one
    alarms: list[str] = field(default_factory=list)
    counters: dict[str, int] = field(default_factory=dict)  # decoder counters
    sentences: dict[str, int] = field(default_factory=dict)  # "GNGGA" -> count
    sky: list[Satellite] = field(default_factory=list)
    # the latest closed epoch, for the head line
    fix_utc: str | None = None  # "2027-03-04T01:10:00.000Z" or "01:10:00" while the date is unknown
    quality: int | None = None
    satellites: int | None = None
    age_s: float | None = None
    hdop: float | None = None
    pdop: float | None = None
    station: str | None = None

    def to_json(self, **more: Any) -> str:
        """One line of JSON, with more keys if given: a reader that does not know them ignores them."""
        return json.dumps({**dataclasses.asdict(self), **more}, ensure_ascii=False, allow_nan=False)

    @classmethod
    def from_json(cls, text: str) -> RecorderState:
        """From `to_json`, ignoring keys of a later version. Nothing chains this row: each value is looked at.

        Raises:
            ValueError: no JSON object, or a value that no recorder writes.
        """
        tree: Any = json.loads(text, parse_constant=_no_number)
        if not isinstance(tree, dict) or type(tree.get("occupation")) is not int:
            raise ValueError("it names no occupation")
        known = {item.name: str(item.type) for item in dataclasses.fields(cls)}
        told = {key: value for key, value in tree.items() if key in known}
        for key, value in told.items():
            if not _fits(value, known[key]):
                raise ValueError(f"'{key}' is no {known[key]}")
        told["sky"] = [Satellite(**item) for item in told.get("sky", ())]
        return cls(**told)


def _no_number(text: str) -> float:
    raise ValueError(f"{text} is no number")


_SATELLITE = {item.name: str(item.type) for item in dataclasses.fields(Satellite)}
_INTEGERS = range(-(2**63), 2**63)


def _fits(value: object, wanted: str) -> bool:
    """Whether a value is of the type a field of this module is declared with."""
    if wanted.endswith(" | None"):
        return value is None or _fits(value, wanted.removesuffix(" | None"))
    match wanted:
        case "int":
            return type(value) is int and value in _INTEGERS
        case "float":
            return type(value) in (int, float) and abs(value) < 1e15  # type: ignore[arg-type]
        case "str":
            return isinstance(value, str)
        case "bool":
            return isinstance(value, bool)
        case "list[str]":
            return isinstance(value, list) and all(isinstance(item, str) for item in value)
        case "dict[str, int]":
            return isinstance(value, dict) and all(_fits(item, "int") for item in value.values())
        case "list[Satellite]":
            return isinstance(value, list) and all(map(_is_satellite, value))
    return False


def _is_satellite(value: object) -> bool:
    return (
        isinstance(value, dict)
        and value.keys() == _SATELLITE.keys()
        and all(_fits(item, _SATELLITE[key]) for key, item in value.items())
    )
