"""What the register keeps of one occupation: everything a combination needs without the book.

Two pieces are kept under their hashes: the whole tree of `reduce --json`, and this one, `Evidence`, which adds what that tree
does not carry (the Type A line with its degrees of freedom per axis, what the occupation shares with which other, the kind
of fix as its mean took it) and leaves out what no combination asks for.

Two accuracies are kept apart from here on: every line of the budget says whether it is common, and the covariance stands in
two parts. `cov_own_m2` is what belongs to this occupation; `cov_common_m2` is what other occupations, other marks or the whole
register may share. Relative to the datum both count; between two marks what both share drops out.
"""

from __future__ import annotations

import math
from dataclasses import asdict, dataclass, field
from typing import Any

import numpy as np

from fieldbook.model.canonical import Tree
from fieldbook.model.reduction import BudgetLine, Reduction
from fieldbook.model.session import Session
from fieldbook.model.state import Occupation
from fieldbook.occupy.marks_combined import class_for_tolerance
from fieldbook.reduce.combine import class_mean_u_m
from fieldbook.reduce.geodesy import covariance_to_xyz
from fieldbook.reduce.occupation import Reduced
from fieldbook.reduce.prediction import type_a
from fieldbook.reduce.shared import MEAN_SOURCE

SCHEMA = "fieldbook.register.evidence/1"
Matrix = list[list[float]]


@dataclass(frozen=True)
class MeanLine:
    """The Type A line: metres and dof per axis, correlation of east and north."""

    u_enu_m: tuple[float, float, float | None]
    dof_enu: tuple[float, float, float | None]
    rho_en: float


@dataclass(frozen=True)
class Shares:
    """The keys by which occupations share errors (`reduce.shared`), as stated; None = not stated."""

    corrections: str
    station: str | None
    antenna: str
    antenna_serial: str | None
    receiver_serial: str | None


@dataclass(frozen=True)
class Asked:
    """Of the requirement what ties and classes are judged by."""

    horizontal_95_m: float
    vertical_95_m: float
    occupations: int
    hours_between: float | None
    in_frame: str


@dataclass(frozen=True)
class Place:
    """A position in a frame. x, y, z and h are None when the ellipsoidal height is not known."""

    frame: str
    frame_name: str
    epoch: float | None
    lat_deg: float
    lon_deg: float
    h_m: float | None
    xyz_m: tuple[float, float, float] | None


@dataclass(frozen=True)
class ByModel:
    """Height by a geoid model at the mark: N, its standard uncertainty where the model states one, and H = h - N."""

    model: str
    model_sha256: str
    datum: str | None
    undulation_m: float
    undulation_u_m: float | None
    orthometric_m: float


@dataclass(frozen=True)
class Stated:
    """Of a coordinate that no book holds: what it is, from where, and the part of it that all of that source share.

    common_u_enu_m: standard uncertainty per axis, metres, the same error in every coordinate of the source.
    """

    kind: str  # "published control" or "post-processed"
    source: str
    common_u_enu_m: tuple[float, float, float | None]


