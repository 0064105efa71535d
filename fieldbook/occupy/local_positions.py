"""A book's local grids applied to its reductions: local coordinates where they hold, and what is said where they do not.

An entry `local_grid` holds what went in (the marks' coordinates in both systems with their uncertainties), and the fit is
made again from that whenever it is used: there is no second truth. The frame operation is common to all marks and is left
out of their uncertainty, as long as the mark to be placed came by the same operation; else its whole uncertainty counts.
"""

from __future__ import annotations

import json
from collections.abc import Iterable, Sequence
from decimal import Decimal
from functools import lru_cache
from typing import Any

from fieldbook.errors import ReductionError, UsageError
from fieldbook.model.canonical import Tree, canonical_json, fixed
from fieldbook.model.entry import Entry
from fieldbook.model.local_grid import ControlMark, LocalGrid, LocalPosition
from fieldbook.model.reduction import ClientPosition, Finding, MarkResult, Reduction, Uncertainty
from fieldbook.model.state import BookState
from fieldbook.reduce import frames
from fieldbook.reduce.constants import SAME_EPOCH_YEARS
from fieldbook.reduce.local_grid import fit_local_grid, place_in
from fieldbook.reduce.occupation import Reduced


def grid_of(entry: Entry) -> LocalGrid:
    """The grid of an entry, fitted from what it keeps.

    Raises:
        UsageError: its marks make no grid (a book that was tampered with, or another version's rules).
    """
    return _fitted(canonical_json(entry.body))


@lru_cache(maxsize=32)
def _fitted(text: str) -> LocalGrid:
    body = json.loads(text)
    control = [control_of(tree) for tree in body["marks"]]
    return fit_local_grid(str(body["name"]), str(body["frame"]), control, tilt=bool(body["tilt"]))


def attach_to_reductions(state: BookState, reduced: Iterable[Reduced]) -> None:
    """Local coordinates and what is to be said of them, put into every reduction of the book."""
    for item in reduced:
        occupation = state.occupations[item.reduction.occupation]
        local, said = _positions(
            state,
            item.reduction.client,
            _of_reduction(item.reduction),
            frames.operation_codes(item.reduction.operation),
            accepted=occupation.outside_hull_accepted,
        )
        item.reduction.local = local
        item.reduction.findings += said


def attach_to_marks(state: BookState, results: Iterable[MarkResult], reduced: Sequence[Reduced]) -> None:
    """The same for combined marks; outside a hull one decision of its occupations is enough."""
    by_number = {item.reduction.occupation: item.reduction for item in reduced}
    for result in results:
        members = [by_number[item.occupation] for item in result.used]
        if result.uncertainty is None or result.uncertainty_client is None or not members:
            continue
        accepted = any(state.occupations[one.occupation].outside_hull_accepted for one in members)
        codes = {tuple(frames.operation_codes(one.operation)) for one in members}
        stated = (result.uncertainty, result.uncertainty_client)
        result.local, said = _positions(
            state, result.client, stated, list(codes.pop()) if len(codes) == 1 else None, accepted=accepted
        )
        result.findings += said


def _of_reduction(reduction: Reduction) -> tuple[Uncertainty, Uncertainty]:
    return reduction.uncertainty, reduction.uncertainty_client or reduction.uncertainty


def _positions(
    state: BookState,
    client: ClientPosition | None,
    stated: tuple[Uncertainty, Uncertainty],
    codes: list[str] | None,
    *,
    accepted: bool,
) -> tuple[list[LocalPosition], list[Finding]]:
    """Local positions of a mark, and the grids of its frame it lies outside of."""
    found: list[LocalPosition] = []
    said: list[Finding] = []
    for name, entry in state.local_grids.items():
        if client is None or client.h_m is None or not fits(entry.body, client):
            continue
        uncertainty = stated[0] if codes is not None and codes == entry.body.get("operation") else stated[1]
        try:
            placed = place_in(
                grid_of(entry), client.lat_deg, client.lon_deg, client.h_m, uncertainty, outside_accepted=accepted
            )
        except (ReductionError, UsageError) as error:
            said.append(Finding(error.code, "info", f"No local coordinates: {error}", {"grid": name}))
            continue
        placed.entry = entry.seq
        found.append(placed)
        if not placed.inside:
            text = f"Outside the marks that made the local grid {name}: accepted by decision, nothing checks it there."
            said.append(Finding("outside_hull", "caution", text, {"grid": name}))
    return found, said


def fits(body: Tree, client: ClientPosition) -> bool:
    """Same frame; in a moving one also the same epoch."""
    if body["frame"] != client.frame:
        return False
    epoch = body.get("epoch")
    if epoch is None or client.epoch is None:
        return epoch is None and client.epoch is None
    return abs(float(epoch) - client.epoch) <= SAME_EPOCH_YEARS


def mark_tree(item: ControlMark) -> Tree:
    return {
        "mark": item.mark,
        "lat_deg": fixed(item.lat_deg, 12),
        "lon_deg": fixed(item.lon_deg, 12),
        "h_m": fixed(item.h_m, 6),
        "cov_en_m2": [[fixed(value, 12) for value in row] for row in item.cov_en_m2],
        "u_up_m": fixed(item.u_up_m, 7),
        "east_m": fixed(item.east_m, 6),
        "north_m": fixed(item.north_m, 6),
        "u_m": fixed(item.u_m, 6),
        "height_m": fixed(item.height_m, 6),
        "u_height_m": fixed(item.u_height_m, 6),
    }


def control_of(tree: dict[str, Any]) -> ControlMark:
    def number(key: str) -> float | None:
        return None if tree.get(key) is None else float(Decimal(tree[key]))

    (ee, en), (ne, nn) = ([float(Decimal(value)) for value in row] for row in tree["cov_en_m2"])
    return ControlMark(
        str(tree["mark"]),
        float(Decimal(tree["lat_deg"])),
        float(Decimal(tree["lon_deg"])),
        float(Decimal(tree["h_m"])),
        ((ee, en), (ne, nn)),
        number("u_up_m"),
        float(Decimal(tree["east_m"])),
        float(Decimal(tree["north_m"])),
        float(Decimal(tree["u_m"])),
        number("height_m"),
        number("u_height_m"),
    )
