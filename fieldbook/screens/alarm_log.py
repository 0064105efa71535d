"""Alarms that stay until somebody has seen them: an alarm that was over before anybody looked must not be lost.

A person looks at the screen now and then, from three metres, with gloves on. So an alarm that has begun stands in the head
line while it holds AND afterwards ('was ...') until it is acknowledged; beginning and acknowledgement are entries of the
book. What flickers for less than `SETTLE_MS` is no alarm. A reached requirement is told the same way, as good news.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace

from fieldbook.model.live import LiveView
from fieldbook.screens.head_words import Wrong, wrong_now

SETTLE_MS = 3_000  # a fix that is lost for one epoch, an age that peaks once: no reason to walk to the tripod
GOOD_CODE = "requirement_reached"


@dataclass(frozen=True)
class Alarm:
    """One alarm. holds: it is so now. since_ms: when it began, by the host's clock."""

    code: str
    text: str
    since_ms: int
    holds: bool = True
    recorded: bool = False  # the recorder has entered it itself

    @property
    def good(self) -> bool:
        """Good news, not a fault."""
        return self.code == GOOD_CODE


@dataclass
class AlarmLog:
    """The alarms of one open book."""

    standing: dict[str, Alarm] = field(default_factory=dict)
    _began: dict[str, int] = field(default_factory=dict)
    _seen: set[str] = field(default_factory=set)  # acknowledged while it still holds: not told again until it came back

    def look(self, view: LiveView | None, now_ms: int) -> list[Alarm]:
        """Take in a picture.

        Returns:
            Alarms that began with it, for the bell and the book.
        """
        now = {item.code: item for item in (*wrong_now(view), *_good(view))}
        self._began = {code: self._began.get(code, now_ms) for code in now}
        self._seen &= set(now)
        for code, alarm in self.standing.items():
            self.standing[code] = replace(alarm, holds=code in now, text=now[code].text if code in now else alarm.text)
        began = []
        for code, item in now.items():
            settled = item.at_once or now_ms - self._began[code] >= SETTLE_MS
            if code not in self.standing and code not in self._seen and settled:
                alarm = Alarm(code, item.text, self._began[code], recorded=item.recorded)
                self.standing[code] = alarm
                began.append(alarm)
        return began

    def acknowledge(self) -> list[Alarm]:
        """All that stand have been seen; those that still hold stay in the head line as what is so now."""
        seen = list(self.standing.values())
        self._seen |= {alarm.code for alarm in seen if alarm.holds}
        self.standing.clear()
        return seen

    def unseen(self) -> Sequence[Alarm]:
        """Those that nobody has acknowledged, faults first, in order of beginning."""
        return sorted(self.standing.values(), key=lambda alarm: (alarm.good, alarm.since_ms))


def _good(view: LiveView | None) -> list[Wrong]:
    if view is None or view.occupation is None or not view.occupation.open or view.reduction is None:
        return []
    leave = view.reduction.leave
    if leave is None or leave.verdict != "good to leave":
        return []
    return [Wrong(GOOD_CODE, "REQUIREMENT REACHED")]
