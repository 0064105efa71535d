"""One occupation, epochs to the mark in the client's frame: the nine steps of the reduction, in their order.

    1 ellipsoidal height per epoch   2 screening   3 initialisations    (columns, screening, initialisations)
    4 mean and covariance            5 antenna     6 frame and epoch    (correlated_mean, antenna, frames)
    7 geoid                          8 grid        9 budget             (geoid, frames, terms, budget)

`OccupationReducer` takes epochs as they come and evaluates at any moment: the live figure and the batch figure are the
same computation on the same state. What cannot be reduced raises `ReductionError` with the remedy; what can is reduced
even where a part of it is unknown, and that part is None.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime, timedelta
from pathlib import Path

from fieldbook.clock import utc_text
from fieldbook.errors import ReductionError
from fieldbook.model.epoch import Epoch
from fieldbook.model.reduction import (
    ClientPosition,
    Convergence,
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
from fieldbook.model.sky import Picture
from fieldbook.model.state import Occupation
from fieldbook.reduce import frames, terms
from fieldbook.reduce.antenna import AntennaReduction, reduce_antenna
from fieldbook.reduce.budget import Combined, Term, combine, welch_satterthwaite
from fieldbook.reduce.convergence import convergence
from fieldbook.reduce.correlated_mean import CorrelatedMean
from fieldbook.reduce.estimate import Estimate, estimate
from fieldbook.reduce.gates import Limits
from fieldbook.reduce.geodesy import moved_along_normal, moved_by_enu
from fieldbook.reduce.geoid import height_above_geoid
from fieldbook.reduce.gridhashes import meant_geoid, require_same_grids
from fieldbook.reduce.initialisations import InitialisationJudge, Judgement
from fieldbook.reduce.motion import motion_findings
from fieldbook.reduce.phase_centre import outside_validity
from fieldbook.reduce.prediction import TimeToGo, TypeA, time_to_go, type_a
from fieldbook.reduce.region import coverage_factor_95
from fieldbook.reduce.screening import Screened, Screening
from fieldbook.reduce.stated import stated_uncertainty
from fieldbook.reduce.trace import TraceStore

METHOD = "Gauss-Markov mean with slow companion, class of fix as prior, GUM budget; bivariate t region"


@dataclass
class Reduced:
    """A reduction with what checks, screens and certificates need beside it."""

    reduction: Reduction
    trace: Trace
    horizontal: TimeToGo
    vertical: TimeToGo
    horizontal_forbidden_by: str
    vertical_forbidden_by: str
    estimate: Estimate
    screened: Screened
    judged: Judgement
    notes: list[Finding] = field(default_factory=list)  # findings of the steps themselves
    running: Callable[[], Convergence] | None = field(default=None, repr=False, compare=False)
    _converged: Convergence | None = field(default=None, init=False, repr=False, compare=False)

    def convergence(self) -> Convergence:
        """The running mean and its 95 % figures; the first call takes about a fifth of a second.

        Raises:
            ValueError: this result was not made by a reduction.
        """
        if self._converged is None:
            if self.running is None:
                raise ValueError("only a reduction can tell how its mean came about")
            self._converged = self.running()
        return self._converged

    @property
    def mean(self) -> CorrelatedMean:
        """The mean with its Type A uncertainty."""
        return self.estimate.mean


def reduce_occupation(
    occupation: Occupation,
    epochs: Iterable[Epoch],
    search_dirs: Sequence[Path],
    pictures: Sequence[Picture] | None = None,
) -> Reduced:
    """All epochs at once.

    Args:
        occupation: as folded from the book.
        epochs: its rows, in order of hearing.
        search_dirs: folders in which a geoid model is looked for before the package's own.
        pictures: satellites used, one picture a minute, for the pattern of a calibrated antenna.

    Raises:
        ReductionError: nothing usable, or a frame, geoid or grid that cannot be reached.
        UsageError: a frame or grid refused by kind.
    """
    reducer = OccupationReducer(occupation)
    reducer.push(epochs)
    return reducer.evaluate(occupation, search_dirs, pictures)


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

    def evaluate(
        self, occupation: Occupation, search_dirs: Sequence[Path], pictures: Sequence[Picture] | None = None
    ) -> Reduced:
        """The reduction as if the occupation ended now. Errors as in `reduce_occupation`."""
        screened = self._screening.evaluate(day0_known=occupation.day0 is not None)
        if screened.kept == 0 or screened.frame is None:
            raise _nothing_usable(screened)
        judged = self._judge.judge(screened, occupation.initialisation_decisions)
        found = estimate(screened, judged, self._override)
        if found is None:
            raise ReductionError(
                "No initialisation is left to reduce: all were set aside.",
                "Strike the decision that sets one aside, or occupy the mark again.",
                code="no_usable_fix",
            )
        frames.use_grid_folders(search_dirs)
        return _Steps(occupation, screened, judged, found, pictures).reduced(self._traces, search_dirs)


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
        remedy = "The receiver sent no date (without a fix it has none to send): look at the fix first; if it had one, "
        remedy += "record the date: `fieldbook entry BOOK decision --set date=YYYY-MM-DD --set reason=...`."
    return ReductionError(f"None of {screened.heard} epochs can be used ({counts}).", remedy, code="no_usable_fix")


class _Steps:
    """Steps 4 to 9 for one evaluation."""

    def __init__(
        self,
        occupation: Occupation,
        screened: Screened,
        judged: Judgement,
        found: Estimate,
        pictures: Sequence[Picture] | None,
    ) -> None:
        self.occupation, self.screened, self.judged, self.found = occupation, screened, judged, found
        self.session = occupation.session
        self.mean = found.mean
        self.notes: list[Finding] = []
        self.antenna = self._antenna(pictures)
        observed = self._epoch_utc()
        self.epoch_of_observation = frames.decimal_year(observed)
        self.notes += outside_validity(self.session.antenna.calibration, observed)

    def _antenna(self, pictures: Sequence[Picture] | None) -> AntennaReduction:
        explained = any("height_difference" in entry.body for entry in self.occupation.decisions)
        result = reduce_antenna(
            self.session.setup,
            self.session.antenna,
            self.occupation.heights,
            difference_explained=explained,
            pictures=pictures,
            carrier_phase=self.found.fix_class.uses_carrier_phase,
        )
        self.notes += result.findings
        return result

    def _epoch_utc(self) -> datetime:
        """Mean UTC of the kept epochs."""
        if self.occupation.day0 is None:
            raise ReductionError(
                "The date of the occupation is not known.",
                "Record it: `fieldbook entry BOOK decision --set date=YYYY-MM-DD --set reason=...`.",
                code="date_unknown",
            )
        return self._utc(self.found.mean_instant_ms)

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
        lat, lon, h = self.found.lat_deg, self.found.lon_deg, self.found.h_m
        east, north, down = self.antenna.offset_enu_m
        level = 0.0 if h is None else h
        if east or north:
            lat, lon, _ = moved_by_enu((lat, lon, level), (east, north, 0.0))
        if h is None or down is None:
            return lat, lon, None
        return moved_along_normal((lat, lon, h), down)

    # -- the budget ----------------------------------------------------------------------------------------

    def own_terms(self, part: TypeA, of: Estimate | None = None) -> list[Term]:
        """All lines of the mark in the receiver's frame, for the Type A part as it is or as predicted.

        `of`: an estimate of the occupation's beginning, instead of the whole.
        """
        found = of or self.found
        east_m, north_m, up_m = found.resolution.u_enu_m
        separation_m = found.resolution.separation_u_m if found.mean.up is not None else None
        return [
            terms.mean_term(part.u_enu_m, part.dof_enu, part.rho_en),
            *terms.floor_terms(found.floor_enu_m, found.fix_class.label),
            *terms.resolution_terms((east_m or 0.0, north_m or 0.0), up_m, separation_m),
            *terms.setup_terms(self.session.setup, self.antenna),
            *terms.station_terms(self.session.corrections),
            *terms.disagreement_term(self.judged.disagreement_enu_m),
        ]

    def reduced(self, traces: TraceStore, search_dirs: Sequence[Path]) -> Reduced:
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
        up = self.mean.up
        mean_enu = (self.mean.east.mean_m, self.mean.north.mean_m, None if up is None else up.mean_m)
        return Reduced(
            reduction=reduction,
            trace=traces.trace(
                self.judged.codes, self.screened.initialisation, self.found.frame, mean_enu, self.screened.heard_from_ms
            ),
            horizontal=horizontal,
            vertical=vertical,
            horizontal_forbidden_by=terms.heaviest_source([*own[1:], *judged_terms], (0, 1)),
            vertical_forbidden_by=terms.heaviest_source([*own[1:], *judged_terms], (2,)),
            estimate=self.found,
            screened=self.screened,
            judged=self.judged,
            notes=self.notes,
            running=lambda: self._convergence(judged_terms),
        )

    def _convergence(self, extra: list[Term]) -> Convergence:
        def figures(part: Estimate) -> tuple[float, float | None]:
            printed = combine([*self.own_terms(type_a(part.mean), part), *extra])
            return printed.horizontal95_m, printed.vertical95_m

        required, start = self.session.requirement, self.screened.heard_from_ms
        wanted = (required.horizontal_95_m, required.vertical_95_m)
        zero_ms = self.found.first_ms if start is None else start
        return convergence(self.found, figures, wanted, self._utc_text, zero_ms)

    def _times_to_go(self, extra: list[Term]) -> tuple[TimeToGo, TimeToGo]:
        requirement, margin = self.session.requirement, self.found.fix_class.margin

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
        require_same_grids(self.occupation, operation)
        if keep:
            would = frames.operation_codes(transform(None)[1])
            if would != frames.operation_codes(operation):
                text = f"PROJ would now choose {' + '.join(would)}; the recorded operation {' + '.join(keep)} was kept."
                self.notes.append(Finding("operation_differs", "caution", text, {"recorded": keep, "would_use": would}))
        self.notes += motion_findings(choice, operation, self.epoch_of_observation)
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
            meant=meant_geoid(self.occupation),
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
        found = self.found
        return Reduction(
            mark=occupation.mark,
            occupation=occupation.number,
            open=occupation.open,
            ended_by=occupation.ended_by,
            started=self._utc_text(found.first_ms),
            ended=self._utc_text(found.last_ms),
            heard_from=self._utc_text(screened.heard_from_ms),
            heard_to=self._utc_text(screened.heard_to_ms),
            kept_s=found.kept_s,
            heard=screened.heard,
            kept=found.kept,
            without_height=found.without_height,
            set_aside=self.judged.set_aside,
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
        return stated_uncertainty(
            combined,
            [term.line() for term in found],
            correlation_time_s=self.mean.tau_s,
            governed_by=self.mean.governed_by,
            method=METHOD,
            with_common=with_common,
        )


def _vector(offset: tuple[float, float, float | None] | None) -> list[float | None] | None:
    return None if offset is None else list(offset)
