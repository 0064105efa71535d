"""A mark with several occupations as plain lines: the combined coordinates, how the occupations agree, what is owed."""

from __future__ import annotations

from collections.abc import Iterator

from fieldbook.commands.reduction_text import local_lines
from fieldbook.model.angles import latitude_text, longitude_text
from fieldbook.model.reduction import MarkOccupation, MarkResult, Repeat, Uncertainty
from fieldbook.model.rounding import decimals_for, rounded, rounded_up


def mark_lines(mark: MarkResult) -> Iterator[str]:
    """The lines of one mark."""
    used = ", ".join(str(item.occupation) for item in mark.used) or "none"
    yield f"MARK {mark.mark}: occupations {', '.join(map(str, mark.occupations))}; combined: {used}"
    yield from _position(mark)
    if mark.uncertainty is not None:
        yield f"  95 % in the receiver's frame: {_figures(mark.uncertainty)}"
    if mark.uncertainty_client is not None:
        yield f"  95 % in the client's frame:   {_figures(mark.uncertainty_client)}"
    for item in mark.used:
        yield f"  {_occupation(item)}"
    for pair in mark.repeats:
        yield f"  {pair.first} against {pair.second}: {_difference(pair)}; {pair.text}"
        yield f"    {pair.independence.text}; changed: {', '.join(pair.independence.changed) or 'nothing that is known'}"
    for finding in mark.findings:
        yield f"  {finding.severity.upper():7} {finding.code}: {finding.text}"
    if mark.leave is not None:
        yield f"  IS THE MARK DONE?  {'YES' if mark.leave.verdict == 'good to leave' else 'NOT YET'}"
        for line in mark.leave.lines:
            if not line.met:
                yield f"    OPEN {line.line}: wanted {line.wanted} {line.unit}, have {_shown(line.have)} {line.unit}; {line.text}"


def _position(mark: MarkResult) -> Iterator[str]:
    client, stated = mark.client, mark.uncertainty_client
    if client is None or stated is None:
        yield "  no common coordinates"
        return
    digits = min(decimals_for(stated.horizontal95_m, most=4) + 2, 5)
    lat, lon = latitude_text(client.lat_deg, digits), longitude_text(client.lon_deg, digits)
    height = (
        ""
        if client.h_m is None
        else f"  h {rounded(client.h_m, decimals_for(stated.vertical95_m, most=4))} m (ellipsoidal)"
    )
    epoch = "" if client.epoch is None else f" at {client.epoch:.3f}"
    yield f"  {lat}  {lon}{height}, {client.frame_name} ({client.frame}){epoch}"
    if mark.grid is not None:
        metres = decimals_for(stated.horizontal95_m, most=4)
        east, north = rounded(mark.grid.easting_m, metres), rounded(mark.grid.northing_m, metres)
        yield f"  {mark.grid.crs_name} ({mark.grid.crs})  E {east}  N {north} m"
    yield from (f"  {text}" for text in local_lines(mark.local))
    if mark.height is not None:
        decimals = decimals_for(mark.height.vertical95_m, least=1, most=4)
        name = mark.height.heading or mark.height.model_name
        yield f"  {name}: {rounded(mark.height.orthometric_m, decimals)} m"


def _occupation(item: MarkOccupation) -> str:
    east, north, up = item.residual_enu_m
    weight = 100 * (item.weight_enu[0] + item.weight_enu[1]) / 2
    least = min(item.plan_significance, 1.0 if item.height_significance is None else item.height_significance)
    return (
        f"occupation {item.occupation} ({item.fix_class}, {item.kept_s:.0f} s): weight {weight:.1f} %, off by "
        f"{_mm(east)} E, {_mm(north)} N, {_mm(up)} up; larger by chance in {100 * least:.0f} %"
    )


def _difference(pair: Repeat) -> str:
    up = pair.difference_enu_m[2]
    return (
        f"plan {_mm(pair.plan_m)} (tolerance {1000 * pair.plan_tolerance_m:.0f}), "
        f"height {_mm(up)} (tolerance {1000 * pair.height_tolerance_m:.0f})"
    )


def _figures(u: Uncertainty) -> str:
    circle = rounded_up(u.horizontal95_m, decimals_for(u.horizontal95_m))
    if u.vertical95_m is None:
        return f"circle {circle} m, height not known"
    return f"circle {circle} m, height ± {rounded_up(u.vertical95_m, decimals_for(u.vertical95_m))} m"


def _mm(value_m: float | None) -> str:
    return "–" if value_m is None else f"{1000 * value_m:.0f} mm"


def _shown(value: float | str | None) -> str:
    if value is None:
        return "–"
    return value if isinstance(value, str) else f"{value:.4g}"
