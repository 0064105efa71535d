"""The reduction: the client's coordinates largest, the receiver's small 'as observed', budget and findings beside."""

# ruff: noqa: ARG002 - every maker of rows takes the size, and some do not need it

from __future__ import annotations

from typing import ClassVar

from fieldbook.model.angles import latitude_text, longitude_text, signed_dms_text
from fieldbook.model.reduction import MarkResult, Reduction, Uncertainty
from fieldbook.model.rounding import decimals_for
from fieldbook.screens.figures import initialisation_rows, wanted_rows_uncertainty
from fieldbook.screens.one_by_one import OccupationByOccupation
from fieldbook.screens.plain import fit, pad, wrapped
from fieldbook.screens.rows import BLANK, Row, heading, labelled, labelled_lines, paragraph, row
from fieldbook.screens.sheets import Sheet
from fieldbook.screens.words import SEVERITY, duration, hour_minute, leave_word, length_95, set_aside_word, signed_mm


class ReductionPage(OccupationByOccupation):
    """One occupation at a time; left and right arrows turn to the others."""

    name_of_page: ClassVar[str] = "reduction"
    facing: ClassVar[bool] = True

    def left(self, width: int, height: int) -> list[Row]:
        """Coordinates."""
        chosen = self.chosen()
        if chosen is None:
            return self._nothing(width)
        count = len(self.desk.reduced.sheets) if self.desk.reduced else 1
        note = "reducing again …" if self.desk.reducing else f"{self.index + 1} of {count}  ← →"
        return [heading("REDUCTION", width, note), *coordinate_rows(chosen, width), *self._failed(width)]

    def right(self, width: int, height: int) -> list[Row]:
        """Budget, findings, initialisations."""
        chosen = self.chosen()
        return [heading("BUDGET AND FINDINGS", width)] if chosen is None else evidence_rows(chosen, width)

    def _nothing(self, width: int) -> list[Row]:
        if self.desk.reduced is None or self.desk.reducing:
            return [heading("REDUCTION", width), BLANK, row(" reducing …")]
        rows = [heading("REDUCTION", width), BLANK]
        return rows + (self._failed(width) or [row(" No occupation to reduce yet.")])

    def _failed(self, width: int) -> list[Row]:
        rows: list[Row] = []
        for mark, occupation, text, remedy in self.desk.reduced.failures if self.desk.reduced else ():
            rows += [BLANK, *paragraph(f"{mark}, occupation {occupation}: {text}", width, mark=("■", "bad"))]
            rows += paragraph(remedy, width, style="soft", indent=3)
        for mark, why in self.desk.reduced.apart if self.desk.reduced else ():
            rows += [BLANK, *paragraph(f"{mark}: not taken together. {why}", width, mark=("▲", "warn"))]
        return rows


def coordinate_rows(sheet: Sheet, width: int) -> list[Row]:
    """The mark's coordinates in the client's frame, then grid, height by model, and as observed."""
    item = sheet.reduction
    place = item.client or item.receiver
    stated = wanted_rows_uncertainty(item)
    decimals = min(6, max(0, decimals_for(stated.horizontal95_m) + 1))
    up = decimals_for(stated.vertical95_m, most=4)
    epoch = "" if place.epoch is None else f" at epoch {place.epoch:.2f}"
    h_text = "not known" if place.h_m is None else f"{place.h_m:.{up}f} m"
    rows = [
        labelled("Mark", ", ".join(text for text in (sheet.title, sheet.state) if text), width, style="strong"),
        labelled("Kept", _kept(sheet), width),
        BLANK,
        row((f"  ┌─ {fit(place.frame_name, width - 20)} {place.frame}{epoch}", "accent")),
        _large("Latitude", latitude_text(place.lat_deg, decimals)),
        _large("Longitude", longitude_text(place.lon_deg, decimals)),
        _large("Ell. height", h_text),
        *_region(stated, width),
    ]
    rows += _grid(item, width) + _height(item, width)
    if item.client is not None:
        rows += _observed(item, width)
    return rows


