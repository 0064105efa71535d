"""What PROJ offers between two frames, read step by step and judged by our rules.

PROJ offers null copies through an ensemble, routes by foreign frames, ties without an epoch and heights returned
unchanged, all without a word. So every candidate is read from its PROJJSON and refused when a step

a. starts or ends at an ensemble;
b. states no accuracy (the sum is judged by the caller, because a decision can lift that limit);
c. touches a frame that is not source, target or an ITRF, IGS or ETRF realisation;
d. joins a static and a moving frame without rates, unless the epoch is the parameters' own;
e. depends on time while no epoch is known.

The NKG authority's chains carry their own intermediate frames and intraplate steps; c and d except those. Axis
swaps, conversions and offsets within one datum are no steps.
"""

from __future__ import annotations

import re
import warnings
from dataclasses import dataclass, field
from functools import lru_cache
from typing import Any

from pyproj import Transformer
from pyproj.aoi import AreaOfInterest
from pyproj.crs import CoordinateOperation  # type: ignore[attr-defined]
from pyproj.transformer import TransformerGroup

from fieldbook.model.reduction import OperationStep
from fieldbook.reduce.constants import AREA_HALF_SIDE_DEG, SAME_EPOCH_YEARS
from fieldbook.reduce.frames.registry import Bounds, crs_of, inside, is_scaffold, itrf_year, shortened

_REMARK_LENGTH = 400
_NKG_FRAME = re.compile(r"NKG_ETRF\d{2}")
_TIME_WORDS = re.compile(r"time-dependent|deformation|velocity|\bvel\b|_vel\b", re.IGNORECASE)
_OFFSET_WORDS = re.compile(r"offset|geographic ?3D to 2D|axis order", re.IGNORECASE)
_EPOCH_PARAMETERS = {"Transformation reference epoch", "Parameter reference epoch"}


@dataclass(frozen=True)
class Candidate:
    """One operation PROJ offers. `reason` is empty when it is sound; `missing` names grids it lacks."""

    steps: tuple[OperationStep, ...]
    total_m: float
    newest_itrf: int
    reason: str
    missing: tuple[str, ...] = ()
    bounds: Bounds | None = None
    transformer: Transformer | None = field(default=None, compare=False, repr=False)
    grids: tuple[tuple[str, str], ...] = ()  # short name, path

    @property
    def codes(self) -> tuple[str, ...]:
        """Step codes as they are recorded: 'EPSG:9991 inverse'."""
        return tuple(step_code(step) for step in self.steps)

    @property
    def rank(self) -> tuple[float, int, int, tuple[str, ...]]:
        """Smallest sum, fewest steps, newest ITRF; the codes last, so that the choice is the same everywhere."""
        return round(self.total_m, 6), len(self.steps), -self.newest_itrf, self.codes


@dataclass(frozen=True)
class Offer:
    """All candidates between two frames at a mark; `stuck`: PROJ knows operations but can run none of them."""

    candidates: tuple[Candidate, ...]
    stuck: bool

    @property
    def sound(self) -> list[Candidate]:
        """Sound ones that can run, best first."""
        return sorted((c for c in self.candidates if not c.reason and not c.missing), key=lambda c: c.rank)

    @property
    def waiting(self) -> list[Candidate]:
        """Sound ones that lack only a grid, best first."""
        return sorted((c for c in self.candidates if not c.reason and c.missing), key=lambda c: c.rank)


@dataclass(frozen=True)
class _Ends:
    """Datum names of the source and the target, and the operation epoch."""

    datums: frozenset[str]
    epoch: float | None


def step_code(step: OperationStep) -> str:
    """'EPSG:9991 inverse' or 'EPSG:8049'."""
    return f"{step.authority}:{step.code}" + (" inverse" if step.inverse else "")


