"""The position's part of the facts: coordinates in both frames, grid, heights, uncertainty statements, operation.

Stored numbers are decimal strings with 7 decimals of a metre and 12 of a degree, never rounded to their
uncertainty; beside them stand `printed` texts, in which value and 95 % uncertainty are rounded together, as the last
step (GUM 7.2.6).
"""

from __future__ import annotations

import math

from fieldbook.certificate.words import CONVERGENCE_SENTENCE, FACTOR_SENTENCE, GOVERNED_WORDS
from fieldbook.model.angles import latitude_text, longitude_text, signed_dms_text
from fieldbook.model.canonical import Tree, fixed
from fieldbook.model.reduction import BudgetLine, Operation, OperationStep, Reduction, Uncertainty
from fieldbook.model.rounding import decimals_for, rounded, rounded_up

METRE_DECIMALS = 7
DEGREE_DECIMALS = 12
FACTOR_DECIMALS = 10
UNKNOWN = "–"


def metres(value: float | None) -> str | None:
    """A length in metres as stored: 7 decimals, None stays None."""
    return fixed(value, METRE_DECIMALS)


def epoch_text(epoch: float | None) -> str | None:
    """A decimal year with the digits that matter: `2020.0`, `2027.1712`."""
    if epoch is None:
        return None
    text = f"{epoch:.4f}".rstrip("0")
    return text + "0" if text.endswith(".") else text


def plain(value: float | None, decimals: int) -> str:
    """A figure for a table, a dash where it is not known."""
    return UNKNOWN if value is None else rounded(value, decimals)


def dof_text(dof: float | None) -> str:
    """Degrees of freedom, infinite where none limits."""
    return "∞" if dof is None else rounded(dof, 1)


def place_decimals(uncertainty: Uncertainty) -> tuple[int, int]:
    """Decimals of a metre at which plan and height are printed, two digits of their 95 % figures."""
    plan = decimals_for(uncertainty.horizontal95_m, most=4)
    return plan, decimals_for(uncertainty.vertical95_m or uncertainty.horizontal95_m, most=4)


def geodetic_printed(lat_deg: float, lon_deg: float, h_m: float | None, uncertainty: Uncertainty) -> Tree:
    """Latitude, longitude and ellipsoidal height with their 95 % figures, rounded together.

    One second of arc is 31 m: two more decimals of a second than of a metre.
    """
    plan, up = place_decimals(uncertainty)
    vertical = uncertainty.vertical95_m
    return {
        "latitude": latitude_text(lat_deg, plan + 2),
        "longitude": longitude_text(lon_deg, plan + 2),
        "height_m": None if h_m is None else rounded(h_m, up),
        "horizontal95_m": rounded_up(uncertainty.horizontal95_m, plan),
        "vertical95_m": None if vertical is None else rounded_up(vertical, up),
    }


def receiver_facts(reduction: Reduction) -> Tree:
    """The mark in the receiver's frame: what was measured."""
    place = reduction.receiver
    return {
        "frame": place.frame,
        "frame_name": place.frame_name,
        "epoch": epoch_text(place.epoch),
        "lat_deg": fixed(place.lat_deg, DEGREE_DECIMALS),
        "lon_deg": fixed(place.lon_deg, DEGREE_DECIMALS),
        "h_m": metres(place.h_m),
        "printed": geodetic_printed(place.lat_deg, place.lon_deg, place.h_m, reduction.uncertainty),
    }


def client_facts(reduction: Reduction) -> Tree | None:
    """The mark in the client's frame, geodetic and geocentric; None where it cannot be given."""
    place = reduction.client
    if place is None:
        return None
    uncertainty = reduction.uncertainty_client or reduction.uncertainty
    decimals = min(place_decimals(uncertainty))
    printed = geodetic_printed(place.lat_deg, place.lon_deg, place.h_m, uncertainty)
    for name, value in (("x_m", place.x_m), ("y_m", place.y_m), ("z_m", place.z_m)):
        printed[name] = None if value is None else rounded(value, decimals)
    return {
        "frame": place.frame,
        "frame_name": place.frame_name,
        "epoch": epoch_text(place.epoch),
        "static": place.epoch is None,
        "lat_deg": fixed(place.lat_deg, DEGREE_DECIMALS),
        "lon_deg": fixed(place.lon_deg, DEGREE_DECIMALS),
        "h_m": metres(place.h_m),
        "x_m": metres(place.x_m),
        "y_m": metres(place.y_m),
        "z_m": metres(place.z_m),
        "printed": printed,
    }


