"""All that is said about one instant, and what becomes of the positions heard for it.

Strategy. Sentences of one fix time are collected in a Group in any order; `settle` then gives every heard
position sentence its code and merges into the one that counts what the others add. Reasons are set in the
contract's order. Judgements of quality (no fix, quality gate, age, DOP, sigmas, datum) are the reduction's;
it tests no_fix and quality before it takes over a `status` from here.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from datetime import date
from typing import NamedTuple

from fieldbook.model.epoch import Epoch, EpochFlag, SetAside
from fieldbook.nmea.sentences import Counts, Gst, Heard, Rmc
from fieldbook.nmea.tables import QUALITY_OF_MODE, best_mode_quality

# plain integers: an operation of an IntFlag costs more than reading a field
_GST_ZERO = int(EpochFlag.GST_ZERO)
_MODE_CONFLICT = int(EpochFlag.MODE_CONFLICT)
_POSITION = (
    "latitude_e8min",
    "latitude_decimals",
    "longitude_e8min",
    "longitude_decimals",
    "altitude_e5m",
    "altitude_decimals",
    "separation_e5m",
    "separation_decimals",
)
_ACCURACY = ("satellites", "hdop_milli", "age_ms", "station")
_COMPARED_MODES = frozenset("RFDA")
_REPEATED_SECOND_MS = 1000  # a receiver that has no 23:59:60 sends 00:00:00 twice


class Stated(NamedTuple):
    """A date, the time of day it belongs to, and the sentence that stated it."""

    time_ms: int
    date: date
    source: str


@dataclass(slots=True)
class Group:
    """One epoch while it is open or held."""

    key: int | None  # fix time of day in ms; None = a position sentence without time, standing alone
    monotonic_ms: int | None
    utc_ms: int | None
    serial: int
    heard: list[Heard] = field(default_factory=list)
    rmcs: list[Rmc] = field(default_factory=list)
    rmc: Rmc | None = None
    gst: Gst | None = None
    gll_valid: bool | None = None
    gll_talker: str = ""
    stated: Stated | None = None  # a date said close to this time
    datum: str | None = None
    pdop_milli: int | None = None
    vdop_milli: int | None = None
    untimed: int = 0
    flags: int = 0

    @property
    def has_fix(self) -> bool:
        """Some sentence of this epoch says that there is a position."""
        return (self.rmc is not None and self.rmc.valid) or any(one.epoch.quality for one in self.heard)


def settle(group: Group, preferred: str, counts: Counts) -> tuple[Heard | None, list[Heard]]:
    """The position that counts, and all position sentences of the group in order of hearing, merged ones left out.

    Codes no_time, duplicate and conflict are set here.
    """
    if len(group.heard) == 1:
        only = group.heard[0]
        return (only if only.timed else None), group.heard
    timed = [one for one in group.heard if one.timed]
    kept, merged = _without_merged_gns(timed, counts)
    chosen = _one_of(kept, preferred, group.key, counts)
    if chosen is not None and merged and chosen.epoch.source == "GGA":
        _merge_gns(chosen.epoch, merged, counts)
    left_out = {id(one) for one in merged}
    return chosen, [one for one in group.heard if id(one) not in left_out]


def _without_merged_gns(timed: list[Heard], counts: Counts) -> tuple[list[Heard], list[Heard]]:
    gns = [one for one in timed if one.epoch.source == "GNS"]
    others = [one for one in timed if one.epoch.source != "GNS"]
    if others and gns:
        counts["gns_merged"] += len(gns)
        return others, gns
    placed = [one for one in gns if one.epoch.latitude_e8min is not None]
    if placed and len(placed) < len(gns):  # one GNS per system, the position in the first only
        counts["gns_merged"] += len(gns) - len(placed)
        return placed, [one for one in gns if one.epoch.latitude_e8min is None]
    return timed, []


def _one_of(kept: list[Heard], preferred: str, key: int | None, counts: Counts) -> Heard | None:
    distinct: list[Heard] = []
    seen: set[bytes] = set()
    for one in kept:
        if one.text in seen:
            one.epoch.code = SetAside.DUPLICATE.value
        else:
            seen.add(one.text)
            distinct.append(one)
    if not distinct:
        return None
    chosen = next((one for one in distinct if one.epoch.talker == preferred), distinct[0])
    for one in distinct:
        if one is chosen:
            continue
        if key is not None and key < _REPEATED_SECOND_MS and one.epoch.talker == chosen.epoch.talker:
            counts["repeated_second"] += 1
            one.epoch.code = SetAside.DUPLICATE.value
        else:
            one.epoch.code = SetAside.CONFLICT.value
    return chosen


def _merge_gns(epoch: Epoch, merged: list[Heard], counts: Counts) -> None:
    """The position is the GGA's if it has a fix and at least as many decimals, else the GNS's; GGA quality wins."""
    gns = max(merged, key=lambda one: (one.epoch.latitude_e8min is not None, bool(one.epoch.quality)))
    other = gns.epoch
    if other.latitude_e8min is not None and (not epoch.quality or _decimals(other) > _decimals(epoch)):
        if not epoch.quality and not other.quality:
            return
        for name in _POSITION:
            setattr(epoch, name, getattr(other, name))
        epoch.source = "GNS"
        epoch.talker = other.talker
        counts["position_from_gns"] += 1
        if not epoch.quality:
            epoch.quality = other.quality
            for name in _ACCURACY:
                setattr(epoch, name, getattr(other, name))
            return
    if best_mode_quality(gns.modes) not in (None, epoch.quality):
        epoch.flags |= _MODE_CONFLICT
    for name in _ACCURACY:
        if getattr(epoch, name) is None:
            setattr(epoch, name, getattr(other, name))


def _decimals(epoch: Epoch) -> int:
    if epoch.latitude_decimals is None or epoch.longitude_decimals is None:
        return -1
    return min(epoch.latitude_decimals, epoch.longitude_decimals)


def complete(group: Group, epoch: Epoch, *, zero_is_a_place: bool, counts: Counts) -> None:
    """What the other sentences add to the position that counts; codes no_position and status."""
    gst = group.gst
    if gst is not None:
        epoch.sigma_latitude_e5m, epoch.sigma_longitude_e5m = gst.latitude, gst.longitude
        epoch.sigma_altitude_e5m = gst.altitude
        if gst.zero:
            epoch.flags |= _GST_ZERO
            counts["gst_zero"] += 1
    epoch.pdop_milli, epoch.vdop_milli = group.pdop_milli, group.vdop_milli
    rmc = group.rmc
    if rmc is not None and epoch.source != "RMC" and _contradicts(rmc.mode, epoch.quality):
        epoch.flags |= _MODE_CONFLICT
    if epoch.flags & _MODE_CONFLICT:
        counts["mode_conflict"] += 1
    if not zero_is_a_place and epoch.latitude_e8min == 0 and epoch.longitude_e8min == 0:
        counts["zero_position"] += 1
        epoch.latitude_e8min = epoch.longitude_e8min = None
        epoch.latitude_decimals = epoch.longitude_decimals = None
    if epoch.code is not None:
        return
    if epoch.latitude_e8min is None:
        epoch.code = SetAside.NO_POSITION.value
    elif epoch.quality and ((rmc is not None and not rmc.valid) or group.gll_valid is False):
        epoch.code = SetAside.STATUS.value


def _contradicts(mode: str, quality: int | None) -> bool:
    return quality is not None and mode in _COMPARED_MODES and QUALITY_OF_MODE[mode] != quality