@lru_cache(maxsize=512)
def offer(source: str, target: str, lat_deg: float, lon_deg: float, epoch: float | None, *, anywhere: bool) -> Offer:
    """Candidates from source to target at a mark, judged. Both are EPSG codes of geographic 3-D frames.

    Args:
        lat_deg, lon_deg: the mark (callers round to 0.001 degree, which is what makes the cache useful).
        epoch: the operation epoch, decimal year; None = unknown.
        anywhere: search without the area of interest (a recorded decision accepts figures outside the area).
    """
    found = _group(source, target, lat_deg, lon_deg, anywhere=anywhere)
    if found is None:
        return Offer((), stuck=True)
    ends = _Ends(frozenset(_datum_of(crs_of(code).to_json_dict())[0] for code in (source, target)), epoch)
    where = None if anywhere else (lat_deg, lon_deg)
    candidates = [_of_transformer(item, ends, where) for item in found.transformers]
    candidates += [_of_operation(item, ends) for item in found.unavailable_operations]
    # The doubles with longitude first (7042, 9783 ...) and other spellings of one chain count once.
    unique = {(c.codes, c.missing): c for c in reversed(candidates)}
    return Offer(tuple(reversed(unique.values())), stuck=False)


def _group(source: str, target: str, lat_deg: float, lon_deg: float, *, anywhere: bool) -> TransformerGroup | None:
    side = AREA_HALF_SIDE_DEG
    area = AreaOfInterest(
        west_lon_degree=_wrapped(lon_deg - side),
        south_lat_degree=max(-90.0, lat_deg - side),
        east_lon_degree=_wrapped(lon_deg + side),
        north_lat_degree=min(90.0, lat_deg + side),
    )
    try:
        with warnings.catch_warnings():
            # pyproj warns of missing grids on stderr; they are read from `unavailable_operations` instead.
            warnings.simplefilter("ignore")
            return TransformerGroup(
                crs_of(source),
                crs_of(target),
                always_xy=True,
                allow_ballpark=False,
                area_of_interest=None if anywhere else area,  # type: ignore[arg-type]  # the stub names the private twin
            )
    except IndexError:
        # The best candidate is one PROJ cannot run and that lacks no grid (methods 1065, 1066).
        return None


def _wrapped(lon_deg: float) -> float:
    return lon_deg + 360.0 if lon_deg < -180.0 else (lon_deg - 360.0 if lon_deg > 180.0 else lon_deg)


def _of_transformer(item: Transformer, ends: _Ends, where: tuple[float, float] | None) -> Candidate:
    tree = item.to_json_dict()
    steps, reason, newest, total = _judged(tree, float(item.accuracy), ends)
    area = item.area_of_use
    bounds = (area.west, area.south, area.east, area.north) if area is not None else None
    if where is not None and bounds is not None and not inside(bounds, *where):
        reason = reason or f"one way is not meant for this place ({shortened(str(area.name))})"
    operations = item.operations or ()
    grids = {(grid.short_name, grid.full_name) for part in operations for grid in part.grids}
    return Candidate(steps, total, newest, reason, bounds=bounds, transformer=item, grids=tuple(sorted(grids)))


def _of_operation(item: CoordinateOperation, ends: _Ends) -> Candidate:
    steps, reason, newest, total = _judged(item.to_json_dict(), float(item.accuracy), ends)
    missing = tuple(sorted(grid.short_name for grid in item.grids if not grid.available))
    if not missing:
        reason = reason or "one way is known, which PROJ cannot run"
    return Candidate(steps, total, newest, reason, missing=missing)


def _judged(tree: dict[str, Any], overall_m: float, ends: _Ends) -> tuple[tuple[OperationStep, ...], str, int, float]:
    """Steps, first reason for refusing ('' = sound), newest ITRF touched, sum of accuracies."""
    parts = [part for part in tree.get("steps", [tree]) if not _is_no_step(part)]
    nkg = any(_identity(part)[0] == "NKG" for part in parts)
    reason, newest, stated = "", 0, 0.0
    steps = []
    for part in parts:
        accuracy = _accuracy(part)
        inner = nkg and accuracy is None  # an intraplate step inside an NKG chain: the chain's figure covers it
        reason = reason or _refusal(part, ends, nkg=nkg, inner=inner)
        newest = max(newest, *(itrf_year(_crs_name(part, end)) for end in ("source_crs", "target_crs")))
        stated += accuracy or 0.0
        steps.append(_step(part, accuracy, inner=inner))
    if nkg and not reason and overall_m > stated:
        first = next(step for step in steps if step.remark.startswith("intraplate"))
        first.accuracy_m, stated = overall_m - stated, overall_m
    if not steps:
        reason = "one way has no step at all: a null copy"
    return tuple(steps), reason, newest, stated


