"""One occupation, epochs to the mark in the client's frame: the nine steps of the reduction, in their order.

    1 ellipsoidal height per epoch   2 screening   3 initialisations    (columns, screening, initialisations)
    4 mean and covariance            5 antenna     6 frame and epoch    (correlated_mean, antenna, frames)
    7 geoid                          8 grid        9 budget             (geoid, frames, terms, budget)

`OccupationReducer` takes epochs as they come and evaluates at any moment: the live figure and the batch figure are the
same computation on the same state. What cannot be reduced raises `ReductionError` with the remedy; what can is reduced
even where a part of it is unknown, and that part is None.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime, timedelta
from pathlib import Path

import numpy as np

from fieldbook.clock import utc_text
from fieldbook.errors import ReductionError
from fieldbook.model.epoch import Epoch
from fieldbook.model.reduction import (
    BudgetLine,
    ClientPosition,
    Ellipse95,
    Finding,
    Geodetic,
    GridPosition,
    Height,
    Operation,
    Reduction,
    Trace,
    Uncertainty,
)
from fieldbook.model.reduction import Initialisation as InitialisationRecord
from fieldbook.model.state import Occupation
from fieldbook.reduce import frames, terms
from fieldbook.reduce.antenna import AntennaReduction, reduce_antenna
from fieldbook.reduce.blocks import Blocks
from fieldbook.reduce.budget import Combined, Term, combine, welch_satterthwaite
from fieldbook.reduce.correlated_mean import CorrelatedMean, correlated_mean
from fieldbook.reduce.fix_classes import ClassOfFix, GstVerdict, governing_class, with_receiver_estimate
from fieldbook.reduce.gates import Limits
from fieldbook.reduce.geodesy import moved_along_normal, moved_by_enu
from fieldbook.reduce.geoid import height_above_geoid
from fieldbook.reduce.initialisations import InitialisationJudge, Judgement
from fieldbook.reduce.kept_sums import InitialisationSums, median_of
from fieldbook.reduce.prediction import TimeToGo, TypeA, time_to_go, type_a
from fieldbook.reduce.quantisation import Digits, constant_resolution_u_m, coordinate_quantum_m, mean_resolution_u_m
from fieldbook.reduce.region import coverage_factor_95
from fieldbook.reduce.screening import Screened, Screening, counts_of
from fieldbook.reduce.trace import TraceStore

METHOD = "Gauss-Markov mean with slow companion, class of fix as prior, GUM budget; bivariate t region"


@dataclass(frozen=True)
class Resolution:
    """Steps of the received digits, and what they do to the mean (standard uncertainties, metres)."""

    latitude_step_m: float | None
    longitude_step_m: float | None
    coordinate_u_en_m: tuple[float, float]
    altitude_u_m: float | None
    separation_decimals: int | None
    separation_u_m: float | None
    digits: dict[str, Digits]


@dataclass
class Reduced:
    """A reduction with what checks, screens and certificates need beside it."""

    reduction: Reduction
    trace: Trace
    horizontal: TimeToGo
    vertical: TimeToGo
    horizontal_forbidden_by: str
    vertical_forbidden_by: str
    mean: CorrelatedMean
    fix_class: ClassOfFix
    gst: GstVerdict
    screened: Screened
    judged: Judgement
    resolution: Resolution
    sd_enu_m: tuple[float | None, float | None, float | None]
    notes: list[Finding] = field(default_factory=list)  # findings of the steps themselves


def reduce_occupation(occupation: Occupation, epochs: Iterable[Epoch], search_dirs: Sequence[Path]) -> Reduced:
    """All epochs at once.

    Args:
        occupation: as folded from the book.
        epochs: its rows, in order of hearing.
        search_dirs: folders in which a geoid model is looked for before the package's own.

    Raises:
        ReductionError: nothing usable, or a frame, geoid or grid that cannot be reached.
        UsageError: a frame or grid refused by kind.
    """
    reducer = OccupationReducer(occupation)
    reducer.push(epochs)
    return reducer.evaluate(occupation, search_dirs)


class OccupationReducer:
    """The state of one reduction; `evaluate` leaves it as it is."""

    def __init__(self, occupation: Occupation) -> None:
        requirement = occupation.session.requirement
        self._limits = Limits.of(requirement, occupation.datum_confirmed)
        self._override = occupation.session.receiver.fix_class
        self._screening = Screening(self._limits, self._override)
        self._traces = TraceStore()
        self._judge = InitialisationJudge(self._override)

    def fits(self, occupation: Occupation) -> bool:
        """False when gates or class changed since: then the epochs must be pushed into a new one."""
        limits = Limits.of(occupation.session.requirement, occupation.datum_confirmed)
        return limits == self._limits and occupation.session.receiver.fix_class == self._override

    def push(self, epochs: Iterable[Epoch]) -> None:
        """Take in further epochs, in order of hearing."""
        rows = epochs if isinstance(epochs, list) else list(epochs)
        self._screening.push(rows)
        self._traces.push(rows)

    def evaluate(self, occupation: Occupation, search_dirs: Sequence[Path]) -> Reduced:
        """The reduction as if the occupation ended now. Errors as in `reduce_occupation`."""
        screened = self._screening.evaluate(day0_known=occupation.day0 is not None)
        if screened.kept == 0 or screened.frame is None:
            raise _nothing_usable(screened)
        sums = screened.initialisations
        fix_class, gst = _class_of(list(sums.values()), occupation)
        judged = self._judge.judge(screened, occupation.initialisation_decisions)
        if not judged.used:
            raise ReductionError(
                "No initialisation is left to reduce: all were set aside.",
                "Strike the decision that sets one aside, or occupy the mark again.",
                code="no_usable_fix",
            )
        blocks = screened.blocks.of_initialisations(judged.used)
        mean = _mean_of(blocks, fix_class)
        position = _Position(occupation, screened, blocks, mean, judged, fix_class)
        return position.reduced(gst, self._traces, search_dirs)


def _nothing_usable(screened: Screened) -> ReductionError:
    if screened.heard == 0:
        return ReductionError(
            "No position was heard in this occupation.",
            "Check what the receiver sends: `fieldbook links --listen LINK`.",
            code="no_usable_fix",
        )
    counts = ", ".join(f"{code} {count}" for code, count in screened.set_aside.items())
    remedy = "Check the fix, and accept_quality and the gates in [requirement]."
    if "date_unknown" in screened.set_aside:
        remedy = "The receiver sent no date: `fieldbook entry BOOK decision --set date=YYYY-MM-DD --set reason=...`."
    return ReductionError(f"None of {screened.heard} epochs can be used ({counts}).", remedy, code="no_usable_fix")


def _class_of(sums: list[InitialisationSums], occupation: Occupation) -> tuple[ClassOfFix, GstVerdict]:
    qualities = {quality for item in sums for quality in item.qualities}
    fix_class = governing_class(qualities, occupation.session.receiver.fix_class)
    horizontal, up = InitialisationSums(0, False, 0, 0).gst_horizontal, InitialisationSums(0, False, 0, 0).gst_up
    for item in sums:
        horizontal.update(item.gst_horizontal)
        up.update(item.gst_up)
    medians = [None if (found := median_of(counter)) is None else found * 1e-5 for counter in (horizontal, up)]
    return with_receiver_estimate(fix_class, *medians)


def _mean_of(blocks: Blocks, fix_class: ClassOfFix) -> CorrelatedMean:
    east, north, up = (blocks.bins(axis) for axis in range(3))
    if east is None or north is None:
        raise ReductionError("No kept epoch is left.", "Occupy the mark again.", code="no_usable_fix")
    return correlated_mean(
        east.without_thin(), north.without_thin(), None if up is None else up.without_thin(), fix_class
    )


class _Position:
    """Steps 4 to 9 for one evaluation."""

    def __init__(
        self,
        occupation: Occupation,
        screened: Screened,
        blocks: Blocks,
        mean: CorrelatedMean,
        judged: Judgement,
        fix_class: ClassOfFix,
    ) -> None:
        self.occupation, self.screened, self.blocks = occupation, screened, blocks
        self.mean, self.judged, self.fix_class = mean, judged, fix_class
        self.session = occupation.session
        self.notes: list[Finding] = []
        self.resolution = _resolution(screened, judged, blocks)
        self.antenna = self._antenna()
        self.epoch_utc = self._epoch_utc()
        self.epoch_of_observation = frames.decimal_year(self.epoch_utc)

    def _antenna(self) -> AntennaReduction:
        explained = any("height_difference" in entry.body for entry in self.occupation.decisions)
        result = reduce_antenna(
            self.session.setup, self.session.antenna, self.occupation.heights, difference_explained=explained
        )
        self.notes += result.findings
        return result

    def _epoch_utc(self) -> datetime:
        """Mean UTC of the kept epochs."""
        instant_ms = self.blocks.mean_instant_ms
        if self.occupation.day0 is None or instant_ms is None:
            raise ReductionError(
                "The date of the occupation is not known.",
                "Record it: `fieldbook entry BOOK decision --set date=YYYY-MM-DD --set reason=...`.",
                code="date_unknown",
            )
        return self._utc(instant_ms)

    def _utc(self, instant_ms: float) -> datetime:
        day0 = self.occupation.day0
        assert day0 is not None  # noqa: S101 - checked by _epoch_utc
        start = datetime(day0.year, day0.month, day0.day, tzinfo=UTC)
        return start + timedelta(weeks=self.occupation.rollover_weeks, milliseconds=instant_ms)

    def _utc_text(self, instant_ms: float | None) -> str | None:
        if instant_ms is None or self.occupation.day0 is None:
            return None
        return utc_text(round(self._utc(instant_ms).timestamp() * 1000))

    # -- the mark ------------------------------------------------------------------------------------------

    def mark(self) -> tuple[float, float, float | None]:
        """The mark in the receiver's frame: mean of the reported point, then the antenna."""
        frame = self.screened.frame
        assert frame is not None  # noqa: S101 - evaluate() refuses earlier
        up = self.mean.up
        lat, lon, h = frame.geodetic(self.mean.east.mean_m, self.mean.north.mean_m, None if up is None else up.mean_m)
        east, north, down = self.antenna.offset_enu_m
        level = 0.0 if h is None else h
        if east or north:
            lat, lon, _ = moved_by_enu((lat, lon, level), (east, north, 0.0))
        if h is None or down is None:
            return lat, lon, None
        return moved_along_normal((lat, lon, h), down)

    # -- the budget ----------------------------------------------------------------------------------------

    def own_terms(self, part: TypeA) -> list[Term]:
        """All lines of the mark in the receiver's frame, for the Type A part as it is or as predicted."""
        has_height = self.mean.up is not None
        floor_e, _, floor_u = self.fix_class.floor_enu_m
        floor_up = floor_u if has_height else None
        found = [
            terms.mean_term(part.u_enu_m, part.dof_enu, part.rho_en),
            terms.floor_term(floor_e, floor_up, self.fix_class.name),
        ]
        found += terms.resolution_terms(
            self.resolution.coordinate_u_en_m, self.resolution.altitude_u_m, self.resolution.separation_u_m
        )
        found += terms.setup_terms(self.session.setup, self.antenna)
        found += terms.station_terms(self.session.corrections)
        found += terms.disagreement_term(self.judged.disagreement_enu_m)
        return found

    def reduced(self, gst: GstVerdict, traces: TraceStore, search_dirs: Sequence[Path]) -> Reduced:
        """Everything."""
        choice = self.session.frame
        lat, lon, h = self.mark()
        receiver = frames.frame_info(choice.receiver)
        position = Geodetic(
            receiver.code, receiver.name, frames.receiver_epoch_of(choice, self.epoch_of_observation), lat, lon, h
        )
        own = self.own_terms(type_a(self.mean))
        combined = combine(own)
        client, operation = self._to_client(lat, lon, h)
        extra = terms.operation_terms(operation)
        combined_client = combine([*own, *extra])
        grid = self._grid(client)
        height = self._height(client, combined_client, search_dirs)
        reduction = self._assemble(position, client, grid, height, operation)
        reduction.uncertainty = self._uncertainty(combined, own)
        if client is not None:
            reduction.uncertainty_client = self._uncertainty(combined_client, [*own, *extra], with_common=True)
        in_client = self.session.requirement.in_frame == "client frame"
        judged_terms = extra if in_client else []
        horizontal, vertical = self._times_to_go(judged_terms)
        codes = self.judged.codes
        mean_enu = (
            self.mean.east.mean_m,
            self.mean.north.mean_m,
            None if self.mean.up is None else self.mean.up.mean_m,
        )
        assert self.screened.frame is not None  # noqa: S101
        return Reduced(
            reduction=reduction,
            trace=traces.trace(codes, self.screened.initialisation, self.screened.frame, mean_enu),
            horizontal=horizontal,
            vertical=vertical,
            horizontal_forbidden_by=_largest([*own[1:], *judged_terms], (0, 1)),
            vertical_forbidden_by=_largest([*own[1:], *judged_terms], (2,)),
            mean=self.mean,
            fix_class=self.fix_class,
            gst=gst,
            screened=self.screened,
            judged=self.judged,
            resolution=self.resolution,
            sd_enu_m=self.blocks.sd_m(),
            notes=self.notes,
        )

    def _times_to_go(self, extra: list[Term]) -> tuple[TimeToGo, TimeToGo]:
        requirement, margin = self.session.requirement, self.fix_class.margin

        def printed(part: TypeA) -> Combined:
            return combine([*self.own_terms(part), *extra])

        horizontal = time_to_go(
            self.mean, requirement.horizontal_95_m, lambda part: printed(part).horizontal95_m, margin
        )
        vertical = time_to_go(self.mean, requirement.vertical_95_m, lambda part: printed(part).vertical95_m, margin)
        return horizontal, vertical

    # -- client, grid, geoid -------------------------------------------------------------------------------

    def _to_client(self, lat: float, lon: float, h: float | None) -> tuple[ClientPosition | None, Operation]:
        choice, occupation = self.session.frame, self.occupation
        keep = occupation.operation

        def transform(steps: list[str] | None) -> tuple[ClientPosition | None, Operation]:
            return frames.transform_to_client(
                choice,
                lat,
                lon,
                h,
                self.epoch_of_observation,
                keep_steps=steps,
                accuracy_over_limit=occupation.accuracy_over_limit,
                outside_area_accepted=occupation.outside_area_accepted,
            )

        client, operation = transform(keep)
        if keep:
            would = frames.operation_codes(transform(None)[1])
            if would != frames.operation_codes(operation):
                text = f"PROJ would now choose {' + '.join(would)}; the recorded operation {' + '.join(keep)} was kept."
                self.notes.append(Finding("operation_differs", "caution", text, {"recorded": keep, "would_use": would}))
        return client, operation

    def _grid(self, client: ClientPosition | None) -> GridPosition | None:
        choice = self.session.frame
        if client is None or choice.grid is None:
            return None
        return frames.project(
            client.frame,
            choice.grid,
            client.lat_deg,
            client.lon_deg,
            client.h_m,
            outside_area_accepted=self.occupation.outside_area_accepted,
        )

    def _height(self, client: ClientPosition | None, combined: Combined, search_dirs: Sequence[Path]) -> Height | None:
        geoid = self.session.frame.geoid
        if client is None or client.h_m is None or geoid is None:
            return None
        height = height_above_geoid(
            client,
            geoid,
            search_dirs,
            epoch_of_observation=self.epoch_of_observation,
        )
        u_h, u_n = combined.u_enu_m[2], height.undulation_u_m
        if u_h is not None and u_n is not None:
            u_total, dof = welch_satterthwaite([(u_h, combined.dof_enu[2]), (u_n, None)])
            height.vertical95_m = coverage_factor_95(dof) * u_total
        return height

    # -- results -------------------------------------------------------------------------------------------

    def _assemble(
        self,
        position: Geodetic,
        client: ClientPosition | None,
        grid: GridPosition | None,
        height: Height | None,
        operation: Operation,
    ) -> Reduction:
        occupation, screened = self.occupation, self.screened
        codes = self.judged.codes
        kept = int(np.count_nonzero(codes == 0))
        used = [screened.initialisations[number] for number in self.judged.used]
        step_s = (screened.median_step_ms or 0) / 1000.0
        return Reduction(
            mark=occupation.mark,
            occupation=occupation.number,
            open=occupation.open,
            ended_by=occupation.ended_by,
            started=self._utc_text(min(item.first_ms for item in used)),
            ended=self._utc_text(max(item.last_ms for item in used)),
            heard_from=self._utc_text(screened.heard_from_ms),
            heard_to=self._utc_text(screened.heard_to_ms),
            kept_s=kept * step_s,
            heard=screened.heard,
            kept=kept,
            without_height=sum(item.kept - item.with_height for item in used),
            set_aside=counts_of(codes),
            initialisations=self._records(),
            receiver=position,
            client=client,
            grid=grid,
            height=height,
            antenna=self.antenna.height,
            uncertainty=None,  # type: ignore[arg-type]  # set by the caller in the next line
            uncertainty_client=None,
            operation=operation,
            epoch_of_observation=self.epoch_of_observation,
        )

    def _records(self) -> list[InitialisationRecord]:
        return [
            InitialisationRecord(
                number=item.number,
                from_utc=self._utc_text(item.first_ms),
                to_utc=self._utc_text(item.last_ms),
                kept=item.kept,
                used=item.used,
                offset_enu_m=_vector(item.offset_enu_m),
                independent=item.independent,
                reason=item.reason,
                u_enu_m=list(item.place.u_enu_m),
            )
            for item in self.judged.initialisations
        ]

    def _uncertainty(self, combined: Combined, found: list[Term], *, with_common: bool = False) -> Uncertainty:
        ellipse = combined.region.ellipse
        lines: list[BudgetLine] = [term.line() for term in found]
        return Uncertainty(
            u_enu_m=list(combined.u_enu_m),
            cov_en_m2=[list(row) for row in combined.cov_en_m2],
            dof_enu=list(combined.dof_enu),
            k95_enu=list(combined.k95_enu),
            ellipse95=Ellipse95(ellipse.major, ellipse.minor, ellipse.azimuth_deg),
            horizontal95_m=combined.horizontal95_m,
            vertical95_m=combined.vertical95_m,
            correlation_time_s=self.mean.tau_s,
            governed_by=self.mean.governed_by,
            method=METHOD,
            budget=lines,
            common=[line.source for line in lines if line.common] if with_common else None,
        )


