"""All occupations of a mark, from all books, as one coordinate: generalised least squares with everything common kept common.

The combination itself is `reduce.combine`, as within one book; what is new is where the occupations come from. It works in the
mark's frame with the budgets of the client's statement, so the covariance is that of the coordinate relative to the datum.
Two accuracies are stated and never mixed:

    relative to the datum     all lines, the common ones too: `datum`
    between marks             of the difference of two marks, where what both share drops out: `between_marks`

Robust fall-back. When the tests fail, least squares gives a wrong occupation its full weight. Of three or more the weighted
median per axis is taken then (breakdown point one half), and a line of the size of the scatter about it is added, not
reduced by the number: 1.4826 times the weighted median of |residual|. Of two nobody can tell which is wrong: the mean stands, with
the distance to the farther one as a rectangular half-width (GUM 4.3.7). Either way a finding stops the mark.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from fieldbook.check.repeats import GRADES, compare
from fieldbook.model.reduction import Finding, Repeat, Uncertainty
from fieldbook.reduce import frames
from fieldbook.reduce.budget import Combined, Term, Triple, combine, welch_satterthwaite
from fieldbook.reduce.combine import Combination, Input, combine_occupations, linear_form, printed_lines
from fieldbook.reduce.geodesy import covariance_to_xyz, geocentric, moved_by_enu
from fieldbook.reduce.region import coverage_factor_95
from fieldbook.reduce.stated import stated_uncertainty

from .evidence import Evidence, Matrix, Place
from .fold import Mark, RegisterState
from .members import (
    FRAME_OPERATION,
    MOTION,
    Apart,
    Member,
    chosen_members,
    circumstances,
    inputs_of,
    parties_of,
    requirement_of,
    same_epoch,
)
from .reading import evidence_by_key
from .store import Register

Floats = NDArray[np.float64]
LEAST_SQUARES = "generalised least squares with full covariance; what occupations share is not averaged"
MEDIAN = "weighted median per axis, because the occupations disagree; widened by their scatter"
WIDENED = "generalised least squares, widened by the distance of two occupations that disagree"
ONE = "one occupation"
DISAGREE = "occupations that disagree"
MAD_TO_SIGMA = 1.4826  # 1/Phi^-1(3/4): the median deviation of a normal law as its standard deviation
SEVERITIES = ("stop", "caution", "info")


@dataclass(frozen=True)
class Share:
    """One occupation in a combined mark. weight per axis; residual: occupation minus mark, metres."""

    label: str
    weight_enu: list[float]
    residual_enu_m: list[float | None]
    plan_significance: float
    height_significance: float | None
    transformed: tuple[str, ...]


@dataclass(frozen=True)
class HeightOf:
    """Height by the geoid model of the nearest evidence: H = h - N; vertical95_m None where N's uncertainty is unknown."""

    model: str
    model_sha256: str
    datum: str | None
    undulation_m: float
    undulation_u_m: float | None
    orthometric_m: float
    vertical95_m: float | None


@dataclass
class MarkValue:
    """A mark of the register with its coordinate, or the reason why it has none.

    datum: uncertainty relative to the datum. cov_own_m2, cov_common_m2: its geocentric covariance in two parts, 3 x 3, None without
    a height. repeats: pairs, numbered as `labels`. odd_one: label. inputs: for differences to other marks. coefficients: (n, 3).
    """

    mark: Mark
    place: Place | None
    datum: Uncertainty | None
    height: HeightOf | None
    method: str
    shares: list[Share]
    apart: tuple[Apart, ...]
    repeats: list[Repeat]
    labels: list[str]
    odd_one: str | None
    independence: str | None
    findings: list[Finding]
    parties: dict[str, list[str]]
    cov_own_m2: Matrix | None = None
    cov_common_m2: Matrix | None = None
    members: tuple[Member, ...] = ()
    coefficients: Floats = field(default_factory=lambda: np.zeros((0, 3)))
    terms: tuple[Term, ...] = ()


def combine_register(register: Register, only: Sequence[int] | None = None) -> list[MarkValue]:
    """Every mark of the register, or those named, in order of number.

    Raises:
        BookError: evidence is missing or damaged.
    """
    state = register.state()
    marks = [mark for number, mark in state.marks().items() if only is None or number in only]
    evidence = evidence_by_key(register, [held for mark in marks for held in mark.occupations])
    return [combine_mark(mark, evidence, state) for mark in marks]


def combine_mark(mark: Mark, evidence: Mapping[tuple[str, int], Evidence], state: RegisterState) -> MarkValue:
    """One mark. evidence: by `Held.key`, at least of its occupations."""
    found = [(held, evidence[held.key]) for held in mark.occupations]
    chosen = chosen_members(found, state.frame(), state.excluded())
    findings = list(chosen.findings)
    findings += [
        Finding("not_combined", "caution", f"Occupation {item.label} takes no part. {item.text}", {"why": item.code})
        for item in chosen.apart
    ]
    value = MarkValue(mark, None, None, None, "none", [], chosen.apart, [], [], None, None, findings, {})
    if chosen.members:
        _fill(value, chosen.members)
    else:
        findings.append(Finding("no_coordinate", "caution", "No occupation of this mark can be used.", {}))
    value.findings.sort(key=lambda item: SEVERITIES.index(item.severity))
    return value