def _step(part: dict[str, Any], accuracy: float | None, *, inner: bool) -> OperationStep:
    authority, code, inverse = _identity(part)
    remark = str(part.get("remarks", ""))[:_REMARK_LENGTH]
    if inner:
        return OperationStep(
            authority or "PROJ", code or part["name"], part["name"], 0.0, inverse,
            "intraplate step of the NKG chain, covered by the chain's stated accuracy",
        )  # fmt: skip
    return OperationStep(authority or "PROJ", code or part["name"], part["name"], accuracy, inverse, remark)


def _is_no_step(part: dict[str, Any]) -> bool:
    if part["type"] == "Conversion":
        return True
    method = str(part.get("method", {}).get("name", ""))
    return (
        "source_crs" in part
        and _datum_of(part["source_crs"])[0] == _datum_of(part["target_crs"])[0]
        and _OFFSET_WORDS.search(method) is not None
        and _TIME_WORDS.search(method) is None
    )


def _refusal(part: dict[str, Any], ends: _Ends, *, nkg: bool, inner: bool) -> str:
    """Rules a to e for one step; '' when it holds."""
    sides = [(_crs_name(part, end), *_datum_of(part.get(end, {}))) for end in ("source_crs", "target_crs")]
    for name, _, kind in sides:
        if kind == "ensemble":
            return f"the way through the ensemble {name} is a null copy, or good to metres only"
    if not inner and _accuracy(part) is None:
        return f"{part['name']} states no accuracy"
    for name, datum, _ in sides:
        if datum not in ends.datums and not is_scaffold(name) and not (nkg and _NKG_FRAME.fullmatch(name)):
            return f"one way goes by a foreign frame, {name or datum or 'unnamed'}"
    method = str(part.get("method", {}).get("name", ""))
    depends_on_time = _TIME_WORDS.search(method) is not None
    mixed = {kind for _, _, kind in sides} == {"static", "moving"}
    if mixed and not depends_on_time and not inner and not (nkg and _identity(part)[0] == "NKG"):
        own = _own_epoch(part)
        if own is None or ends.epoch is None or abs(own - ends.epoch) > SAME_EPOCH_YEARS:
            return f"{part['name']} ties a static and a moving frame without rates"
    if depends_on_time and ends.epoch is None:
        return f"{part['name']} depends on time, and no epoch is known"
    return ""


def _own_epoch(part: dict[str, Any]) -> float | None:
    for parameter in part.get("parameters", []):
        if parameter["name"] in _EPOCH_PARAMETERS:
            return float(parameter["value"])
    return None


def _accuracy(part: dict[str, Any]) -> float | None:
    """Stated accuracy in metres; absent, negative or not finite is none."""
    try:
        value = float(part["accuracy"])
    except (KeyError, ValueError):
        return None
    return value if 0.0 <= value < float("inf") else None


def _identity(part: dict[str, Any]) -> tuple[str, str, bool]:
    """Authority, code, inverse: INVERSE(DERIVED_FROM(EPSG)) is EPSG, inverse."""
    identity = part.get("id", {})
    authority = str(identity.get("authority", ""))
    inverse = "INVERSE" in authority or (not identity and str(part["name"]).startswith("Inverse of "))
    words = re.findall(r"\w+", authority)
    return (words[-1] if words else ""), str(identity.get("code", "")), inverse


def _crs_name(part: dict[str, Any], end: str) -> str:
    return str(part.get(end, {}).get("name", "")).replace(" (with axis order normalized for visualization)", "")


def _datum_of(crs: dict[str, Any]) -> tuple[str, str]:
    """Name of a CRS's datum and its kind: 'ensemble', 'moving', 'static' or 'unknown'."""
    if "datum_ensemble" in crs:
        return str(crs["datum_ensemble"]["name"]), "ensemble"
    datum = crs.get("datum")
    if datum is None:
        return "", "unknown"
    return str(datum["name"]), "moving" if datum["type"] == "DynamicGeodeticReferenceFrame" else "static"