def _vector(offset: tuple[float, float, float | None] | None) -> list[float | None] | None:
    return None if offset is None else list(offset)


def _resolution(screened: Screened, judged: Judgement, blocks: Blocks) -> Resolution:
    frame = screened.frame
    assert frame is not None  # noqa: S101 - evaluate() refuses earlier
    digits = {
        name: _merged([screened.initialisations[number].digits[name] for number in judged.used])
        for name in ("latitude", "longitude", "altitude", "separation")
    }
    sd_e, sd_n, sd_u = blocks.sd_m()
    metre_per_unit = coordinate_quantum_m(8)
    steps = [digits[name].step_units(8) for name in ("latitude", "longitude")]
    latitude_m = None if steps[0] is None else steps[0] * metre_per_unit
    longitude_m = None if steps[1] is None else steps[1] * metre_per_unit * frame.cos_latitude
    altitude_step = digits["altitude"].step_units(5)
    has_up = blocks.bins(2) is not None
    separation = digits["separation"].fewest_decimals
    return Resolution(
        latitude_step_m=latitude_m,
        longitude_step_m=longitude_m,
        coordinate_u_en_m=(
            mean_resolution_u_m(longitude_m or 0.0, sd_e or 0.0),
            mean_resolution_u_m(latitude_m or 0.0, sd_n or 0.0),
        ),
        altitude_u_m=(
            mean_resolution_u_m(altitude_step * 1e-5, sd_u or 0.0) if has_up and altitude_step is not None else None
        ),
        separation_decimals=separation,
        separation_u_m=constant_resolution_u_m(separation) if has_up and separation is not None else None,
        digits=digits,
    )


def _merged(found: list[Digits]) -> Digits:
    result = Digits()
    for item in found:
        result = result.merged(item)
    return result


def _largest(found: list[Term], axes: tuple[int, ...]) -> str:
    """The budget line that weighs most on these axes, Type A apart: what forbids a figure by staying."""
    best = max(found, key=lambda term: max(term.u_enu_m[axis] or 0.0 for axis in axes), default=None)
    return best.source if best is not None else ""
