"""A reduction as plain lines for a terminal: client's coordinates first, each with its 95 %, frame and epoch."""

from __future__ import annotations

from collections.abc import Iterator

from fieldbook.model.angles import latitude_text, longitude_text, signed_dms_text
from fieldbook.model.local_grid import LocalPosition
from fieldbook.model.reduction import Convergence, Reduction, Uncertainty
from fieldbook.model.rounding import decimals_for, rounded, rounded_up

SECONDS_PER_METRE_DECIMALS = 2  # one second of latitude is 31 m: two decimals of it for each of a metre's, less one


def reduction_lines(reduction: Reduction) -> Iterator[str]:
    """The lines of one reduction."""
    state = "open" if reduction.open else f"ended ({reduction.ended_by})"
    yield f"{reduction.mark}, occupation {reduction.occupation}, {state}: {reduction.started} to {reduction.ended}"
    set_aside = ", ".join(f"{code} {count}" for code, count in sorted(reduction.set_aside.items())) or "none"
    yield f"  epochs kept {reduction.kept} of {reduction.heard} ({reduction.kept_s:.0f} s); set aside: {set_aside}"
    used = sum(item.used for item in reduction.initialisations)
    yield f"  initialisations used {used} of {len(reduction.initialisations)}"
    yield from _client(reduction)
    receiver = reduction.receiver
    yield (
        f"  as observed: {latitude_text(receiver.lat_deg)}  {longitude_text(receiver.lon_deg)}"
        f"{'' if receiver.h_m is None else f'  h {receiver.h_m:.4f} m'}, {receiver.frame_name} ({receiver.frame})"
        f"{'' if receiver.epoch is None else f' at {receiver.epoch:.3f}'}"
    )
    yield f"  95 % in the receiver's frame: {_figures(reduction.uncertainty)}"
    if reduction.uncertainty_client is not None and reduction.operation.steps:
        yield f"  95 % in the client's frame:   {_figures(reduction.uncertainty_client)}"
    yield f"  governed by: {reduction.uncertainty.governed_by}"
    for finding in reduction.findings:
        yield f"  {finding.severity.upper():7} {finding.code}: {finding.text}"
    if reduction.leave is not None:
        yield f"  MAY THE TRIPOD COME DOWN?  {reduction.leave.verdict.upper()}"
        for item in reduction.leave.lines:
            word = "met " if item.met else "OPEN"
            wanted, have = _shown(item.wanted, item.unit), _shown(item.have, item.unit)
            yield f"    {word} {item.line} ({item.scope}): wanted {wanted}, have {have}; {item.text}"


def _shown(value: float | str | None, unit: str) -> str:
    if value is None:
        return "–"
    return value if isinstance(value, str) else f"{value:.4g} {unit}".strip()


def _client(reduction: Reduction) -> Iterator[str]:
    client = reduction.client
    if client is None:
        yield "  no client coordinates: the mark has no ellipsoidal height in the receiver's frame"
        return
    judged = reduction.uncertainty_client or reduction.uncertainty
    metres = decimals_for(judged.horizontal95_m, most=4)
    digits = min(metres + SECONDS_PER_METRE_DECIMALS, 5)
    yield f"  {client.frame_name} ({client.frame}){'' if client.epoch is None else f' at {client.epoch:.3f}'}"
    yield f"    latitude   {latitude_text(client.lat_deg, digits)}"
    yield f"    longitude  {longitude_text(client.lon_deg, digits)}"
    if client.h_m is not None:
        yield f"    ell. height  {rounded(client.h_m, decimals_for(judged.vertical95_m, most=4))} m"
    grid = reduction.grid
    if grid is not None:
        east, north = rounded(grid.easting_m, metres), rounded(grid.northing_m, metres)
        yield f"    {grid.crs_name} ({grid.crs})  E {east}  N {north} m"
        factor = "" if grid.combined_factor is None else f", combined factor {grid.combined_factor:.8f}"
        turn = signed_dms_text(grid.convergence_deg)
        yield f"      convergence {turn} (azimuth = grid bearing + convergence){factor}"
    yield from (f"    {text}" for text in local_lines(reduction.local))
    height = reduction.height
    if height is not None:
        decimals = decimals_for(height.vertical95_m, least=1, most=4)
        known = "not known" if height.vertical95_m is None else f"{rounded_up(height.vertical95_m, decimals)} m"
        yield f"    {height.heading or height.model_name}: {rounded(height.orthometric_m, decimals)} m, 95 % {known}"


def local_lines(found: list[LocalPosition]) -> Iterator[str]:
    """One line per local grid that holds the mark."""
    for item in found:
        plan = decimals_for(item.horizontal95_m, most=4)
        height = ""
        if item.height_m is not None:
            height = f"  H {rounded(item.height_m, decimals_for(item.vertical95_m, most=4))} m"
        where = "" if item.inside else "  OUTSIDE its marks"
        yield (
            f"local grid {item.name}  E {rounded(item.easting_m, plan)}  N {rounded(item.northing_m, plan)} m{height}, "
            f"95 % {rounded_up(item.horizontal95_m, plan)} m, combined factor {item.combined_factor:.8f}{where}"
        )


def _figures(u: Uncertainty) -> str:
    horizontal = rounded_up(u.horizontal95_m, decimals_for(u.horizontal95_m))
    if u.vertical95_m is None:
        return f"circle {horizontal} m, height not known"
    vertical = rounded_up(u.vertical95_m, decimals_for(u.vertical95_m))
    ellipse = u.ellipse95
    digits = decimals_for(u.horizontal95_m)
    axes = f"{rounded_up(ellipse.major_m, digits)} x {rounded_up(ellipse.minor_m, digits)} m"
    return f"circle {horizontal} m, ellipse {axes} at {ellipse.azimuth_deg:.0f}°, height ± {vertical} m"


def settled_line(convergence: Convergence) -> str:
    """Since when both figures have been inside the requirement."""
    if convergence.inside_since is None:
        return "  settled: not inside the requirement at the end"
    return f"  settled: inside the requirement since {convergence.inside_since[11:19]} UTC"