def grid_facts(reduction: Reduction) -> Tree | None:
    """Grid coordinates with convergence (and the sentence that fixes its sign), scale, elevation, combined factor."""
    grid = reduction.grid
    if grid is None:
        return None
    plan = place_decimals(reduction.uncertainty_client or reduction.uncertainty)[0]
    factors = {
        "scale_factor": grid.scale_factor,
        "elevation_factor": grid.elevation_factor,
        "combined_factor": grid.combined_factor,
    }
    return {
        "crs": grid.crs,
        "crs_name": grid.crs_name,
        "zone": grid.zone_text or None,
        "easting_m": metres(grid.easting_m),
        "northing_m": metres(grid.northing_m),
        "convergence_deg": fixed(grid.convergence_deg, DEGREE_DECIMALS),
        **{name: fixed(value, FACTOR_DECIMALS) for name, value in factors.items()},
        "convergence_sign": CONVERGENCE_SENTENCE,
        "factor_meaning": FACTOR_SENTENCE,
        "printed": {
            "easting_m": rounded(grid.easting_m, plan),
            "northing_m": rounded(grid.northing_m, plan),
            "convergence": signed_dms_text(grid.convergence_deg, 1),
            **{name: None if value is None else rounded(value, 8) for name, value in factors.items()},
        },
    }


def height_facts(reduction: Reduction) -> Tree | None:
    """Height by the geoid model, with the model's own heading; no stated 95 % where the model states none."""
    height = reduction.height
    if height is None:
        return None
    fallback = place_decimals(reduction.uncertainty_client or reduction.uncertainty)[1]
    stated = height.vertical95_m
    decimals = fallback if stated is None else decimals_for(stated, most=4)
    return {
        "model": height.model,
        "model_name": height.model_name,
        "model_sha256": height.model_sha256,
        "model_frame": height.model_frame,
        "datum": height.datum,
        "heading": height.heading or f"height above geoid model {height.model_name}",
        "undulation_m": metres(height.undulation_m),
        "undulation_u_m": metres(height.undulation_u_m),
        "orthometric_m": metres(height.orthometric_m),
        "vertical95_m": metres(stated),
        "printed": {
            "value_m": rounded(height.orthometric_m, decimals),
            "undulation_m": rounded(height.undulation_m, max(decimals, 3)),
            "undulation_u_m": None if height.undulation_u_m is None else rounded(height.undulation_u_m, 3),
            "vertical95_m": None if stated is None else rounded_up(stated, decimals),
        },
    }


def uncertainty_facts(uncertainty: Uncertainty, frame_words: str) -> Tree:
    """One uncertainty statement: both 95 % figures, coverage factors, degrees of freedom, ellipse, budget."""
    in_mm = uncertainty.horizontal95_m < 0.5
    east, north, up = uncertainty.u_enu_m
    return {
        "u_enu_m": [metres(value) for value in uncertainty.u_enu_m],
        "cov_en_m2": [[fixed(value, 14) for value in row] for row in uncertainty.cov_en_m2],
        "dof_enu": [fixed(value, 3) for value in uncertainty.dof_enu],
        "k95_enu": [fixed(value, 4) for value in uncertainty.k95_enu],
        "ellipse95": {
            "major_m": metres(uncertainty.ellipse95.major_m),
            "minor_m": metres(uncertainty.ellipse95.minor_m),
            "azimuth_deg": fixed(uncertainty.ellipse95.azimuth_deg, 4),
        },
        "horizontal95_m": metres(uncertainty.horizontal95_m),
        "vertical95_m": metres(uncertainty.vertical95_m),
        "correlation_time_s": fixed(uncertainty.correlation_time_s, 1),
        "governed_by": uncertainty.governed_by,
        "method": uncertainty.method,
        "common": None if uncertainty.common is None else list(uncertainty.common),
        "budget": [_budget_line(line, in_mm=in_mm) for line in uncertainty.budget],
        "printed": {
            **_printed_region(uncertainty),
            "budget_unit": "mm" if in_mm else "m",
            "combined": [_size(value, in_mm=in_mm) for value in (east, north, up)],
            "sentence": _sentence(uncertainty, frame_words),
            "obtained": _obtained(uncertainty),
        },
    }


def _budget_line(line: BudgetLine, *, in_mm: bool) -> Tree:
    return {
        "source": line.source,
        "type": line.type,
        "distribution": line.distribution,
        "u_enu_m": [metres(value) for value in line.u_enu_m],
        "dof": fixed(line.dof, 2),
        "common": line.common,
        "note": line.note or None,
        "printed": {"u": [_size(value, in_mm=in_mm) for value in line.u_enu_m], "dof": dof_text(line.dof)},
    }


