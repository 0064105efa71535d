"""Recorded items to epochs: the one door of the decoder.

Strategy. A pure function of the items: no clock, no I/O; the timers compare recorded arrival times and a file
has none. The recorder writes nothing for silence, so in a stall the last two epochs stay inside until the next
item, or `finish`. Sentences are routed by their first seven bytes through a table that is filled as types
appear; a type whose content nobody needs costs its checksum and a count.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Callable
from dataclasses import dataclass
from datetime import UTC, date, datetime, timedelta

from fieldbook.model.epoch import Epoch, EpochFlag, Satellite
from fieldbook.model.item import Item, ItemKind
from fieldbook.nmea import fields, sentences
from fieldbook.nmea.dates import rollover_weeks
from fieldbook.nmea.epochs import Assembler
from fieldbook.nmea.framing import Damaged, Framer, Plain
from fieldbook.nmea.groups import Stated
from fieldbook.nmea.satellites import Sky
from fieldbook.nmea.sentences import Counts
from fieldbook.nmea.sources import near_zero, warnings_of
from fieldbook.nmea.tables import KNOWN_UNUSED, SYSTEM_OF_TALKER, WGS84_DATUMS

_SILENCE_MS = 300
_SILENCE_PERCENT_OF_STEP = 40
_FRAME_MS = 5000  # no `*hh` within this: truncated
_NO_NMEA_MS = 5000
_MOST_TYPES = 200
_ADDRESS_LENGTH = 5
_BREAKS = (ItemKind.LOST, ItemKind.DROPPED, ItemKind.STARTED)

Handler = Callable[[bytes, str], None]


@dataclass(frozen=True, slots=True)
class DecoderOptions:
    """What the session and decisions tell the decoder.

    `approximate`: latitude and longitude of the site in degrees; only near 0 N 0 E a position of zeros is one.
    `talker`: only position sentences of this talker are heard.
    """

    accept_without_checksum: bool = False
    talker: str | None = None
    approximate: tuple[float, float] | None = None


@dataclass(slots=True)
class _Route:
    name: str
    talker: str
    handle: Handler | None
    keep: Callable[[bytes], None] | None  # for what needs no handling now: it costs less than a handler
    category: str | None
    count: int = 0


class Decoder:
    """Items in, finished epochs out, in order. Never raises, whatever the bytes."""

    def __init__(self, options: DecoderOptions | None = None) -> None:
        self.options = options or DecoderOptions()
        self.rollover_weeks_suggested: int | None = None
        self._counts: Counts = defaultdict(int)
        self._framer = Framer()
        self._sky = Sky(self._counts)
        zero = near_zero(self.options.approximate)
        self._assembler = Assembler(self._counts, self.options.talker, zero_is_a_place=zero)
        self._handlers: dict[str, Handler] = {
            "GGA": self._gga,
            "GNS": self._gns,
            "RMC": self._rmc,
            "GST": self._gst,
            "GBS": self._key_only,
            "GRS": self._key_only,
            "GLL": self._gll,
            "ZDA": self._zda,
            "DTM": self._dtm,
            "GSA": self._gsa,
            "GSV": self._gsv,
        }
        self._routes: dict[bytes, _Route] = {}
        self._kinds: dict[tuple[str, str | None], _Route] = {}
        self._flags = 0
        self._time_text = ""
        self._time_ms: int | None = None
        self._monotonic_ms: int | None = None  # of the last bytes
        self._pending_times: tuple[int | None, int | None] = (None, None)
        self._used_without_checksum = 0
        self._waiting_since_ms: int | None = None
        self._silent = False
        self._checked_date: date | None = None
        self._utc_ms: int | None = None

    # -- items --------------------------------------------------------------------------------------------------

    def feed(self, item: Item) -> list[Epoch]:
        """The epochs that are finished once this item is known."""
        if item.kind is ItemKind.BYTES:
            self._bytes(item)
        else:
            self._event(item)
        return self._taken()

    def finish(self) -> list[Epoch]:
        """The epochs still inside. Feeding on afterwards is allowed and begins a new frame and a new epoch."""
        self._framer.finish()
        self._assembler.finish()
        if self._framer.received_bytes and not self.valid_sentences:
            self._silent = True
        return self._taken()

    def _taken(self) -> list[Epoch]:
        out, self._assembler.out = self._assembler.out, []
        return out

    def _event(self, item: Item) -> None:
        self._framer.reset()
        if item.kind is ItemKind.END:
            self._assembler.interrupted(incomplete=False, after_break=False)
            self._assembler.finish()
        else:
            breaks = item.kind in _BREAKS and self._framer.received_bytes > 0
            self._assembler.interrupted(incomplete=breaks, after_break=breaks)
        self._monotonic_ms = None
        self._waiting_since_ms = None
        if item.kind is ItemKind.LOST:
            self._counts["lost"] += 1
        elif item.kind is ItemKind.DROPPED:
            self._counts["dropped"] += 1

    def _bytes(self, item: Item) -> None:
        framer, assembler = self._framer, self._assembler
        now = item.monotonic_ms
        if now is not None:
            self._timers(now)
            self._utc_ms = item.utc_ms
        had_pending = framer.pending_bytes > 0
        found = framer.feed_plain(item.data)
        if had_pending and found:
            assembler.arrived(*self._pending_times)
            self._sentences(found[:1])
            del found[0]
            had_pending = False
        assembler.arrived(now, item.utc_ms)
        if found:
            self._sentences(found)
        if framer.pending_bytes and not had_pending:
            self._pending_times = (now, item.utc_ms)
        if now is not None:
            self._watch_silence(now)

    def _timers(self, now: int) -> None:
        last, self._monotonic_ms = self._monotonic_ms, now
        pending_since = self._pending_times[0]
        if self._framer.pending_bytes and pending_since is not None and now - pending_since > _FRAME_MS:
            self._framer.reset()
        if last is not None and self._assembler.open is not None:
            step = self._assembler.step_ms or 0
            if 100 * (now - last) > max(100 * _SILENCE_MS, _SILENCE_PERCENT_OF_STEP * step):
                self._assembler.close()

    def _watch_silence(self, now: int) -> None:
        if self._waiting_since_ms is None:
            self._waiting_since_ms = now
        self._silent = not self.valid_sentences and now - self._waiting_since_ms > _NO_NMEA_MS

    # -- sentences ----------------------------------------------------------------------------------------------

    def _sentences(self, found: list[Plain]) -> None:
        routes = self._routes
        all_good = self._framer.all_good
        for one in found:
            text = one[0]
            if not all_good:
                if type(one) is Damaged:
                    continue
                if not one[1]:
                    self._without_checksum(text)
                    continue
            route = routes.get(text[:7])
            if route is None:
                route = self._route(text)
            route.count += 1
            keep = route.keep
            if keep is not None:
                keep(text)
                continue
            handle = route.handle
            if handle is not None:
                handle(text, route.talker)
        self._sky.tidy()

    def _without_checksum(self, text: bytes) -> None:
        if not self.options.accept_without_checksum:
            return
        route = self._route(text)
        if route.category == "bad_address":
            return
        self._used_without_checksum += 1
        route.count += 1
        if route.handle is not None:
            self._flags = int(EpochFlag.NO_CHECKSUM)
            route.handle(text, route.talker)
            self._flags = 0

    def _route(self, text: bytes) -> _Route:
        """The route of an address not yet in the table; the number of types kept is bounded."""
        address = str(text[1:].partition(b",")[0], "ascii")
        name, talker, kind, category = _classify(text[:1], address)
        if kind not in self._handlers and category is None and kind not in KNOWN_UNUSED:
            category = "unknown_type"
        route = self._kinds.get((name, category))
        if route is None and len(self._kinds) >= _MOST_TYPES:
            name, category = "other", category or "unknown_type"
            route = self._kinds.get((name, category))
        if route is None:
            handler = self._handlers.get(kind) if category is None else None
            keep = self._sky.held.append if handler == self._gsv else None
            route = self._kinds[name, category] = _Route(name, talker, handler, keep, category)
        if len(address) == _ADDRESS_LENGTH and text[6:7] == b"," and route.name == name != "other":
            self._routes[text[:7]] = route
        return route

    def _time(self, text: str) -> int | None:
        if text == self._time_text:
            return self._time_ms
        found = fields.read_time(text)
        if found is None:
            if text:
                self._counts["bad_time"] += 1
            return None
        self._time_text, self._time_ms = text, found
        return found

    def _gga(self, text: bytes, talker: str) -> None:
        if self._is_deaf(talker):
            return
        heard, time_text = sentences.read_gga(text, talker, self._counts)
        self._assembler.position(heard, self._time(time_text), self._flags)

    def _gns(self, text: bytes, talker: str) -> None:
        if self._is_deaf(talker):
            return
        heard, time_text = sentences.read_gns(text, talker, self._counts)
        self._assembler.position(heard, self._time(time_text), self._flags)

    def _is_deaf(self, talker: str) -> bool:
        if self.options.talker is None or talker == self.options.talker:
            return False
        self._counts["other_talker"] += 1
        return True

    def _rmc(self, text: bytes, talker: str) -> None:
        rmc, time_text = sentences.read_rmc(text, talker, self._counts)
        key = self._time(time_text)
        if key is None:
            self._counts["rmc_no_time"] += 1
            return
        if rmc.date is not None and rmc.date != self._checked_date:
            self._check_rollover(rmc.date)
        if self.options.talker in (None, talker):
            self._assembler.rmc(rmc, key, self._flags)
        elif rmc.date is not None:  # another talker's position is not heard, the date is everybody's
            self._assembler.dated(Stated(key, rmc.date, "RMC"))

    def _check_rollover(self, stated: date) -> None:
        """A receiver past its firmware's 1024 weeks is suspected, never repaired here."""
        self._checked_date = stated
        if self._utc_ms is None:
            return
        try:
            host = (datetime(1970, 1, 1, tzinfo=UTC) + timedelta(milliseconds=self._utc_ms)).date()
        except OverflowError:
            return
        self.rollover_weeks_suggested = rollover_weeks(stated, host) or None

    def _gst(self, text: bytes, talker: str) -> None:
        gst, time_text = sentences.read_gst(text, talker, self._counts)
        key = self._time(time_text)
        if key is not None:
            self._assembler.gst(gst, key, self._flags)

    def _key_only(self, text: bytes, _talker: str) -> None:
        key = self._time(sentences.split(text, 2)[1])
        if key is not None:
            self._assembler.timed(key, self._flags)

    def _gll(self, text: bytes, talker: str) -> None:
        if self.options.talker not in (None, talker):
            return
        parts = sentences.split(text, 7)
        key = self._time(parts[5])
        if key is not None and parts[6] in ("A", "V"):
            self._assembler.gll(key, talker, parts[1:5], valid=parts[6] == "A")

    def _zda(self, text: bytes, _talker: str) -> None:
        parts = sentences.split(text, 5)
        stated = sentences.read_zda_date(parts, self._counts)
        key = self._time(parts[1])
        if key is not None and stated is not None:
            self._assembler.dated(Stated(key, stated, "ZDA"))

    def _dtm(self, text: bytes, _talker: str) -> None:
        name = sentences.split(text, 2)[1]
        if name:
            self._assembler.datum(None if name in WGS84_DATUMS else name)

    def _gsv(self, text: bytes, _talker: str) -> None:
        self._sky.held.append(text)

    def _gsa(self, text: bytes, _talker: str) -> None:
        assembler = self._assembler
        self._sky.gsa(text, assembler.serial)
        if assembler.wants_dops():
            assembler.dops(*sentences.read_gsa_dops(text, self._counts))

    # -- what is known ------------------------------------------------------------------------------------------

    @property
    def day0(self) -> date | None:
        """Date of day 0, once a trusted date has come; it never changes afterwards."""
        first, base = self._assembler.days.day0, self._assembler.base_day
        if first is None or base is None:
            return None
        try:
            return first + timedelta(days=base)
        except OverflowError:
            return None

    @property
    def day0_source(self) -> str | None:
        """What stated it: RMC or ZDA."""
        return self._assembler.days.source if self.day0 is not None else None

    @property
    def valid_sentences(self) -> int:
        """Sentences whose checksum held, or that were accepted without one."""
        return self._framer.good + self._used_without_checksum

    @property
    def step_ms(self) -> int | None:
        """The learned step between epochs."""
        return self._assembler.step_ms

    @property
    def sentences(self) -> dict[str, int]:
        """How often each address came with a good checksum (or was accepted without)."""
        found: dict[str, int] = {}
        for route in self._kinds.values():
            if route.count:
                found[route.name] = found.get(route.name, 0) + route.count
        return found

    @property
    def sky(self) -> list[Satellite]:
        """Satellites of the latest cycle."""
        return self._sky.satellites()

    @property
    def counters(self) -> dict[str, int]:
        """Every case and how often it came; cases that never came are left out, byte and frame counters are not."""
        framer = self._framer
        self._sky.settle()
        found = {
            "received_bytes": framer.received_bytes,
            "good_bytes": framer.good_bytes,
            "damaged_bytes": framer.damaged_bytes,
            "junk_bytes": framer.junk_bytes,
            "tag_bytes": framer.tag_bytes,
            "line_end_bytes": framer.line_end_bytes,
            "pending_bytes": framer.pending_bytes,
            **framer.counts,
            "used_without_checksum": self._used_without_checksum,
            "epochs": self._assembler.emitted,
        }
        for route in self._kinds.values():
            if route.category is not None:
                found[route.category] = found.get(route.category, 0) + route.count
        found.update({name: count for name, count in sorted(self._counts.items()) if count})
        return found

    @property
    def warnings(self) -> list[str]:
        """Codes of what the observer has to be told (see `sources.warnings_of`)."""
        return warnings_of(self._counts, self._assembler.emitted, self.rollover_weeks_suggested, silent=self._silent)


def _classify(start: bytes, address: str) -> tuple[str, str, str, str | None]:
    """(name to count under, talker, type, category of what is no receiver data)."""
    plain = address.isalnum() and address == address.upper()
    if not plain:
        return "other", "", "", "bad_address"
    if start == b"!":
        return f"!{address[:_ADDRESS_LENGTH]}", address[:2], address[2:], "encapsulated"
    if address[0] == "P" and not (address[:2] in SYSTEM_OF_TALKER and address[2:] in ("GSV", "GSA")):
        return address[:_ADDRESS_LENGTH], "P", address[1:], "proprietary"
    if len(address) != _ADDRESS_LENGTH:
        return address[: 2 * _ADDRESS_LENGTH], "", "", "unknown_type"
    if address[4] == "Q" and address[2] in "GBEIPQ":
        return address, address[:2], "", "query"
    return address, address[:2], address[2:], None
