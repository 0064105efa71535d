"""Fitting a local grid to reduced marks of a book, as the entry that keeps it with its marks."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from fieldbook.book.store import Book
from fieldbook.errors import ReductionError, UsageError
from fieldbook.model.canonical import Tree, fixed
from fieldbook.model.local_grid import ControlMark, LocalGrid
from fieldbook.occupy.local_positions import control_of, fits, mark_tree
from fieldbook.occupy.mark_results import MarkPosition, mark_position
from fieldbook.reduce import frames
from fieldbook.reduce.local_grid import fit_local_grid


@dataclass(frozen=True)
class Given:
    """A mark's local coordinates as somebody states them, with their standard uncertainties."""

    mark: str
    east_m: float
    north_m: float
    u_m: float
    height_m: float | None = None
    u_height_m: float | None = None


@dataclass(frozen=True)
class Prepared:
    """A fit and the body of the entry that keeps it."""

    grid: LocalGrid
    body: Tree


def fit_from_book(book: Book, name: str, given: Sequence[Given], *, tilt: bool, source: str) -> Prepared:
    """Fit a local grid to reduced marks of the book; nothing is written.

    Raises:
        UsageError: no name or source, an unknown mark, marks in different frames or epochs, or a fit that is refused.
        ReductionError: a mark cannot be reduced, or has no height.
    """
    if not name.strip() or not source.strip():
        raise UsageError("A local grid needs a name and a source.", "Say where its coordinates come from.")
    ends = [mark_position(book, item.mark) for item in given]
    if ends:
        _check_together(ends)
    codes = {tuple(frames.operation_codes(one.reduction.operation)) for end in ends for one in end.members}
    control = [_control(item, end, one_way=len(codes) == 1) for item, end in zip(given, ends, strict=True)]
    frame = ends[0].client.frame if ends else ""
    grid = fit_local_grid(name, frame, control, tilt=tilt)
    body: Tree = {
        "name": name,
        "frame": grid.frame,
        "epoch": fixed(ends[0].client.epoch, 4),
        "operation": list(codes.pop()) if len(codes) == 1 else None,
        "tilt": tilt,
        "source": source,
        "marks": [
            {**mark_tree(item), "occupations": [one.reduction.occupation for one in end.members]}
            for item, end in zip(control, ends, strict=True)
        ],
        "fitted": {
            "lat0_deg": fixed(grid.lat0_deg, 5),
            "lon0_deg": fixed(grid.lon0_deg, 5),
            "scale0": fixed(grid.scale0, 12),
            "plane_height_m": fixed(grid.plane_height_m, 4),
            "scale": fixed(grid.scale, 10),
            "variance_factor": fixed(grid.variance_factor, 4),
        },
    }
    return Prepared(grid, body)


def _check_together(ends: Sequence[MarkPosition]) -> None:
    first = ends[0].client
    for end in ends:
        one = end.client
        if (
            one.frame != first.frame
            or one.frame_name != first.frame_name
            or not fits({"frame": first.frame, "epoch": None if first.epoch is None else str(first.epoch)}, one)
        ):
            raise UsageError(
                f"{end.result.mark} is in another frame or epoch than {ends[0].result.mark}.",
                "A local grid is fitted to marks of one frame and epoch.",
                code="frames_differ",
            )
        if one.h_m is None:
            raise ReductionError(
                f"The ellipsoidal height of {end.result.mark} is not known.",
                "A local grid needs it for the plane of its ground lengths.",
                code="no_height",
            )


def _control(given: Given, end: MarkPosition, *, one_way: bool) -> ControlMark:
    client = end.client
    measured = end.result.uncertainty if one_way else end.uncertainty
    assert client.h_m is not None and measured is not None  # noqa: S101, PT018 - checked by _check_together
    (ee, en), (ne, nn) = measured.cov_en_m2
    exact = ControlMark(
        given.mark, client.lat_deg, client.lon_deg, client.h_m, ((ee, en), (ne, nn)), measured.u_enu_m[2],
        given.east_m, given.north_m, given.u_m, given.height_m, given.u_height_m,
    )  # fmt: skip
    return control_of(mark_tree(exact))  # rounded as it is kept, so that the fit of today is that of tomorrow