def _size(value_m: float | None, *, in_mm: bool) -> str:
    """A standard uncertainty for the budget; a dash where the line says nothing of that axis."""
    if value_m is None or value_m == 0.0:
        return UNKNOWN
    text = rounded(value_m * 1000, 1) if in_mm else rounded(value_m, 3)
    return text if float(text) > 0 else "< 0.1" if in_mm else "< 0.001"


def _printed_region(uncertainty: Uncertainty) -> Tree:
    plan, up = place_decimals(uncertainty)
    ellipse, vertical = uncertainty.ellipse95, uncertainty.vertical95_m
    return {
        "horizontal95_m": rounded_up(uncertainty.horizontal95_m, plan),
        "vertical95_m": None if vertical is None else rounded_up(vertical, up),
        "ellipse_major_m": rounded_up(ellipse.major_m, plan),
        "ellipse_minor_m": rounded_up(ellipse.minor_m, plan),
        "ellipse_azimuth_deg": rounded(ellipse.azimuth_deg, 0),
        "k_enu": [plain(value, 2) for value in uncertainty.k95_enu],
        "dof_enu": [
            UNKNOWN if u is None else dof_text(dof)
            for u, dof in zip(uncertainty.u_enu_m, uncertainty.dof_enu, strict=True)
        ],
        "k_ellipse": _region_factor(uncertainty, ellipse.major_m),
        "k_circle": _region_factor(uncertainty, uncertainty.horizontal95_m),
    }


def _region_factor(uncertainty: Uncertainty, size_m: float) -> str | None:
    """How many times the largest standard uncertainty in plan a stated 95 % size is.

    Source: largest eigenvalue of a symmetric 2 x 2 matrix, closed form.
    """
    (ee, en), (_, nn) = uncertainty.cov_en_m2
    largest = (ee + nn) / 2 + math.hypot((ee - nn) / 2, en)
    return None if largest <= 0 else rounded(size_m / math.sqrt(largest), 2)


def _sentence(uncertainty: Uncertainty, frame_words: str) -> str:
    region = _printed_region(uncertainty)
    up = region["vertical95_m"]
    vertical = f" and ± {up} m in ellipsoidal height" if up else "; the ellipsoidal height has no stated uncertainty"
    return (
        f"{frame_words}: {region['horizontal95_m']} m in plan (radius of the circle){vertical}, "
        "each an expanded uncertainty with a coverage probability of 95 %."
    )


def _obtained(uncertainty: Uncertainty) -> str:
    region = _printed_region(uncertainty)
    k_east, k_north, k_up = region["k_enu"]
    d_east, d_north, d_up = region["dof_enu"]
    size = f"semi-axes {region['ellipse_major_m']} m and {region['ellipse_minor_m']} m"
    factors = (
        f"largest standard uncertainty in plan × {region['k_circle']} (circle) and × {region['k_ellipse']} (ellipse)"
    )
    governed = GOVERNED_WORDS.get(uncertainty.governed_by, uncertainty.governed_by)
    return (
        f"Coverage factors k = {k_east} east, {k_north} north, {k_up} up, from Student's t with effective degrees of "
        f"freedom {d_east}, {d_north}, {d_up} (Welch-Satterthwaite). Plan region from the bivariate t distribution: "
        f"{factors}; ellipse {size}, major axis at azimuth {region['ellipse_azimuth_deg']}°. "
        f"Governed by: {governed}."
    )


def operation_facts(operation: Operation) -> Tree:
    """The frame operation step by step, each with its authority's code and stated accuracy."""
    return {
        "name": operation.name,
        "coordinate_epoch": epoch_text(operation.coordinate_epoch),
        "area_ok": operation.area_ok,
        "accuracy_sum_m": fixed(operation.accuracy_m, 4),
        "steps": [_step(step) for step in operation.steps],
        "grids": [{"name": grid.name, "sha256": grid.sha256} for grid in operation.grids],
        "shift_enu_m": None if operation.shift_enu_m is None else [fixed(value, 4) for value in operation.shift_enu_m],
    }


def _step(step: OperationStep) -> Tree:
    accuracy = step.accuracy_m
    if accuracy is None:
        words = "not stated"
    elif accuracy == 0.0:
        words = "by definition"
    else:
        words = f"{accuracy:.4f}".rstrip("0").rstrip(".") + " m"
    return {
        "authority": step.authority,
        "code": step.code,
        "name": step.name,
        "inverse": step.inverse,
        "accuracy_m": fixed(accuracy, 4),
        "remark": step.remark or None,
        "printed": words,
    }
