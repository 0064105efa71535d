"""Sentences to epochs: which belong together, when an epoch is over, in what order epochs come out.

Strategy. The key of an epoch is its fix time of day in ms. A timed sentence with another key closes the open
group; one closed group is held until the next closes, so that a late RMC, GST, GLL or GBS still finds it. What
has no time (GSA, DTM) belongs to the group that is open, or else held. Days and codes are settled when a group
leaves, in order. Positions of RMC alone wait until it is clear that the source sends neither GGA nor GNS.
"""

from __future__ import annotations

from datetime import date

from fieldbook.model.epoch import Epoch, EpochFlag, SetAside
from fieldbook.nmea.dates import DayKeeper, date_at, difference_ms, nearness_ms
from fieldbook.nmea.groups import Group, Stated, complete, settle
from fieldbook.nmea.sentences import Counts, Gst, Heard, Rmc, rmc_heard
from fieldbook.nmea.sources import SourceWatch

MOST_IN_A_GROUP = 64
_QUALITY_COUNTER = [f"quality_{quality}" for quality in range(100)]
# plain integers: an operation of an IntFlag costs more than reading a field
_AFTER_BREAK = int(EpochFlag.AFTER_BREAK)
_DATE_JUMP = int(EpochFlag.DATE_JUMP)
_INCOMPLETE = int(EpochFlag.INCOMPLETE)
_MOST_UNTIMED = 8
_RMC_ONLY_AFTER = 5
_GLL_STAGGER_MS = 100
_DATE_NEAR_MS = 1500
_SECOND_MS = 1000