def _fill(value: MarkValue, members: tuple[Member, ...]) -> None:
    inputs, requirement = inputs_of(members), requirement_of(members)
    found = combine_occupations(inputs)
    judged = compare(inputs, circumstances(members), requirement)
    labels = [item.held.label for item in members]
    value.members, value.coefficients, value.labels = members, found.weights, labels
    value.repeats, value.parties = judged.repeats, parties_of(members)
    value.odd_one = None if judged.odd_one is None else labels[judged.odd_one - 1]
    value.independence = min((item.independence.grade for item in judged.repeats), key=GRADES.index, default=None)
    value.method, enu, value.terms = _estimate(found, inputs, agree=all(item.agrees for item in judged.repeats))
    value.shares = [
        Share(
            label=label,
            weight_enu=[float(weight) for weight in found.weights[row]],
            residual_enu_m=[_minus(place, mean) for place, mean in zip(inputs[row].enu_m, enu, strict=True)],
            plan_significance=found.residuals[row].plan_significance,
            height_significance=found.residuals[row].height_significance,
            transformed=members[row].transformed,
        )
        for row, label in enumerate(labels)
    ]
    combined = combine(value.terms)
    governed = {item.evidence.governed_by for item in members}
    value.datum = stated_uncertainty(
        combined,
        printed_lines(value.terms),
        correlation_time_s=None,
        governed_by=governed.pop() if len(governed) == 1 else "class and data",
        method=value.method,
        with_common=True,
    )
    value.place = _place(members, enu)
    value.cov_own_m2, value.cov_common_m2 = _covariances(value.terms, value.place)
    value.height = _height(value, combined)
    value.findings += _findings(value, members)


def _minus(one: float | None, two: float | None) -> float | None:
    return None if one is None or two is None else one - two


def _estimate(found: Combination, inputs: Sequence[Input], *, agree: bool) -> tuple[str, Triple, tuple[Term, ...]]:
    """(method, east north up of the mark, lines of its uncertainty)."""
    if len(inputs) == 1:
        return ONE, found.form.enu_m, found.form.terms
    if agree:
        return LEAST_SQUARES, found.form.enu_m, found.form.terms
    places: list[float | None] = []
    spread: list[float | None] = []
    for axis in range(3):
        rows = [(item.enu_m[axis], float(found.weights[n, axis])) for n, item in enumerate(inputs)]
        known = [(value, weight) for value, weight in rows if value is not None]
        place, wide = _robust(known, found.form.enu_m[axis])
        places.append(place)
        spread.append(wide)
    method = WIDENED if len(inputs) == 2 else MEDIAN
    kind = "rectangular" if len(inputs) == 2 else "normal"
    extra = Term(DISAGREE, "B", kind, (spread[0], spread[1], spread[2]))
    return method, (places[0], places[1], places[2]), (*found.form.terms, extra)


def _robust(known: Sequence[tuple[float, float]], mean: float | None) -> tuple[float | None, float | None]:
    """(place, standard uncertainty of what the disagreement adds) of one axis."""
    if not known or mean is None:
        return None, None
    if len(known) < 3:
        return mean, max(abs(value - mean) for value, _ in known) / math.sqrt(3)
    place = weighted_median(known)
    return place, MAD_TO_SIGMA * weighted_median([(abs(value - place), weight) for value, weight in known])


def weighted_median(values: Sequence[tuple[float, float]]) -> float:
    """The value at which half of the weight lies on either side; weights below zero count as none.

    Raises:
        ValueError: nothing has a weight.
    """
    ordered = sorted((value, max(weight, 0.0)) for value, weight in values)
    half = sum(weight for _, weight in ordered) / 2
    if half <= 0.0:
        raise ValueError("a weighted median needs a weight")
    passed = 0.0
    for place, (value, weight) in enumerate(ordered):
        passed += weight
        if passed > half * (1 + 1e-12):
            return value
        if passed >= half * (1 - 1e-12):  # exactly half: the middle of this one and the next
            return (value + ordered[min(place + 1, len(ordered) - 1)][0]) / 2
    return ordered[-1][0]


def _place(members: Sequence[Member], enu: Triple) -> Place:
    """The first member's place moved by the combined offset; one occupation alone stays as it is, to the last bit."""
    first = members[0].place
    if len(members) == 1:
        return first
    level = next((item.place.h_m for item in members if item.place.h_m is not None), None)
    ellipsoid = frames.frame_info(first.frame).ellipsoid
    start = (first.lat_deg, first.lon_deg, level or 0.0)
    lat, lon, h = moved_by_enu(start, (enu[0] or 0.0, enu[1] or 0.0, enu[2] or 0.0), ellipsoid)
    epochs = [item.place.epoch for item in members if item.place.epoch is not None]
    epoch = sum(epochs) / len(epochs) if epochs else None
    if enu[2] is None or level is None:
        return Place(first.frame, first.frame_name, epoch, lat, lon, None, None)
    x, y, z = (float(value) for value in np.asarray(geocentric(lat, lon, h, ellipsoid)))
    return Place(first.frame, first.frame_name, epoch, lat, lon, h, (x, y, z))


