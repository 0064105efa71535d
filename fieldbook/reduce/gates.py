"""Gates an epoch passes alone: what the requirement, the receiver's own flags and its fields say against it.

Strategy: one pass over columns, no state. Codes are assigned from the last gate to the first, so that each epoch
ends with the FIRST reason that applies, in the contract's order. What a receiver does not send is never a reason:
the gate is not applied, and the epochs concerned are counted for a finding.
"""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from fieldbook.model.session import Requirement
from fieldbook.reduce.columns import CODE_NUMBER, MISSING, SOURCES, EpochColumns
from fieldbook.reduce.fix_classes import QUALITIES_WITH_CORRECTIONS

Codes = NDArray[np.uint8]
Flags = NDArray[np.bool_]

GST_LIMIT_E5M = 100 * 10**5  # a sigma over 100 m is no position

NO_TIME, DATE_UNKNOWN = CODE_NUMBER["no_time"], CODE_NUMBER["date_unknown"]
TIME_BACK, DUPLICATE, CONFLICT = CODE_NUMBER["time_back"], CODE_NUMBER["duplicate"], CODE_NUMBER["conflict"]


@dataclass(frozen=True)
class Limits:
    """Limits of the requirement; None = not stated, no gate. Ages in ms, DOP in 0.001, as in the columns."""

    accept_quality: tuple[int, ...]
    max_hdop_milli: float | None = None
    max_pdop_milli: float | None = None
    max_age_ms: float | None = None
    min_satellites: int | None = None
    datum_confirmed: str | None = None  # DTM local datum code the operator has confirmed

    @classmethod
    def of(cls, requirement: Requirement, datum_confirmed: str | None = None) -> Limits:
        """From the session's requirement and the confirmed datum code (receiver table or decision)."""
        return cls(
            tuple(requirement.accept_quality),
            _scaled(requirement.max_hdop),
            _scaled(requirement.max_pdop),
            _scaled(requirement.max_correction_age_s),
            requirement.min_satellites,
            datum_confirmed,
        )


def _scaled(value: float | None) -> float | None:
    # 3.0 -> 3000, and 0.7 -> 700 rather than 699.999...: the fields are integers of that unit
    return None if value is None else round(value * 1000, 6)


def accepted(columns: EpochColumns, limits: Limits) -> Flags:
    """Epochs whose quality is one of the accepted ones (0 and unknown never are), shape (n,)."""
    quality = columns.quality
    return np.isin(quality, [item for item in limits.accept_quality if item > 0])


def gate_codes(columns: EpochColumns, limits: Limits) -> tuple[Codes, Counter[str]]:
    """Code of each epoch (0 = nothing against it), and for how many epochs a gate could not be applied.

    The decoder's own reason counts with its place in the order, `date_unknown` apart: whether the date is known
    is judged when the occupation is evaluated.
    """
    codes = np.zeros(len(columns), dtype=np.uint8)
    quality, code = columns.quality, CODE_NUMBER
    codes[_beyond_gst(columns)] = code["gst"]
    codes[_over(columns.hdop_milli, limits.max_hdop_milli)] = code["dop"]
    codes[_over(columns.pdop_milli, limits.max_pdop_milli)] = code["dop"]
    if limits.min_satellites is not None:
        few = (columns.satellites != MISSING) & (columns.satellites < limits.min_satellites)
        codes[few] = code["satellites"]
    corrected = np.isin(quality, QUALITIES_WITH_CORRECTIONS)
    codes[_over(columns.age_ms, limits.max_age_ms) & corrected] = code["age"]
    codes[_foreign_datum(columns, limits)] = code["datum"]
    codes[~accepted(columns, limits)] = code["quality"]
    unknown = quality == MISSING
    codes[(quality == 0) | (unknown & (columns.source != SOURCES["RMC"]))] = code["no_fix"]
    codes[(columns.latitude_e8min == MISSING) | (columns.longitude_e8min == MISSING)] = code["no_position"]
    decoder = np.where(columns.code == DATE_UNKNOWN, 0, columns.code).astype(np.uint8)
    codes = np.where((decoder > 0) & ((codes == 0) | (decoder < codes)), decoder, codes)
    codes[columns.instant_ms == MISSING] = NO_TIME
    return codes, _not_applied(columns, limits, codes)


def _over(values: NDArray[np.int64], limit: float | None) -> Flags:
    if limit is None:
        return np.zeros(len(values), dtype=np.bool_)
    result: Flags = (values != MISSING) & (values > limit)
    return result


def _beyond_gst(columns: EpochColumns) -> Flags:
    sigmas = (columns.sigma_latitude_e5m, columns.sigma_longitude_e5m, columns.sigma_altitude_e5m)
    return (sigmas[0] > GST_LIMIT_E5M) | (sigmas[1] > GST_LIMIT_E5M) | (sigmas[2] > GST_LIMIT_E5M)


def _foreign_datum(columns: EpochColumns, limits: Limits) -> Flags:
    fine = [i for i, name in enumerate(columns.datums) if name == limits.datum_confirmed]
    result: Flags = (columns.datum != MISSING) & ~np.isin(columns.datum, fine)
    return result


def stated_gates(
    columns: EpochColumns, limits: Limits
) -> list[tuple[str, str, float | None, NDArray[np.int64], Flags]]:
    """Code, requirement key, limit, values, and the epochs that the gate concerns."""
    every = np.ones(len(columns), dtype=np.bool_)
    corrected = np.isin(columns.quality, QUALITIES_WITH_CORRECTIONS)
    return [
        ("age", "max_correction_age_s", limits.max_age_ms, columns.age_ms, corrected),
        ("satellites", "min_satellites", limits.min_satellites, columns.satellites, every),
        ("dop", "max_hdop", limits.max_hdop_milli, columns.hdop_milli, every),
        ("dop", "max_pdop", limits.max_pdop_milli, columns.pdop_milli, every),
    ]


def _not_applied(columns: EpochColumns, limits: Limits, codes: Codes) -> Counter[str]:
    found: Counter[str] = Counter()
    for code, key, limit, values, concerned in stated_gates(columns, limits):
        reached = (codes == 0) | (codes >= CODE_NUMBER[code])
        count = int(np.count_nonzero((values == MISSING) & reached & concerned)) if limit is not None else 0
        if count:
            found[key] += count
    return found