def _kept(sheet: Sheet) -> str:
    item = sheet.reduction
    if sheet.result is not None:
        return f"{duration(item.kept_s)}, {(item.started or '')[:10]} to {(item.ended or '')[:10]}"
    return f"{hour_minute(item.started)} to {hour_minute(item.ended)} UTC, {item.kept} of {item.heard} epochs"


def _large(label: str, text: str) -> Row:
    # a terminal has one size of letters: what counts is set apart by room, frame and weight
    return row(("  │ ", "accent"), (pad(label, 13), "soft"), (text, "strong"))


def _region(stated: Uncertainty, width: int) -> list[Row]:
    shape = stated.ellipse95
    ellipse = f"{length_95(shape.major_m)} × {length_95(shape.minor_m)} at {shape.azimuth_deg:.0f}°"
    return [
        row(
            ("  │ ", "accent"),
            (pad("95 %", 13), "soft"),
            (f"{length_95(stated.horizontal95_m)} circle", "strong"),
            f"  {length_95(stated.vertical95_m)} height",
        ),
        row(("  └─ ", "accent"), (pad("ellipse", 12), "soft"), (fit(ellipse, width - 18), "text")),
    ]


def _grid(item: Reduction, width: int) -> list[Row]:
    grid = item.grid
    if grid is None:
        return [labelled("Grid", "none chosen", width, style="soft")]
    decimals = decimals_for(wanted_rows_uncertainty(item).horizontal95_m, most=4)
    factor = "not known" if grid.combined_factor is None else f"{grid.combined_factor:.8f}"
    return [
        labelled("Grid", f"{grid.zone_text or grid.crs_name} ({grid.crs})", width),
        labelled("", f"E {grid.easting_m:.{decimals}f}   N {grid.northing_m:.{decimals}f} m", width, style="strong"),
        *labelled_lines(
            "", f"convergence {signed_dms_text(grid.convergence_deg)}, combined factor {factor}", width, style="soft"
        ),
    ]


def _height(item: Reduction, width: int) -> list[Row]:
    height = item.height
    if height is None:
        return [labelled("H", "no geoid model chosen: no H", width, style="soft")]
    decimals = decimals_for(height.vertical95_m, most=3, least=2 if height.vertical95_m is None else 0)
    stated = "no stated 95 %" if height.vertical95_m is None else f"95 % {length_95(height.vertical95_m)}"
    return [
        labelled("H", f"{height.orthometric_m:.{decimals}f} m, {stated}", width, style="strong"),
        *labelled_lines("", height.heading or f"height above geoid model {height.model_name}", width, style="soft"),
    ]


def _observed(item: Reduction, width: int) -> list[Row]:
    seen = item.receiver
    epoch = "" if seen.epoch is None else f" at {seen.epoch:.2f}"
    decimals = min(6, max(0, decimals_for(item.uncertainty.horizontal95_m) + 1))
    h_text = "" if seen.h_m is None else f"  {seen.h_m:.3f} m"
    place = f"{latitude_text(seen.lat_deg, decimals)} {longitude_text(seen.lon_deg, decimals)}{h_text}"
    steps = " + ".join(f"{step.authority}:{step.code}" for step in item.operation.steps) or "same frame, no operation"
    return [
        labelled("as observed", f"{seen.frame_name} {seen.frame}{epoch}", width, style="soft"),
        labelled("", place, width, style="soft"),
        *labelled_lines(
            "",
            f"95 % {length_95(item.uncertainty.horizontal95_m)}; to the client's frame by {steps}",
            width,
            style="soft",
        ),
    ]


