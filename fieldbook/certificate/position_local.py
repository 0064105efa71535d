"""A mark's coordinates in local grids, as facts and as a section of the certificate."""

from __future__ import annotations

from fieldbook.certificate.blocks import Pairs, Section, Sentences
from fieldbook.certificate.position import DEGREE_DECIMALS, FACTOR_DECIMALS, metres
from fieldbook.model.angles import signed_dms_text
from fieldbook.model.canonical import Tree, fixed
from fieldbook.model.local_grid import LocalPosition
from fieldbook.model.reduction import Reduction
from fieldbook.model.rounding import decimals_for, rounded, rounded_up
from fieldbook.model.state import BookState

USE = (
    "Grid distance = ground distance × combined factor; azimuth = local bearing + correction. A local grid holds between the "
    "marks it was fitted to and belongs to this book; it is no national grid and no datum."
)
OUTSIDE = "The mark lies outside the marks the grid was fitted to: accepted by decision, nothing checks the grid there."
WIDENED = "The marks fit worse than their stated uncertainties; the uncertainty of the grid was widened accordingly."


def local_facts(state: BookState, reduction: Reduction) -> list[Tree]:
    """One tree per local grid of the client's frame that holds the mark."""
    return [_facts(item, state) for item in reduction.local]


def _facts(item: LocalPosition, state: BookState) -> Tree:
    plan = decimals_for(item.horizontal95_m, most=4)
    up = decimals_for(item.vertical95_m or item.horizontal95_m, most=4)
    entry = state.local_grids.get(item.name)
    return {
        "name": item.name,
        "entry": item.entry,
        "source": None if entry is None else str(entry.body["source"]),
        "easting_m": metres(item.easting_m),
        "northing_m": metres(item.northing_m),
        "height_m": metres(item.height_m),
        "horizontal95_m": metres(item.horizontal95_m),
        "vertical95_m": metres(item.vertical95_m),
        "bearing_correction_deg": fixed(item.bearing_correction_deg, DEGREE_DECIMALS),
        "scale_factor": fixed(item.scale_factor, FACTOR_DECIMALS),
        "elevation_factor": fixed(item.elevation_factor, FACTOR_DECIMALS),
        "combined_factor": fixed(item.combined_factor, FACTOR_DECIMALS),
        "plane_height_m": fixed(item.plane_height_m, 1),
        "scale_ppm": fixed(item.scale_ppm, 2),
        "inside": item.inside,
        "widened": item.widened,
        "marks": list(item.marks),
        "largest_residual_m": metres(item.largest_residual_m),
        "largest_predicted_m": metres(item.largest_predicted_m),
        "printed": {
            "easting_m": rounded(item.easting_m, plan),
            "northing_m": rounded(item.northing_m, plan),
            "height_m": None if item.height_m is None else rounded(item.height_m, up),
            "horizontal95_m": rounded_up(item.horizontal95_m, plan),
            "vertical95_m": None if item.vertical95_m is None else rounded_up(item.vertical95_m, up),
            "bearing_correction": signed_dms_text(item.bearing_correction_deg),
            "combined_factor": rounded(item.combined_factor, 8),
            "largest_residual_mm": rounded(1000 * item.largest_residual_m, 1),
            "largest_predicted_mm": rounded(1000 * item.largest_predicted_m, 1),
        },
    }


def local_line(facts: Tree) -> list[str]:
    """One line per local grid for the first page."""
    return [
        f"Local grid {item['name']}: E {item['printed']['easting_m']} m, N {item['printed']['northing_m']} m, "
        f"95 % {item['printed']['horizontal95_m']} m; see its section"
        for item in facts["position"].get("local", [])
    ]


def local_sections(facts: Tree) -> list[Section]:
    """A section per local grid."""
    return [_section(item) for item in facts["position"].get("local", [])]


def _section(item: Tree) -> Section:
    printed = item["printed"]
    rows = [
        ["Easting", f"{printed['easting_m']} m"],
        ["Northing", f"{printed['northing_m']} m"],
        ["95 %, plan", f"{printed['horizontal95_m']} m, radius of the circle: the mark's own and the grid's"],
    ]
    if printed["height_m"] is not None:
        stated = f", ± {printed['vertical95_m']} m" if printed["vertical95_m"] else ""
        rows.append(["Local height", f"{printed['height_m']} m{stated}"])
    rows += [
        ["Correction to bearings", f"{printed['bearing_correction']}: azimuth = local bearing + correction"],
        ["Combined factor", printed["combined_factor"]],
        [
            "Ground lengths at",
            f"ellipsoidal height {item['plane_height_m']} m; grid against ground {item['scale_ppm']} ppm",
        ],
        ["Fitted to", ", ".join(item["marks"])],
        [
            "Largest residual",
            f"{printed['largest_residual_mm']} mm; of a mark left out {printed['largest_predicted_mm']} mm",
        ],
        ["Source of its coordinates", item["source"] or "not stated"],
        ["Kept in entry", str(item["entry"])],
    ]
    said = [USE]
    if item["widened"]:
        said.append(WIDENED)
    if not item["inside"]:
        said.append(OUTSIDE)
    return Section(f"Local grid {item['name']}", [Pairs(rows), Sentences(said)])