@dataclass(frozen=True)
class Evidence:
    """One occupation. `place`: in the client's frame, None if it has none there; `observed`: in the receiver's.

    budget: lines of the statement in the client's frame (in the receiver's where there is none).
    cov_own_m2, cov_common_m2: geocentric, 3 x 3, None without height; their sum is the covariance relative to the datum.
    governed_by: 'class', 'class and data' or 'data', of the mean's own uncertainty.
    prior_u_enu_m: of the mean, as kind of fix and length give it; it governs weights.
    plan_u95_m, height_u95_m: of the place; measured_u95_m: both as measured, without the frame operation.
    sigma_plan_m, sigma_height_m: of the kind of fix, for fixed tolerances. asked: None where nothing was.
    stated: only of a coordinate from elsewhere; its Type A line then is the stated uncertainty.
    """

    mark: str
    occupation: int
    open: bool
    started: str | None
    ended: str | None
    kept_s: float
    epoch_of_observation: float | None
    observer: str | None
    party: str | None
    receiver: str | None
    antenna_height_m: float | None
    tribrach: str | None
    place: Place | None
    observed: Place
    operation: tuple[str, ...]
    height: ByModel | None
    grid: str | None
    fix_class: str
    governed_by: str
    sigma_plan_m: float
    sigma_height_m: float
    prior_u_enu_m: tuple[float, float, float]
    mean: MeanLine
    budget: tuple[BudgetLine, ...]
    cov_own_m2: Matrix | None
    cov_common_m2: Matrix | None
    plan_u95_m: float
    height_u95_m: float | None
    measured_u95_m: tuple[float, float | None]
    shares: Shares
    asked: Asked | None
    simulated: bool
    stops: tuple[str, ...]
    findings: tuple[Tree, ...]
    received_sha256: str | None
    stated: Stated | None = None
    schema: str = field(default=SCHEMA)

    def to_tree(self) -> dict[str, Any]:
        """JSON with finite numbers or null."""
        tree: dict[str, Any] = finite(asdict(self))
        return tree


def evidence_of(reduced: Reduced, occupation: Occupation) -> Evidence:
    """What is kept of one reduced occupation."""
    reduction, session = reduced.reduction, occupation.session
    stated = reduction.uncertainty_client if reduction.client is not None else reduction.uncertainty
    assert stated is not None  # noqa: S101 - a client position comes with its uncertainty
    part = type_a(reduced.estimate.mean)
    mean = MeanLine(part.u_enu_m, part.dof_enu, part.rho_en)
    kind, client = class_for_tolerance(reduced, session), reduction.client
    place = None
    if client is not None:
        xyz = None if client.x_m is None else (client.x_m, client.y_m or 0.0, client.z_m or 0.0)
        place = Place(client.frame, client.frame_name, client.epoch, client.lat_deg, client.lon_deg, client.h_m, xyz)
    own, common = covariance_parts(mean, stated.budget, place)
    seen = reduction.receiver
    return Evidence(
        mark=occupation.mark,
        occupation=occupation.number,
        open=reduction.open,
        started=reduction.started,
        ended=reduction.ended,
        kept_s=reduction.kept_s,
        epoch_of_observation=reduction.epoch_of_observation,
        observer=occupation.observer or session.job.observer or None,
        party=session.job.firm,
        receiver=" ".join(filter(None, (session.receiver.maker, session.receiver.model))) or None,
        antenna_height_m=reduction.antenna.height_arp_m,
        tribrach=session.setup.tribrach_id,
        place=place,
        observed=Place(seen.frame, seen.frame_name, seen.epoch, seen.lat_deg, seen.lon_deg, seen.h_m, None),
        operation=tuple(f"{step.authority}:{step.code}" for step in reduction.operation.steps),
        height=_height(reduction),
        grid=session.frame.grid,
        fix_class=reduced.estimate.fix_class.name,
        governed_by=reduced.mean.governed_by,
        sigma_plan_m=kind.horizontal_m,
        sigma_height_m=kind.vertical_m,
        prior_u_enu_m=class_mean_u_m(reduced.estimate.fix_class, reduction.kept_s),
        mean=mean,
        budget=tuple(stated.budget),
        cov_own_m2=own,
        cov_common_m2=common,
        plan_u95_m=stated.horizontal95_m,
        height_u95_m=stated.vertical95_m,
        measured_u95_m=(reduction.uncertainty.horizontal95_m, reduction.uncertainty.vertical95_m),
        shares=_shares(session),
        asked=_asked(session),
        simulated=occupation.simulated,
        stops=tuple(sorted({item.code for item in reduction.findings if item.severity == "stop"})),
        findings=tuple(_findings(reduction)),
        received_sha256=occupation.received_sha256,
    )


