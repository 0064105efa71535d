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
        """From `to_json`, ignoring keys of a later version."""
        tree: dict[str, Any] = json.loads(text)
        known = {item.name for item in dataclasses.fields(cls)}
        state = cls(**{key: value for key, value in tree.items() if key in known})
        state.sky = [item if isinstance(item, Satellite) else Satellite(**item) for item in state.sky]
        return state