class Assembler:
    """Collects sentences into groups and gives out finished epochs through `out`."""

    def __init__(self, counts: Counts, talker: str | None, *, zero_is_a_place: bool) -> None:
        self.counts = counts
        self.days = DayKeeper()
        self.out: list[Epoch] = []
        self.step_ms: int | None = None
        self.emitted = 0
        self.open: Group | None = None
        self.serial = 0
        self._preferred = talker or "GN"
        self._zero_is_a_place = zero_is_a_place
        self._watch = SourceWatch(counts)
        self._held: Group | None = None
        self._monotonic_ms: int | None = None
        self._utc_ms: int | None = None
        self._gll: tuple[int, bool, str, list[str]] | None = None
        self._stated: Stated | None = None
        self._datum: str | None = None
        self._dops: tuple[int | None, int | None] | None = None
        self._seen_fix = False
        self._seen_position = False
        self._rmc_only = False
        self._waiting: list[tuple[Heard, list[Heard]]] = []
        self._last_date: date | None = None
        self._carried_flags = 0
        self._base_day: int | None = None
        self._last: tuple[int, int] | None = None  # day and time of the latest position that counted
        self._last_heard: list[Heard] = []
        self._last_step: int | None = None

    # -- what arrives -------------------------------------------------------------------------------------------

    def arrived(self, monotonic_ms: int | None, utc_ms: int | None) -> None:
        """Arrival of the bytes that the next sentences came with."""
        self._monotonic_ms, self._utc_ms = monotonic_ms, utc_ms

    @property
    def current(self) -> Group | None:
        """The group that a sentence without time belongs to."""
        return self.open or self._held

    def position(self, heard: Heard, key: int | None, flags: int) -> None:
        """A GGA or GNS."""
        if key is None:
            self._untimed(heard, flags)
            return
        heard.epoch.time_ms = key
        group = self._group_of_position(heard, key)
        heard.epoch.flags |= flags
        group.heard.append(heard)
        gll = self._gll
        if gll is not None and gll[3] == heard.place and group.gll_valid is None:
            self._take_gll(group, gll)

    def _group_of_position(self, heard: Heard, key: int) -> Group:
        group, held = self.open, self._held
        if group is None:
            if held is not None and held.key == key and len(held.heard) < MOST_IN_A_GROUP:
                return held
        elif group.key == key and len(group.heard) < MOST_IN_A_GROUP:
            return group
        elif heard.epoch.source == "GNS" and held is not None and held.key == key and held.heard:
            return held
        return self._begin(key)

    def _untimed(self, heard: Heard, flags: int) -> None:
        heard.timed = False
        heard.epoch.code = SetAside.NO_TIME.value
        heard.epoch.flags |= flags
        group = self.current
        if group is None or group.untimed >= _MOST_UNTIMED:
            self.flush()
            group = Group(None, self._monotonic_ms, self._utc_ms, self.serial)
            group.heard.append(heard)
            self._leave(group)
            return
        group.untimed += 1
        group.heard.append(heard)

    def rmc(self, rmc: Rmc, key: int, flags: int) -> None:
        """An RMC with its time."""
        changed = rmc.date is not None and self._last_date is not None and rmc.date != self._last_date
        group = self.timed(key, flags, even_back=changed)
        if group is None:
            return
        if rmc.date is not None:
            self._last_date = rmc.date
        if group.rmc is None or (rmc.talker == self._preferred != group.rmc.talker):
            group.rmc = rmc
        if not self._seen_position and len(group.rmcs) < MOST_IN_A_GROUP:
            group.rmcs.append(rmc)

    def gst(self, gst: Gst, key: int, flags: int) -> None:
        """A GST with its time."""
        group = self.timed(key, flags)
        if group is not None and (group.gst is None or (gst.talker == self._preferred != group.gst.talker)):
            group.gst = gst

    def timed(self, key: int, flags: int, *, even_back: bool = False) -> Group | None:
        """The group of a timed sentence that is no position; None = too late for its epoch."""
        group, held = self.open, self._held
        if group is not None and group.key == key:
            found = group
        elif held is not None and held.key == key:
            found = held
        else:
            latest = group or held
            back = latest is not None and latest.key is not None and difference_ms(key, latest.key) < 0
            if back and not even_back:
                self.counts["late"] += 1
                return None
            found = self._begin(key)
        found.flags |= flags
        return found

    def gll(self, key: int, talker: str, place: list[str], *, valid: bool) -> None:
        """A GLL: it never opens an epoch, it only says whether the one it belongs to is valid."""
        gll = (key, valid, talker, place)
        group, held = self.open, self._held
        for one in (group, held):
            if one is not None and one.key == key:
                self._take_gll(one, gll)
                return
        near = self._gll_stagger_ms()
        if group is not None and group.key is not None and nearness_ms(key, group.key) < near:
            self._take_gll(group, gll)
            return
        latest = self.current
        if latest is not None and place[0] and any(one.place == place for one in latest.heard):
            self._take_gll(latest, gll)
            return
        self._gll = gll

    def _gll_stagger_ms(self) -> int:
        return _GLL_STAGGER_MS if self.step_ms is None else min(_GLL_STAGGER_MS, (self.step_ms + 1) // 2)

    def _take_gll(self, group: Group, gll: tuple[int, bool, str, list[str]]) -> None:
        if group.gll_valid is None or (gll[2] == self._preferred != group.gll_talker):
            group.gll_valid, group.gll_talker = gll[1], gll[2]
        self._gll = None

    def dated(self, stated: Stated) -> None:
        """A date with the time it belongs to, for epochs that have none of their own."""
        if stated.source != "RMC" and not self._seen_fix:
            current = self.current
            if current is not None and current.heard and not current.has_fix:
                self.counts["untrusted_date"] += 1
                return
        self._stated = stated
        for group in (self.open, self._held):
            if group is not None:
                self._offer_date(group, stated)

    @staticmethod
    def _offer_date(group: Group, stated: Stated) -> bool:
        if group.key is None:
            return False
        near = nearness_ms(stated.time_ms, group.key)
        if near > _DATE_NEAR_MS:
            return False
        if group.stated is None or near < nearness_ms(group.stated.time_ms, group.key):
            group.stated = stated
        return True

    def datum(self, name: str | None) -> None:
        """A local datum from here on; None = WGS 84 again."""
        self._datum = name
        if name is not None and self.current is not None:
            self.current.datum = name

    def wants_dops(self) -> bool:
        """No GSA of the current epoch has given its DOPs yet."""
        group = self.current
        return self._dops is None if group is None else group.pdop_milli is None and group.vdop_milli is None

    def dops(self, pdop_milli: int | None, vdop_milli: int | None) -> None:
        """PDOP and VDOP of a GSA."""
        group = self.current
        if group is None:
            if pdop_milli is not None or vdop_milli is not None:
                self._dops = (pdop_milli, vdop_milli)
        else:
            group.pdop_milli, group.vdop_milli = pdop_milli, vdop_milli

    # -- opening and closing ------------------------------------------------------------------------------------

    def _begin(self, key: int) -> Group:
        self.close()
        self.serial += 1
        group = Group(key, self._monotonic_ms, self._utc_ms, self.serial, datum=self._datum)
        self.open = group
        if self._stated is not None and not self._offer_date(group, self._stated):
            self._stated = None  # else it would be taken for near again in 24 hours
        if self._gll is not None:
            distance = nearness_ms(self._gll[0], key)
            if distance < self._gll_stagger_ms():
                self._take_gll(group, self._gll)
            elif distance > _DATE_NEAR_MS:
                self._gll = None
        if self._dops is not None:
            group.pdop_milli, group.vdop_milli = self._dops
            self._dops = None
        return group

    def close(self) -> None:
        """The open epoch is over; it stays held for late sentences and the one held so far leaves."""
        if self.open is None:
            return
        if self._held is not None:
            self._leave(self._held)
        self._held, self.open = self.open, None

    def interrupted(self, *, incomplete: bool, after_break: bool) -> None:
        """The stream is cut here: nothing late can come, and nothing said before holds across the cut."""
        if self.open is not None and incomplete:
            self.open.flags |= _INCOMPLETE
        self.flush()
        self._gll = self._stated = self._dops = None
        if after_break:
            self._carried_flags |= _AFTER_BREAK

    def flush(self) -> None:
        """Both groups leave."""
        self.close()
        if self._held is not None:
            held, self._held = self._held, None
            self._leave(held)

    def finish(self) -> None:
        """End: both groups leave; a date or a lack of GGA that is certain only now is used."""
        self.flush()
        if self._stated is not None and self._seen_fix:
            self.days.learn_late(self._stated.date, self._stated.time_ms, self._stated.source)
        if not self._seen_position:
            self._give_waiting()

    # -- leaving ------------------------------------------------------------------------------------------------

    def _leave(self, group: Group) -> None:
        day = self._day_of(group)
        if group.heard:
            if not self._seen_position:
                self._seen_position = True
                self._discard_waiting()
            chosen, everyone = settle(group, self._preferred, self.counts)
        elif group.rmcs and not self._seen_position:
            group.heard = [rmc_heard(rmc, self.counts) for rmc in group.rmcs]
            for heard in group.heard:
                heard.epoch.time_ms = group.key
            chosen, everyone = settle(group, self._preferred, self.counts)
        else:
            if group.rmcs:
                self.counts["rmc_only_discarded"] += 1
            return
        if chosen is not None:
            if day is not None and group.key is not None:
                self._order(chosen, everyone, day, group.key)
            complete(group, chosen.epoch, zero_is_a_place=self._zero_is_a_place, counts=self.counts)
        flags = self._carried_flags | group.flags
        self._carried_flags = 0
        for heard in everyone:
            epoch = heard.epoch
            epoch.flags |= flags
            epoch.datum = group.datum
            epoch.received_monotonic_ms, epoch.received_utc_ms = group.monotonic_ms, group.utc_ms
            if heard.timed:
                epoch.day = day
        if self._seen_position or self._rmc_only:
            self._give(chosen, everyone)
            return
        assert chosen is not None  # noqa: S101 - an RMC without time never opens a group
        self._waiting.append((chosen, everyone))
        if len(self._waiting) >= _RMC_ONLY_AFTER:
            self._rmc_only = True
            self._give_waiting()

    def _day_of(self, group: Group) -> int | None:
        if group.key is None:
            return None
        if not self._seen_fix:
            self._seen_fix = group.has_fix
        stated, source = None, "RMC"
        if group.rmc is not None and group.rmc.date is not None:
            stated = group.rmc.date
        elif group.stated is not None:
            if self._seen_fix:
                source = group.stated.source
                stated = date_at(group.key, group.stated.date, group.stated.time_ms)
            else:
                self.counts["untrusted_date"] += 1
        day, jump = self.days.assign(group.key, stated, source)
        if jump:
            self.counts["date_jump"] += 1
            self._carried_flags |= _DATE_JUMP
            self._last = None
        return day

    def _order(self, chosen: Heard, everyone: list[Heard], day: int, key: int) -> None:
        """Time that goes back or stands still against the latest position; steps and gaps."""
        last = self._last
        if last is None or (day, key) > last:
            if chosen.epoch.quality == 0:
                return  # without a fix the time may be that of the receiver's own clock
            if last is not None and day - last[0] <= 1:
                self._learn_step(difference_ms(key, last[1]))
            self._last = (day, key)
            self._last_heard = everyone
            return
        for heard in everyone:
            if not heard.timed:
                continue
            if day == last[0] and max(key, last[1]) < _SECOND_MS:
                self.counts["repeated_second"] += heard is chosen
                heard.epoch.code = SetAside.DUPLICATE.value
            elif (day, key) == last:  # the group was cut: too many in it
                same = any(heard.text == earlier.text for earlier in self._last_heard)
                heard.epoch.code = SetAside.DUPLICATE.value if same else SetAside.CONFLICT.value
            else:
                heard.epoch.code = SetAside.TIME_BACK.value

    def _learn_step(self, difference: int) -> None:
        """The step is the difference that came twice running; a gap is more than 1.5 steps."""
        if difference <= 0:
            return
        step = self.step_ms
        if step is None:
            self.step_ms = difference
        elif difference != step:
            if difference == self._last_step:
                self.step_ms = difference
            elif 2 * difference > 3 * step:
                self.counts["gaps"] += 1
                self.counts["gap_ms"] += difference - step
        self._last_step = difference

    def _discard_waiting(self) -> None:
        if not self._waiting:
            return
        self.counts["rmc_only_discarded"] += len(self._waiting)
        for chosen, _ in self._waiting:
            self._carried_flags |= chosen.epoch.flags & (_AFTER_BREAK | _DATE_JUMP)
        self._waiting = []
        self._last = None
        self._last_heard = []

    def _give_waiting(self) -> None:
        waiting, self._waiting = self._waiting, []
        for chosen, everyone in waiting:
            self._give(chosen, everyone)

    def _give(self, chosen: Heard | None, everyone: list[Heard]) -> None:
        counts = self.counts
        if chosen is not None:
            if chosen.epoch.quality is not None:
                counts[_QUALITY_COUNTER[chosen.epoch.quality]] += 1
            if chosen.epoch.code is None:
                self._watch.add(chosen)
        for heard in everyone:
            epoch = heard.epoch
            self.emitted += 1
            epoch.number = self.emitted
            if epoch.day is not None:
                if self._base_day is None:
                    self._base_day = epoch.day
                epoch.day -= self._base_day
            if epoch.code is not None:
                counts[epoch.code] += 1
            self.out.append(epoch)

    @property
    def base_day(self) -> int | None:
        """The day keeper's index of the occupation's day 0; None until an epoch with time has come out."""
        return self._base_day