def covariance_parts(
    mean: MeanLine, budget: list[BudgetLine], place: Place | None
) -> tuple[Matrix | None, Matrix | None]:
    """(own, common) geocentric covariances in m^2, each 3 x 3; None without a height or a place.

    East and north are correlated through the mean only; every other line is independent per axis (as in `budget`).
    """
    if place is None or place.h_m is None or mean.u_enu_m[2] is None:
        return None, None
    own, common = np.zeros((3, 3)), np.zeros((3, 3))
    for line in budget:
        if line.type == "A" and line.source == MEAN_SOURCE:
            continue
        for axis in range(3):
            u = line.u_enu_m[axis]
            if u is None:
                return None, None
            (common if line.common else own)[axis, axis] += u * u
    u_mean = np.array([float(value or 0.0) for value in mean.u_enu_m])
    own += np.diag(u_mean**2)
    own[0, 1] = own[1, 0] = mean.rho_en * u_mean[0] * u_mean[1]
    parts = [covariance_to_xyz(item, place.lat_deg, place.lon_deg) for item in (own, common)]
    return [[float(v) for v in row] for row in parts[0]], [[float(v) for v in row] for row in parts[1]]


def evidence_from_tree(tree: dict[str, Any]) -> Evidence:
    """The inverse of `to_tree`.

    Raises:
        ValueError: a tree of another schema.
    """
    if tree.get("schema") != SCHEMA:
        raise ValueError(f"no evidence of a register: {tree.get('schema')}")
    values = dict(tree)
    values["place"] = None if tree["place"] is None else _place(tree["place"])
    values["observed"] = _place(tree["observed"])
    values["height"] = None if tree["height"] is None else ByModel(**tree["height"])
    mean = tree["mean"]
    values["mean"] = MeanLine(_triple(mean["u_enu_m"]), _triple(mean["dof_enu"]), mean["rho_en"])
    values["budget"] = tuple(BudgetLine(**line) for line in tree["budget"])
    values["shares"] = Shares(**tree["shares"])
    values["asked"] = None if tree["asked"] is None else Asked(**tree["asked"])
    if tree.get("stated") is not None:
        values["stated"] = Stated(**{**tree["stated"], "common_u_enu_m": tuple(tree["stated"]["common_u_enu_m"])})
    values["prior_u_enu_m"] = tuple(tree["prior_u_enu_m"])
    values["measured_u95_m"] = tuple(tree["measured_u95_m"])
    for key in ("operation", "stops", "findings"):
        values[key] = tuple(tree[key])
    return Evidence(**values)


def _place(tree: dict[str, Any]) -> Place:
    xyz = tree["xyz_m"]
    return Place(**{**tree, "xyz_m": None if xyz is None else (xyz[0], xyz[1], xyz[2])})


def _triple(values: list[Any]) -> tuple[float, float, float | None]:
    # an infinite number of degrees of freedom is null in JSON
    east, north, up = values
    return (math.inf if east is None else east), (math.inf if north is None else north), up


def _height(reduction: Reduction) -> ByModel | None:
    by = reduction.height
    if by is None:
        return None
    return ByModel(by.model, by.model_sha256, by.datum, by.undulation_m, by.undulation_u_m, by.orthometric_m)


def _shares(session: Session) -> Shares:
    corrections, antenna = session.corrections, session.antenna
    return Shares(
        corrections.kind, corrections.station, antenna.model, antenna.serial or None, session.receiver.serial or None
    )


def _asked(session: Session) -> Asked:
    asked = session.requirement
    return Asked(asked.horizontal_95_m, asked.vertical_95_m, asked.occupations, asked.hours_between, asked.in_frame)


def _findings(reduction: Reduction) -> list[Tree]:
    return [{"code": item.code, "severity": item.severity, "text": item.text} for item in reduction.findings]


def finite(value: Any) -> Any:
    """A tree in which every float is finite or None."""
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if isinstance(value, dict):
        return {key: finite(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [finite(item) for item in value]
    return value
