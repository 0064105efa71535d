"""The satellites of the latest cycle, for the sky view. Nothing of it enters a coordinate.

Strategy. GSV and GSA are most of a receiver's output and the view is asked for once a second, so sentences are
kept as received and read when asked. GSV messages wait in `held` and are looked at many at a time: whole sets in
their order, which is all that a sound link brings, are told by one expression. Message n of n makes a set complete, also when the numbering runs over
several talkers or signals; a lost part leaves the set out. A set that was not repeated while another one came
three times is gone.
"""

from __future__ import annotations

import re
from collections import deque
from collections.abc import Iterator

from fieldbook.model.epoch import Satellite
from fieldbook.nmea import fields
from fieldbook.nmea.sentences import Counts
from fieldbook.nmea.tables import SYSTEM_OF_ID, SYSTEM_OF_TALKER, satellite_identity

_MOST_MESSAGES = 32
_MOST_SETS = 64
_MOST_GSA = 32
_GONE_AFTER = 3
_MOST_HELD = 4096  # GSV messages that wait to be looked at
# `total,number,` of the messages of whole sets, one digit each: `1,1,`, `2,1,2,2,` and so on
_WHOLE_SETS = re.compile(
    b"(?:%s)*" % b"|".join(b"".join(b"%d,%d," % (total, n + 1) for n in range(total)) for total in range(1, 10))
)
_NUMBER_AFTER = [str(n + 1).encode("ascii") for n in range(_MOST_MESSAGES + 1)]


class Sky:
    """Collects GSV and GSA sentences; `satellites` reads them."""

    def __init__(self, counts: Counts) -> None:
        self._counts = counts
        self.held: list[bytes] = []
        self._cycle: list[bytes] = []
        self._total = b""
        self._complete: deque[list[bytes]] = deque(maxlen=_MOST_SETS)
        self._gsa: list[bytes] = []
        self._gsa_epoch = -1

    def tidy(self) -> None:
        """Look at the messages held, if they are many. Nothing depends on when this is called."""
        if len(self.held) >= _MOST_HELD:
            self.settle()

    def settle(self) -> None:
        """Look at the messages held: counters and sets are then what they say."""
        held = self.held
        if not held:
            return
        begin = 0
        while self._cycle and begin < len(held):
            self._gsv(held[begin])
            begin += 1
        heads = b"".join([text[7:11] for text in held[begin:]])
        whole = _WHOLE_SETS.match(heads)
        if whole is not None and len(heads) == 4 * (len(held) - begin):  # none of them was shorter
            begin += _start_of_last_sets(heads, whole.end() // 4)
        for text in held[begin:]:
            self._gsv(text)
        held.clear()

    def _gsv(self, text: bytes) -> None:
        """One GSV message."""
        total, number = text[7:8], text[9:10]
        if text[8:11:2] != b",,":  # two digits somewhere
            parts = text.split(b",", 3)
            if len(parts) < 4:
                self._counts["bad_gsv"] += 1
                return
            total, number = parts[1].lstrip(b"0"), parts[2].lstrip(b"0")
        if number == b"1":
            if self._cycle:
                self._counts["gsv_incomplete"] += 1
            self._cycle = [text]
            self._total = total
        else:
            cycle = self._cycle
            if not cycle or total != self._total or number != _NUMBER_AFTER[len(cycle)]:
                self._counts["gsv_incomplete"] += 1
                self._cycle = []
                return
            cycle.append(text)
        if number == total:
            self._complete.append(self._cycle)
            self._cycle = []
        elif len(self._cycle) >= _MOST_MESSAGES:
            self._cycle = []

    def _latest(self) -> list[list[bytes]]:
        """The newest set of each talker and signal, without those that are no longer sent."""
        newest: dict[tuple[bytes, bytes], list[bytes]] = {}
        times: dict[tuple[bytes, bytes], int] = {}
        for cycle in reversed(self._complete):
            last = cycle[-1]
            signal = last.rpartition(b",")[2] if (last.count(b",") - 3) % 4 == 1 else b""
            key = (cycle[0][:6], signal)
            if key not in newest:
                if times and max(times.values()) >= _GONE_AFTER:
                    continue
                newest[key] = cycle
            times[key] = times.get(key, 0) + 1
        return list(newest.values())

    def gsa(self, text: bytes, epoch: int) -> None:
        """One GSA of the epoch with this running number; a new epoch begins a new set."""
        if epoch != self._gsa_epoch:
            self._gsa_epoch = epoch
            self._gsa = [text]
        elif len(self._gsa) < _MOST_GSA:
            self._gsa.append(text)

    def satellites(self) -> list[Satellite]:
        """Every satellite in view once, with its strongest signal, ordered by system and number."""
        self.settle()
        used = set(self._used())
        best: dict[tuple[str, int], Satellite] = {}
        for texts in self._latest():
            for text in texts:
                for found in _read_gsv(text, used):
                    identity = (found.system, found.number)
                    old = best.get(identity)
                    if old is None or (found.cn0_dbhz or -1.0) > (old.cn0_dbhz or -1.0):
                        best[identity] = found
        return [best[identity] for identity in sorted(best)]

    def _used(self) -> Iterator[tuple[str, int]]:
        for text in self._gsa:
            parts = str(text, "ascii").split(",")
            slots = len(parts) - 6
            with_id = slots not in (12, 20, 24)
            system = SYSTEM_OF_TALKER.get(parts[0][1:3])
            if system is None and with_id:
                system = SYSTEM_OF_ID.get(parts[-1])
            for part in parts[3 : len(parts) - (4 if with_id else 3)]:
                number = fields.read_count(part, 3)
                if number:
                    yield satellite_identity(system, number)


def _start_of_last_sets(heads: bytes, end: int) -> int:
    """Which of the first `end` messages, all of whole sets, begins the last _MOST_SETS; the others would be dropped."""
    for _ in range(_MOST_SETS):
        if not end:
            break
        end -= heads[4 * end - 4] - ord("0")  # every message of a set bears its total
    return end


def _read_gsv(text: bytes, used: set[tuple[str, int]]) -> Iterator[Satellite]:
    parts = str(text, "ascii").split(",")
    system = SYSTEM_OF_TALKER.get(parts[0][1:3])
    for start in range(4, len(parts) - 3, 4):
        number = fields.read_count(parts[start], 3)
        if not number:
            continue
        identity = satellite_identity(system, number)
        strength = fields.read_decimal(parts[start + 3], 1)
        yield Satellite(
            system=identity[0],
            number=identity[1],
            elevation_deg=_degrees(parts[start + 1], 90),
            azimuth_deg=_degrees(parts[start + 2], 360),
            cn0_dbhz=strength[0] / 10 if strength and strength[0] > 0 else None,
            used=identity in used,
        )


def _degrees(text: str, most: int) -> int | None:
    found = fields.read_decimal(text, 0)
    return found[0] if found and -90 <= found[0] <= most else None