def _covariances(terms: Sequence[Term], place: Place) -> tuple[Matrix | None, Matrix | None]:
    """(own, common), geocentric, m^2."""
    if place.h_m is None or any(term.u_enu_m[2] is None for term in terms):
        return None, None
    own, common = np.zeros((3, 3)), np.zeros((3, 3))
    for term in terms:
        u = np.array([float(value or 0.0) for value in term.u_enu_m])
        part = np.diag(u**2)
        part[0, 1] = part[1, 0] = term.rho_en * u[0] * u[1]
        if term.common:
            common += part
        else:
            own += part
    turned = [covariance_to_xyz(item, place.lat_deg, place.lon_deg) for item in (own, common)]
    return [[float(v) for v in row] for row in turned[0]], [[float(v) for v in row] for row in turned[1]]


def _height(value: MarkValue, combined: Combined) -> HeightOf | None:
    """N from the heaviest occupation that has one: over the centimetres between them a model changes by micrometres."""
    order = np.argsort(-value.coefficients[:, 2], kind="stable")
    by = next((found for n in order if (found := value.members[int(n)].evidence.height) is not None), None)
    if by is None or value.place is None or value.place.h_m is None:
        return None
    u_h, u_n, wide = combined.u_enu_m[2], by.undulation_u_m, None
    if u_h is not None and u_n is not None:
        u, dof = welch_satterthwaite([(u_h, combined.dof_enu[2]), (u_n, None)])
        wide = coverage_factor_95(dof) * u
    return HeightOf(by.model, by.model_sha256, by.datum, by.undulation_m, u_n, value.place.h_m - by.undulation_m, wide)


def between_marks(one: MarkValue, two: MarkValue) -> Combined | None:
    """Uncertainty of the second mark minus the first: what both share drops out. None without a common frame.

    East and north of both are taken as parallel, as in `occupy.between`; what was not stated does not drop out.
    """
    if one.place is None or two.place is None:
        return None
    if one.place.frame != two.place.frame or not same_epoch(one.place.epoch, two.place.epoch):
        return None
    inputs = [
        *inputs_of(one.members, mark=one.mark.number),
        *inputs_of(two.members, mark=two.mark.number, first_number=len(one.members) + 1),
    ]
    coefficients = np.vstack([-one.coefficients, two.coefficients])
    if one.place.h_m is None or two.place.h_m is None:
        coefficients[:, 2] = 0.0
    terms = linear_form(inputs, coefficients).terms
    extra = [term for value in (one, two) for term in value.terms if term.source == DISAGREE]
    return combine([*terms, *extra])


def measured(value: MarkValue) -> Combined:
    """The mark as it was measured: without the frame operations and motions that brought it to its frame.

    Raises:
        ValueError: a mark without a coordinate.
    """
    return combine([term for term in value.terms if not term.source.startswith((FRAME_OPERATION, MOTION))])


# -- what is said of it ----------------------------------------------------------------------------------------


def _findings(value: MarkValue, members: Sequence[Member]) -> list[Finding]:
    found = [
        Finding(
            "occupation_has_stop", "stop",
            f"Occupation {item.held.label} has findings that stop it in its book: {', '.join(item.evidence.stops)}. "
            "Answer them there and add the book again, or exclude it.",
            {"occupation": item.held.label},
        )
        for item in members if item.evidence.stops
    ]  # fmt: skip
    bad = [item for item in value.repeats if not item.agrees]
    if bad:
        pairs = "; ".join(f"{value.labels[r.first - 1]} and {value.labels[r.second - 1]}: {r.text}" for r in bad)
        if value.odd_one is not None:
            what = f"{value.odd_one} is the odd one: the others agree. If it is wrong, exclude it with the reason."
        elif len(members) == 2:
            what = "Two cannot tell which one is wrong: ask both parties for heights and mark, or for a third."
        else:
            what = "No single one explains it."
        what += f" Until then: {value.method}."
        figures = {"odd_one": value.odd_one}
        found.append(Finding("occupations_disagree", "stop", f"Occupations disagree ({pairs}). {what}", figures))
    if value.repeats and value.independence != "independent":
        text = f"No two occupations are shown to be independent (best: {value.independence})."
        found.append(Finding("occupations_not_independent", "caution", text, {"grade": value.independence}))
    models = {item.evidence.height.model_sha256 for item in members if item.evidence.height is not None}
    if len(models) > 1:
        text = "Its occupations have heights by different geoid models; the height given is by the first one's."
        found.append(Finding("geoid_models_differ", "caution", text, {}))
    for item in members:
        if item.transformed:
            text = (
                f"Occupation {item.held.label} was transformed from {item.evidence.place.frame if item.evidence.place else ''} "
                f"by {' + '.join(item.transformed)}; the accuracy stated for that is in the figures."
            )
            found.append(Finding("transformed", "info", text, {"occupation": item.held.label}))
    return found
