"""The product's own line on simulated epochs: `OccupationReducer`, identity frames, the reported point is the mark.

The set-up is made so that only the mean, the least uncertainty claimed for the class, and the resolution of the
received digits count: nothing else has a size above a micrometre in the budget.
"""

from __future__ import annotations

from dataclasses import dataclass
from datetime import date

import numpy as np
from coverage_simulator import Made, Place, epochs_of
from numpy.typing import NDArray

from fieldbook.check.findings import findings_of
from fieldbook.check.leave import Figures, leave_check
from fieldbook.model.reduction import Finding, Leave, Uncertainty
from fieldbook.model.session import (
    Antenna,
    Corrections,
    FixClass,
    FrameChoice,
    Job,
    Mark,
    Receiver,
    Requirement,
    Session,
    Setup,
)
from fieldbook.model.state import BookState, Occupation
from fieldbook.occupy.marks_combined import combine_marks
from fieldbook.reduce.occupation import OccupationReducer, Reduced

NOTHING_M = 1e-9
FRAME = FrameChoice("EPSG:7912", "EPSG:7912", receiver_epoch="observation", client_epoch="observation")


@dataclass
class Held:
    """A stated uncertainty and how far the stated position is from the truth."""

    uncertainty: Uncertainty
    gap_m: NDArray[np.float64]  # stated minus true, east, north, up

    @property
    def u95_m(self) -> NDArray[np.float64]:
        """Half-widths at 95 % of east, north, up."""
        return np.array([k * u for k, u in zip(self.uncertainty.k95_enu, self.uncertainty.u_enu_m, strict=True)])

    @property
    def circle(self) -> bool:
        """The stated circle holds the truth."""
        return float(np.hypot(*self.gap_m[:2])) <= self.uncertainty.horizontal95_m

    @property
    def ellipse(self) -> bool:
        """The stated 95 % ellipse holds the truth, from its printed semi-axes and azimuth."""
        axes = self.uncertainty.ellipse95
        azimuth = np.radians(axes.azimuth_deg)
        along = self.gap_m[0] * np.sin(azimuth) + self.gap_m[1] * np.cos(azimuth)
        across = self.gap_m[0] * np.cos(azimuth) - self.gap_m[1] * np.sin(azimuth)
        return bool((along / axes.major_m) ** 2 + (across / axes.minor_m) ** 2 <= 1)

    @property
    def vertical(self) -> bool:
        """The stated height interval holds the truth."""
        figure = self.uncertainty.vertical95_m
        return figure is not None and abs(float(self.gap_m[2])) <= figure


@dataclass
class Stated(Held):
    """What the product states of one occupation."""

    reduced: Reduced
    findings: list[Finding]
    leave: Leave


def occupation_of(
    quality: int, fix_class: FixClass | None = None, wanted_m: tuple[float, float] = (0.05, 0.1)
) -> Occupation:
    """An occupation as folded from a book, with nothing in it that has an uncertainty of its own."""
    session = Session(
        job=Job("Calibration", "R. Kell"),
        requirement=Requirement(wanted_m[0], wanted_m[1], (quality,), 1, initialisations=1, height_readings=None),
        frame=FRAME,
        corrections=Corrections("own base"),
        mark=Mark("S1"),
        antenna=Antenna("none"),
        setup=Setup("mark", "none", NOTHING_M, receiver_height_m=0.0, reading_sigma_m=NOTHING_M),
        receiver=Receiver("simulated", fix_class=fix_class),
    )
    return Occupation(
        1, "S1", session, 1, "2027-03-04T00:00:00.000Z", "R. Kell", "simulated", False, day0=date(2027, 3, 4)
    )


class Line:
    """One reduction that can be looked at more than once as epochs come in."""

    def __init__(
        self, made: Made, fix_class: FixClass | None = None, wanted_m: tuple[float, float] = (0.05, 0.1)
    ) -> None:
        self._made = made
        self._occupation = occupation_of(made.regime.quality, fix_class, wanted_m)
        self._reducer = OccupationReducer(self._occupation)
        self._pushed = 0

    def require(self, wanted_m: tuple[float, float]) -> None:
        """Another requirement, as a `setup` entry would bring."""
        self._occupation = occupation_of(
            self._made.regime.quality, self._occupation.session.receiver.fix_class, wanted_m
        )

    @property
    def place(self) -> Place:
        """The true mark."""
        return self._made.place

    def numbered(self, number: int) -> tuple[Occupation, Reduced]:
        """The occupation and its reduction as number so-and-so of a book."""
        self._occupation.number = number
        return self._occupation, self.at().reduced

    def at(self, seconds: float | None = None) -> Stated:
        """What is stated after the first `seconds` (None = all)."""
        stop = len(self._made.index) if seconds is None else self._made.first(seconds)
        if stop > self._pushed:
            self._reducer.push(epochs_of(self._made, self._pushed, stop))
            self._pushed = stop
        reduced = self._reducer.evaluate(self._occupation, [])
        return _stated(reduced, self._made.place, self._occupation)


def _stated(reduced: Reduced, place: Place, occupation: Occupation) -> Stated:
    position = reduced.reduction.receiver
    assert position.h_m is not None
    findings = findings_of(reduced, occupation)
    figures = Figures(
        reduced.horizontal, reduced.vertical, reduced.horizontal_forbidden_by, reduced.vertical_forbidden_by
    )
    leave = leave_check(occupation.session.requirement, reduced.reduction, figures, [], reduced.screened.gates)
    gap_m = place.gap_m(position.lat_deg, position.lon_deg, position.h_m)
    return Stated(reduced.reduction.uncertainty, gap_m, reduced, findings, leave)


def mark_of(lines: list[Line]) -> Held:
    """All occupations of one mark as the product combines them; the frame is the client's, which is the receiver's."""
    occupations, reductions = {}, []
    for number, line in enumerate(lines, start=1):
        occupation, reduced = line.numbered(number)
        occupations[number] = occupation
        reductions.append(reduced)
    state = BookState("simulated", 0, "", "2027-03-04T00:00:00.000Z", None, occupations)
    (mark,) = combine_marks(state, reductions, [])
    client, uncertainty = mark.client, mark.uncertainty_client
    assert client is not None
    assert client.h_m is not None
    assert uncertainty is not None
    assert len(mark.used) == len(lines), mark.not_combined
    return Held(uncertainty, lines[0].place.gap_m(client.lat_deg, client.lon_deg, client.h_m))
