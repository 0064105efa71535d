"""The lines of the uncertainty budget of one occupation, each from what is known of this set-up.

In: the figures of the mean, the class of fix, the digits received, the antenna, the set-up, the corrections, the frame
operation. Out: `budget.Term`s. Two statements are made of them: the mark in the receiver's frame (what was measured)
and in the client's frame (the same plus what the frame operation states).

Sources: Type A and the least uncertainty claimed for a kind of fix: `correlated_mean`, `fix_classes`; rectangular
distributions: JCGM 100:2008, 4.3.7; the sizes of centring, pole and plumb line terms: as stated in the session, else
the line's note says where its figure comes from.
"""

from __future__ import annotations

import math
from collections.abc import Sequence

from fieldbook.model.reduction import Operation, OperationStep
from fieldbook.model.session import Corrections, Setup
from fieldbook.reduce.antenna import ASSUMED_READING_SIGMA_M, AntennaReduction
from fieldbook.reduce.budget import Term, Triple
from fieldbook.reduce.fix_classes import FLOOR_DOF

PPM_OF_DISTANCE = 1e-6
PLUMB_LINE_ARCSEC = 15.0  # deflection of the vertical, typical size; from memory, medium
MOTION = "motion"  # authority of a step that is a stated motion, not an operation of a register
COMMON_NOTE = "common to all occupations with this station and antenna"


def mean_term(u_enu_m: Triple, dof_enu: Triple, rho_en: float) -> Term:
    """Type A: the mean of the kept epochs with its correlation in time."""
    return Term("mean of the kept epochs", "A", "t", u_enu_m, dof_enu, rho_en=rho_en)


def floor_terms(floor_enu_m: Triple, label: str) -> list[Term]:
    """Least uncertainty claimed for this kind of fix: base, ephemeris, slow atmosphere, initialisation.

    Half of its variance is common to all occupations with this station and antenna, half belongs to this one. Both
    lines are ONE quantity of 8 dof (`group`), so they combine as if they stood in one line.
    """
    half = [None if value is None else value / math.sqrt(2) for value in floor_enu_m]
    u: Triple = (half[0], half[1], half[2])
    dof: Triple = (FLOOR_DOF, FLOOR_DOF, FLOOR_DOF)
    what = f"least uncertainty claimed for this kind of fix ({label})"
    return [
        Term(
            f"{what}: of this occupation", "B", "normal", u, dof, group="floor", note="one quantity with the next line"
        ),
        Term(f"{what}: of station and antenna", "B", "normal", u, dof, common=True, group="floor", note=COMMON_NOTE),
    ]


def resolution_terms(
    coordinate_u_en_m: tuple[float, float], altitude_u_m: float | None, separation_u_m: float | None
) -> list[Term]:
    """Resolution of the received digits: coordinates and altitude (averaged in part), separation (never)."""
    east, north = coordinate_u_en_m
    terms = [Term("resolution of the received coordinates", "B", "rectangular", (east, north, 0.0))]
    terms.append(Term("resolution of the received altitude", "B", "rectangular", (0.0, 0.0, altitude_u_m)))
    terms.append(
        Term(
            "resolution of the received geoid separation",
            "B",
            "rectangular",
            (0.0, 0.0, separation_u_m),
            common=True,
            note="the same for all occupations with this receiver; never averaged",
        )
    )
    return terms


def setup_terms(setup: Setup, antenna: AntennaReduction) -> list[Term]:
    """Height readings, centring, pole, phase centre, plumb line."""
    height_u_m = antenna.height.height_u_m
    if height_u_m is None and setup.reported_point == "mark":
        height_u_m = setup.reading_sigma_m or ASSUMED_READING_SIGMA_M  # the height keyed in was read too
    terms = [
        Term("readings of the antenna height", "B", "normal", (0.0, 0.0, height_u_m)),
        Term(f"centring ({setup.centring})", "B", "normal", (setup.centring_sigma_m, setup.centring_sigma_m, 0.0)),
    ]
    if setup.pole_length_m is not None and setup.bubble_arcmin is not None:
        # bubble anywhere within its circle: half-width length x angle on each axis, rectangular
        tilt_m = setup.pole_length_m * math.radians(setup.bubble_arcmin / 60) / math.sqrt(3)
        terms.append(Term("levelling of the pole", "B", "rectangular", (tilt_m, tilt_m, 0.0)))
    terms += [
        Term(line.source, "B", line.distribution, line.u_enu_m, common=True, note=line.note)
        for line in antenna.phase_centre.lines
    ]
    height_m = setup.receiver_height_m if setup.reported_point == "mark" else antenna.height.height_arp_m
    if height_m is not None:
        plumb_m = abs(height_m) * math.radians(PLUMB_LINE_ARCSEC / 3600)
        note = f"deflection of {PLUMB_LINE_ARCSEC:.0f} seconds taken, from memory"
        terms.append(
            Term(
                "plumb line against ellipsoidal normal", "B", "normal", (plumb_m, plumb_m, 0.0), common=True, note=note
            )
        )
    return terms


