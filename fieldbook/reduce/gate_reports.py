"""What the receiver reported of the values that gates limit: the evidence behind the gate lines of the leave check.

Strategy: one pass, the last report of each value carried from push to push, so that the tally does not depend on how the
epochs were cut. Receivers send DOP in sentences of their own, often every few seconds only: a report speaks for the epochs
of the next 30 s (common practice, no source; a satellite moves a quarter of a degree in that time).
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from fieldbook.reduce.columns import MISSING, EpochColumns, Ints
from fieldbook.reduce.gates import Codes, Flags, Limits, stated_gates

REPORT_HOLDS_MS = 30_000


@dataclass(frozen=True)
class GateTally:
    """Epochs that passed every gate, those the gate does not concern left out.

    shown: how many have a report within the limit, of their own or at most 30 s old. not_shown: how many have not.
    worst: largest DOP (0.001) or age (ms), or smallest number of satellites, among their own reports; None: no report.
    """

    shown: int = 0
    not_shown: int = 0
    worst: int | None = None


@dataclass
class GateReports:
    """Tallies of one occupation, by requirement key of every stated gate."""

    limits: Limits
    tallies: dict[str, GateTally] = field(default_factory=dict)
    _last: dict[str, tuple[int, bool]] = field(default_factory=dict)  # instant of the last report, within the limit?

    def push(self, columns: EpochColumns, codes: Codes) -> None:
        """Take in further epochs with their codes after the gates, in order of hearing."""
        for _, key, limit, values, concerned in stated_gates(columns, self.limits):
            if limit is None:
                continue
            smallest = key == "min_satellites"
            within = values >= limit if smallest else values <= limit
            passed = (codes == 0) & concerned
            shown = self._shown(key, columns.instant_ms, (values != MISSING) & concerned, within) & passed
            own = values[passed & (values != MISSING)]
            before = self.tallies.get(key, GateTally())
            known = [item for item in (before.worst,) if item is not None]
            if own.size:
                known.append(int(own.min() if smallest else own.max()))
            count, total = int(np.count_nonzero(shown)), int(np.count_nonzero(passed))
            self.tallies[key] = GateTally(
                before.shown + count,
                before.not_shown + total - count,
                None if not known else min(known) if smallest else max(known),
            )

    def _shown(self, key: str, instants: Ints, reported: Flags, within: Flags) -> Flags:
        """Whether the latest report up to each epoch is young enough and within the limit, shape (n,)."""
        reported = reported & (instants != MISSING)
        rows = np.where(reported, np.arange(len(instants)), -1)
        latest = np.maximum.accumulate(rows)
        instant, good = self._last.get(key, (MISSING, False))
        at = np.where(latest >= 0, instants[latest], instant)
        fine = np.where(latest >= 0, within[latest], good)
        # a date jump backwards makes an old report no younger
        young = (at != MISSING) & (np.abs(instants - np.where(at == MISSING, 0, at)) <= REPORT_HOLDS_MS)
        if latest.size and latest[-1] >= 0:
            self._last[key] = int(instants[latest[-1]]), bool(within[latest[-1]])
        result: Flags = fine & young & (instants != MISSING)
        return result
