"""Classes of fix: what is assumed of a position before the occupation itself can tell.

Strategy: one table, with reasons. In an occupation shorter than about five correlation times the scatter cannot
tell the uncertainty; the class does. These figures are WORKING VALUES chosen for this program, not a measured
property of any receiver: the stated 95 % of short occupations holds as far as they hold. A receiver's own field
test overrides them (`[receiver] class` of the session file).

The class follows the fix quality the receiver sends (GGA field 6). What is not 2, 4 or 5 counts as autonomous, the
worst class: nothing is ever taken for 'fixed' without the receiver saying so. Of several accepted qualities the
worst class among the kept epochs governs.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace

from fieldbook.model.session import FixClass

PRIOR_DOF = 4.0  # nu0: degrees of freedom the class is worth beside the data
FLOOR_SHARE = 0.45  # least uncertainty claimed = this share of the class sigma, see CLASSES
FLOOR_DOF = 8.0
GST_MOST = 10.0  # a receiver's own estimate beyond this many times the class is a finding, not a prior


@dataclass(frozen=True)
class ClassOfFix:
    """Prior of one kind of fix: standard deviations per axis in metres, correlation time in seconds.

    `margin` divides the requirement when the time still needed is solved: how far a prediction may be missed.
    """

    name: str
    horizontal_m: float  # east and north, each
    vertical_m: float
    correlation_s: float
    reason: str
    source: str
    margin: float
    stated: bool = False  # figures of a session file or of the user's settings, not of the table below

    @property
    def label(self) -> str:
        """Name for the budget; figures stated for this receiver carry their source."""
        return f"{self.name}; stated for this receiver: {self.source}" if self.stated else self.name

    @property
    def floor_enu_m(self) -> tuple[float, float, float]:
        """Least uncertainty claimed for this kind of fix, standard uncertainty per axis in metres.

        Base, ephemeris, slow atmosphere and initialisation: what one session cannot see of itself, however long.
        """
        horizontal = FLOOR_SHARE * self.horizontal_m
        return horizontal, horizontal, FLOOR_SHARE * self.vertical_m

    @property
    def sigma_enu_m(self) -> tuple[float, float, float]:
        """The class sigmas as east, north, up."""
        return self.horizontal_m, self.horizontal_m, self.vertical_m

    @property
    def is_rtk_fixed(self) -> bool:
        """Only here do wrong initialisations have a size of their own, whatever the class sigma."""
        return self.name == "RTK fixed"

    @property
    def uses_carrier_phase(self) -> bool:
        """Positions of carrier phases: only to these does the pattern of an antenna calibration apply."""
        return self.name in ("RTK fixed", "RTK float")


_WORKING = "working value of this program, drawn up with the simulated occupations it was tried on"

RTK_FIXED = ClassOfFix(
    "RTK fixed", 0.008, 0.015, 200.0,
    "usual single-base figure near the base, 8 to 10 mm and 15 to 20 mm at one sigma; carrier multipath turns over "
    "in minutes", f"{_WORKING}; size after NGS, User Guidelines for Single Base Real Time GNSS Positioning, p. 42 "
    "(second-hand)", 1.05,
)  # fmt: skip
RTK_FLOAT = ClassOfFix(
    "RTK float", 0.20, 0.35, 900.0,
    "decimetres that drift while the ambiguities converge; tried on simulated errors of this size, not on their converging",
    f"{_WORKING}; 0.1 to 0.5 m is common practice, no source", 1.15,
)  # fmt: skip
DIFFERENTIAL = ClassOfFix(
    "differential", 0.60, 1.00, 700.0,
    "code positions with corrections from the ground or a satellite: multipath of minutes, residual atmosphere",
    f"{_WORKING}; 0.3 to 0.8 m per axis is common practice, no source", 1.15,
)  # fmt: skip
AUTONOMOUS = ClassOfFix(
    "autonomous", 2.5, 4.0, 1500.0,
    "ionosphere, orbits and clocks uncorrected: errors of an hour's scale beside minutes of multipath",
    f"{_WORKING}; inside the 8 m and 13 m (95 %) of the GPS SPS Performance Standard, 5th ed. 2020 (from memory)",
    1.15,
)  # fmt: skip

CLASSES = (RTK_FIXED, RTK_FLOAT, DIFFERENTIAL, AUTONOMOUS)
_BY_QUALITY = {4: RTK_FIXED, 5: RTK_FLOAT, 2: DIFFERENTIAL}
QUALITIES_WITH_CORRECTIONS = (2, 4, 5)


def class_of_quality(quality: int | None) -> ClassOfFix:
    """Class of one GGA quality. PPS (3), dead reckoning, manual, simulator and unknown count as autonomous."""
    return AUTONOMOUS if quality is None else _BY_QUALITY.get(quality, AUTONOMOUS)


def governing_class(qualities: Iterable[int], override: FixClass | None = None) -> ClassOfFix:
    """The worst class among the qualities of the kept epochs, or the receiver's own field test in its place.

    Args:
        qualities: quality codes that occur; none at all gives autonomous.
        override: class of the session file; its figures replace sigma and correlation time, not the name.
    """
    found = [class_of_quality(item) for item in qualities]
    worst = max(found, key=lambda item: item.horizontal_m) if found else AUTONOMOUS
    if override is None:
        return worst
    return replace(
        worst,
        horizontal_m=override.horizontal_m,
        vertical_m=override.vertical_m,
        correlation_s=override.correlation_s,
        reason="stated for this receiver",
        source=override.source,
        stated=True,
    )


@dataclass(frozen=True)
class GstVerdict:
    """What became of the receiver's own accuracy estimate (median over the kept epochs), per direction.

    Verdicts: 'none' (not sent), 'used' (above the class, taken in its place), 'below' (more optimistic than the
    class: not believed), 'beyond' (over ten times the class: contradicts the fix quality, a finding).
    """

    horizontal_m: float | None
    vertical_m: float | None
    horizontal: str
    vertical: str


def with_receiver_estimate(
    fix_class: ClassOfFix, horizontal_m: float | None, vertical_m: float | None
) -> tuple[ClassOfFix, GstVerdict]:
    """The class, its sigma raised to the receiver's own median estimate where that is above it and below ten times.

    Args:
        fix_class: the governing class.
        horizontal_m: median of the larger of the latitude and longitude sigmas (GST), None = not sent.
        vertical_m: median of the altitude sigma.
    """
    at_horizontal = _judged(horizontal_m, fix_class.horizontal_m)
    at_vertical = _judged(vertical_m, fix_class.vertical_m)
    raised = fix_class
    if at_horizontal == "used" and horizontal_m is not None:
        raised = replace(raised, horizontal_m=horizontal_m)
    if at_vertical == "used" and vertical_m is not None:
        raised = replace(raised, vertical_m=vertical_m)
    return raised, GstVerdict(horizontal_m, vertical_m, at_horizontal, at_vertical)


def _judged(estimate_m: float | None, class_m: float) -> str:
    if estimate_m is None:
        return "none"
    if estimate_m <= class_m:
        return "below"
    return "used" if estimate_m < GST_MOST * class_m else "beyond"
