"""A mark as its certificate needs it: the combination written as one reduction, with the evidence of each occupation.

The combined mark is given in the client's frame. What was observed is in the receiver's frame, at the date of each
occupation; there the combined mark is stated at the epoch of the occupation with the greatest weight, whose own position
is moved by what separates it from the combination (centimetres: the two frames' axes are parallel to 1e-7, so that is
right to a nanometre). Its trace is moved alike, so that the figures show its fixes about the combined mark.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

from fieldbook.book.store import Book
from fieldbook.errors import UsageError
from fieldbook.model.reduction import MarkResult, Reduction, Trace
from fieldbook.model.state import BookState, Occupation
from fieldbook.occupy.marks_combined import combine_marks
from fieldbook.occupy.reductions import reduce_book, search_dirs
from fieldbook.reduce import frames
from fieldbook.reduce.geodesy import moved_by_enu
from fieldbook.reduce.occupation import Reduced

NOT_IN_THE_WAY = frozenset({"simulated"})  # keeps a draft a draft, as with one occupation


@dataclass(frozen=True)
class WholeMark:
    """A combined mark.

    principal: occupation with the greatest weight. reduction, trace: the combination, in the shape of a reduction of it.
    members: what was combined, in order of number.
    """

    result: MarkResult
    principal: Occupation
    reduction: Reduction
    trace: Trace
    members: list[tuple[Occupation, Reduced]]


def whole_mark(book: Book, mark: str, only: Sequence[int] | None = None) -> WholeMark:
    """The mark of all its occupations together.

    Args:
        only: these occupations alone, as a certificate issued before later ones has them.

    Raises:
        UsageError: no such mark; fewer than two occupations go together; one is open; a finding of the mark stops it.
        ReductionError: grid or geoid cannot be reached.
    """
    state = book.state()
    reduced, failed = reduce_book(book, mark)
    if only is not None:
        reduced = [item for item in reduced if item.reduction.occupation in only]
        failed = [item for item in failed if item.occupation in only]
    results = combine_marks(state, reduced, search_dirs(book), failed)
    result = next((item for item in results if item.mark == mark), None)
    if result is None:
        raise failed[0].error if failed else UsageError(f"Mark {mark} has none of those occupations any more.")
    return whole_of(state, result, reduced)


def whole_of(state: BookState, result: MarkResult, reduced: Sequence[Reduced]) -> WholeMark:
    """A mark whose occupations are reduced and combined already.

    Args:
        reduced: every reduction of the mark, in any order; others are left alone.

    Raises:
        UsageError: as `whole_mark`.
    """
    _check(result)
    by_number = {item.reduction.occupation: item for item in reduced}
    members = [(state.occupations[item.occupation], by_number[item.occupation]) for item in result.used]
    best = max(result.used, key=lambda item: (sum(item.weight_enu[:2]), item.occupation))
    own = by_number[best.occupation]
    offset = [-(value or 0.0) for value in best.residual_enu_m]
    assert result.uncertainty is not None  # noqa: S101 - two occupations were combined
    return WholeMark(
        result,
        state.occupations[best.occupation],
        _as_reduction(result, own.reduction, (offset[0], offset[1], offset[2])),
        _moved(own.trace, (-offset[0], -offset[1], -offset[2])),
        members,
    )


def _check(result: MarkResult) -> None:
    numbers = ", ".join(map(str, result.occupations))
    remedy = f"Say which with --occupation N ({numbers}); the others print as repeats."
    if len(result.used) < 2:
        why = "; ".join(f"{item.occupation}: {item.text}" for item in result.not_combined)
        raise UsageError(
            f"The occupations {numbers} of mark {result.mark} cannot be combined ({why}).",
            remedy,
            code="several_occupations",
        )
    running = [str(item.occupation) for item in result.used if item.open]
    if running:
        raise UsageError(
            f"Occupation {', '.join(running)} of {result.mark} is still open.",
            "End it first: fieldbook entry BOOK end.",
            code="open",
        )
    stops = [item for item in result.findings if item.severity == "stop" and item.code not in NOT_IN_THE_WAY]
    if stops:
        raise UsageError(
            f"The occupations {numbers} of mark {result.mark} cannot be certified together: {stops[0].text}",
            remedy,
            code="several_occupations",
        )


def _as_reduction(result: MarkResult, own: Reduction, offset_m: tuple[float, float, float]) -> Reduction:
    place = own.receiver
    ellipsoid = frames.frame_info(place.frame).ellipsoid
    lat, lon, h = moved_by_enu((place.lat_deg, place.lon_deg, place.h_m or 0.0), offset_m, ellipsoid)
    assert result.uncertainty is not None  # noqa: S101 - as above
    return replace(
        own,
        started=result.started,
        ended=result.ended,
        kept_s=result.kept_s,
        receiver=replace(place, lat_deg=lat, lon_deg=lon, h_m=None if place.h_m is None else h),
        client=result.client,
        grid=result.grid,
        height=result.height,
        uncertainty=result.uncertainty,
        uncertainty_client=result.uncertainty_client,
        findings=result.findings,
        leave=result.leave,
        local=result.local,
    )


def _moved(trace: Trace, offset_m: tuple[float, float, float]) -> Trace:
    east, north, up = offset_m
    return replace(
        trace,
        east_m=[value + east for value in trace.east_m],
        north_m=[value + north for value in trace.north_m],
        up_m=[None if value is None else value + up for value in trace.up_m],
    )