def evidence_rows(sheet: Sheet, width: int) -> list[Row]:
    """Findings first, then the budget; last how the occupations agree, or initialisations and what was set aside."""
    item = sheet.reduction
    rows = [heading("BUDGET AND FINDINGS", width)]
    order = {"stop": 0, "caution": 1, "info": 2}
    for finding in sorted(item.findings, key=lambda found: order.get(found.severity, 3)):
        rows += paragraph(finding.text, width, mark=SEVERITY.get(finding.severity, ("·", "soft")), most=5)
    if not item.findings:
        rows.append(row(" No findings."))
    rows += [BLANK, *budget_rows(item.uncertainty_client or item.uncertainty, width), BLANK]
    if sheet.result is not None:
        return rows + agreement_rows(sheet.result, width)
    rows.append(row((" Initialisations, offset from the mean of those used", "soft")))
    for run in item.initialisations:
        rows += initialisation_rows(run, width)
    if item.set_aside:
        text = ", ".join(f"{set_aside_word(code)} {count}" for code, count in sorted(item.set_aside.items()))
        rows += [BLANK, *paragraph(f"Set aside: {text}", width)]
    return rows


def agreement_rows(mark: MarkResult, width: int) -> list[Row]:
    """How the occupations of a mark agree: weight and residual of each, every pair, what the mark still owes."""
    rows = [row((" Occupations: weight, and how far each lies from the mark", "soft"))]
    for used in mark.used:
        parts = " ".join(f"{axis} {signed_mm(value)}" for axis, value in zip("enu", used.residual_enu_m, strict=True))
        weight = 50.0 * (used.weight_enu[0] + used.weight_enu[1])
        rows.append(row(f" {used.occupation:>3}  {pad(used.fix_class, 11)} {weight:3.0f} %  {parts} mm"))
    for left in mark.not_combined:
        rows += paragraph(f"{left.occupation} is left out: {left.text}", width, mark=("▲", "warn"))
    rows += [BLANK, row((" Pairs: difference and tolerance", "soft"))]
    for pair in mark.repeats:
        shape = ("✓", "good") if pair.agrees else ("■", "bad")
        up = pair.difference_enu_m[2]
        text = f"{pair.first} and {pair.second}: plan {1000 * pair.plan_m:.0f} of {1000 * pair.plan_tolerance_m:.0f} mm"
        text += "" if up is None else f", height {1000 * abs(up):.0f} of {1000 * pair.height_tolerance_m:.0f} mm"
        rows += paragraph(f"{text}; {pair.text}", width, mark=shape)
        rows += paragraph(pair.independence.text, width, style="soft", indent=3)
    owed = [line for line in mark.leave.lines if not line.met] if mark.leave else []
    rows += [
        BLANK,
        row((" The mark ", "soft"), ("is done" if not owed else "still owes", "good" if not owed else "warn")),
    ]
    for line in owed:
        rows += paragraph(f"{leave_word(line.line)}: {line.text}", width, mark=("○", "warn"))
    return rows


def budget_rows(stated: Uncertainty, width: int) -> list[Row]:
    """Standard uncertainties of every source, in millimetres; a long source takes a second line."""
    name_width = max(14, width - 30)
    rows = [row((f" {pad('u in mm, Type', name_width)}" + "       e     n     u  dof", "soft"))]
    for line in stated.budget:
        figures = [(pad(_mm(value), 6, right=True), "text") for value in line.u_enu_m]
        dof = "∞" if line.dof is None else f"{line.dof:.0f}"
        names = wrapped(line.source + (", common" if line.common else ""), name_width, 4)
        rows.append(row(f" {pad(names[0], name_width)} {line.type}", *figures, (pad(dof, 5, right=True), "soft")))
        rows += [row(f"   {name}") for name in names[1:]]
    total = [(pad(_mm(value), 6, right=True), "strong") for value in stated.u_enu_m]
    return [*rows, row((f" {pad('combined', name_width)}  ", "strong"), *total)]


def _mm(value_m: float | None) -> str:
    if value_m is None:
        return "–"
    value = 1000 * value_m
    return f"{value:.1f}" if value < 99.95 else f"{value:.0f}"