def station_terms(corrections: Corrections) -> list[Term]:
    """What the correction source adds: distance to the station, and the station's own coordinates, where stated."""
    terms = []
    if corrections.distance_m is not None:
        u_m = corrections.distance_m * PPM_OF_DISTANCE
        note = (
            "1 ppm of the distance, one sigma: NGS, User Guidelines for Single Base Real Time GNSS Positioning, p. 42"
        )
        source = f"distance to the correction station, {corrections.distance_m / 1000:.1f} km"
        terms.append(Term(source, "B", "normal", (u_m, u_m, u_m), note=note + " (second-hand)"))
    if corrections.u95_m is not None:
        u_m = corrections.u95_m / 1.959964
        source = f"coordinates of station {corrections.station or ''}".strip()
        note = f"stated as 95 %: {corrections.source or 'source not stated'}"
        terms.append(Term(source, "B", "normal", (u_m, u_m, u_m), common=True, note=note))
    return terms


def disagreement_term(half_width_enu_m: Sequence[float] | None) -> list[Term]:
    """Distance to initialisations that disagree, as a rectangular half-width (GUM 4.3.7)."""
    if half_width_enu_m is None:
        return []
    east, north, up = (abs(value) / math.sqrt(3) for value in half_width_enu_m)
    return [Term("initialisations that disagree", "B", "rectangular", (east, north, up))]


def operation_terms(operation: Operation) -> list[Term]:
    """Each step of the frame operation: its stated accuracy as one standard uncertainty per axis, common."""
    terms = []
    for step in operation.steps:
        if step.authority == MOTION:
            terms.append(_motion_term(step))
            continue
        accuracy_m = step.accuracy_m or 0.0
        note = "by definition" if accuracy_m == 0.0 else f"as stated by {step.authority}, probability not given"
        if step.remark:
            note = f"{note}. {step.remark}"
        terms.append(
            Term(
                f"frame operation {step.authority}:{step.code}{' inverse' if step.inverse else ''} {step.name}".strip(),
                "B",
                "as stated",
                (accuracy_m, accuracy_m, accuracy_m),
                common=True,
                note=note,
            )
        )
    return terms


def _motion_term(step: OperationStep) -> Term:
    """Uncertainty of the stated motion over the years between the epochs. Its name holds no dates: the same motion is the
    same error in every mark, to the size of the shorter time (`shared`)."""
    u_m = step.accuracy_m or 0.0
    how = "stated velocity" if step.code.startswith("velocity") else "plate model, which has no vertical motion"
    return Term(
        f"motion of the ground between the epochs, {step.code}",
        "B",
        "normal",
        (u_m, u_m, u_m),
        common=True,
        note=f"{how}; {step.name}; {step.remark}".rstrip("; "),
    )


def heaviest_source(found: list[Term], axes: tuple[int, ...]) -> str:
    """The budget line (lines of one group together) that weighs most on these axes, Type A apart."""
    weights: dict[str, float] = {}
    names: dict[str, str] = {}
    for number, term in enumerate(found):
        key = term.group or f"#{number}"
        names.setdefault(key, term.source.partition(": of ")[0] if term.group else term.source)
        weights[key] = weights.get(key, 0.0) + max((term.u_enu_m[axis] or 0.0) ** 2 for axis in axes)
    return names[max(weights, key=lambda key: weights[key])] if weights else ""
