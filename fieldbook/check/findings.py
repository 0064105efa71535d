"""What the operator must know about one reduction: each finding has a code, a severity, figures, one sentence to act on.

    stop       the figure cannot be relied on as it stands: answered by the operator, or the certificate stays a draft
    caution    true, but with a weakness that somebody must know
    info       a fact worth printing

In: a `Reduced` with its evidence, and the occupation. The findings of single steps (antenna, frame operation) and those
made while recording are added by the caller. Thresholds stand beside the finding they belong to.
"""

from __future__ import annotations

from collections.abc import Iterator

from fieldbook.check.behaviour import behaviour_findings
from fieldbook.check.gate_lines import mostly_shown
from fieldbook.model.reduction import Finding
from fieldbook.model.state import Occupation
from fieldbook.reduce.antenna import BETWEEN_OCCASIONS_LIMIT_M
from fieldbook.reduce.gate_reports import GateTally
from fieldbook.reduce.occupation import Reduced
from fieldbook.reduce.quantisation import FEW_DISTINCT

FROZEN_CAUTION, FROZEN_STOP = 0.10, 0.90
SEPARATION_SHARE = 1 / 3  # of the vertical requirement
# A receiver's own sigma against the scatter about the mean, limits of ours. The scatter leaves out what is common to the
# session, so a scatter of three sigmas disproves the sigma; the other way round only a long session can speak.
SCATTER_ABOVE, SCATTER_BELOW, LONG_SESSION = 3.0, 0.1, 20.0
HEIGHT_CHANGE_M = 0.001  # below it two readings of a tape agree
GATE_NAMES = {
    "max_hdop": "HDOP",
    "max_pdop": "PDOP",
    "max_correction_age_s": "age of corrections",
    "min_satellites": "number of satellites",
}


def findings_of(reduced: Reduced, occupation: Occupation) -> list[Finding]:
    """All findings on epochs, initialisations, digits, mean and budget of one occupation, worst first."""
    found = [
        *_output(reduced),
        *behaviour_findings(reduced),
        *_initialisations(reduced, occupation),
        *_resolution(reduced, occupation),
        *_separation(reduced),
        *_receiver_estimate(reduced),
        *_receiver_estimate_and_scatter(reduced),
        *_session(reduced),
        *_height_readings(reduced),
        *_station(reduced, occupation),
        *_evidence(reduced, occupation),
    ]
    rank = {"stop": 0, "caution": 1, "info": 2}
    return sorted(found, key=lambda item: rank[item.severity])


def _output(reduced: Reduced) -> Iterator[Finding]:
    share = reduced.screened.frozen_share
    if share > FROZEN_STOP:
        text = f"The receiver repeated one position for {100 * share:.0f} % of the time: a frozen or held output. "
        yield Finding("frozen", "stop", text + "Switch static hold off and occupy again.", {"share": share})
    elif share > FROZEN_CAUTION:
        text = (
            f"Output frozen for {100 * share:.0f} %: repeats were set aside and count as a gap. Check the output rate."
        )
        yield Finding("frozen", "caution", text, {"share": share})
    aside = reduced.reduction.set_aside
    outliers = aside.get("outlier", 0)
    if outliers and outliers > 0.05 * max(reduced.reduction.kept, 1):
        text = f"{outliers} epochs lie far from their neighbours. Look for a reflecting surface or an obstruction."
        yield Finding("many_outliers", "caution", text, {"outliers": outliers, "kept": reduced.reduction.kept})
    for key, count in sorted(reduced.screened.not_applied.items()):
        name = GATE_NAMES.get(key, key)
        text = f"The receiver did not report its {name} for {count} epochs: that gate was not applied."
        severity = "caution"
        if mostly_shown(reduced.screened.gates.get(key, GateTally())):
            severity = "info"
            text += " It did for their neighbours."
        yield Finding("gate_not_applied", severity, text, {"gate": key, "epochs": count})


def _initialisations(reduced: Reduced, occupation: Occupation) -> Iterator[Finding]:
    judged = reduced.judged
    for item in judged.wrong:
        offset = item.offset_enu_m or (0.0, 0.0, None)
        distance = (offset[0] ** 2 + offset[1] ** 2) ** 0.5
        up = "" if offset[2] is None else f", {1000 * offset[2]:+.0f} mm up"
        text = (
            f"Initialisation {item.number} lies {1000 * distance:.0f} mm away{up} and was not used: "
            f"a wrong fix of {item.kept} epochs. Nothing to do if the others are independent."
        )
        figures = {"initialisation": item.number, "offset_enu_m": list(offset), "epochs": item.kept}
        yield Finding("wrong_initialisation", "caution", text, figures)
    if judged.disagreement_enu_m is not None:
        east, north, up_m = judged.disagreement_enu_m
        text = (
            f"Initialisations disagree by {1000 * (east**2 + north**2) ** 0.5:.0f} mm in plan and {1000 * up_m:.0f} mm "
            "in height, and none has a clear majority. Re-initialise and stay, or set one aside by a decision."
        )
        figures = {"difference_enu_m": [east, north, up_m], "share": judged.leading_share}
        yield Finding("initialisations_disagree", "stop", text, figures)
    independent = sum(item.used and item.independent for item in judged.initialisations)
    if reduced.estimate.fix_class.is_rtk_fixed and independent < 2:
        text = "One initialisation only: a wrong fix common to the whole session cannot be seen. Re-initialise."
        yield Finding("single_initialisation", "caution", text, {"independent": independent})
    by_decision = [item.number for item in judged.initialisations if item.code == "operator"]
    for number in by_decision:
        reason = occupation.initialisation_decisions.get(number, (False, ""))[1]
        yield Finding("set_aside_by_operator", "info", f"Initialisation {number} was set aside: {reason}")


def _resolution(reduced: Reduced, occupation: Occupation) -> Iterator[Finding]:
    resolution = reduced.estimate.resolution
    few = [
        name
        for name in ("latitude", "longitude")
        if resolution.digits[name].count_distinct < FEW_DISTINCT and reduced.reduction.kept >= 30
    ]
    sd_e, sd_n, _ = reduced.estimate.sd_enu_m
    step_e, step_n, _ = resolution.step_enu_m
    coarse = (step_e or 0.0) > 2 * (sd_e or 0.0) or (step_n or 0.0) > 2 * (sd_n or 0.0)
    if (few or coarse) and reduced.screened.frozen_share <= FROZEN_CAUTION:
        step = max(step_e or 0.0, step_n or 0.0)
        text = f"The coordinates come in steps of {1000 * step:.1f} mm: resolution governs. Set the receiver to more decimals."
        yield Finding("resolution_coarse", "caution", text, {"step_m": step})
    yield from _altitude_resolution(reduced)
    u_m = resolution.separation_u_m
    wanted_m = occupation.session.requirement.vertical_95_m
    if u_m is not None and 1.96 * u_m > SEPARATION_SHARE * wanted_m:
        decimals, printed = resolution.separation_decimals, resolution.digits["separation"].fewest_decimals
        padded = printed is not None and decimals is not None and printed > decimals
        # one value ends in zeros by chance at one place of a hundred: then nothing can be set in the receiver
        severity, zeros = ("caution", ", the rest zeros,") if padded else ("stop", "")
        text = (
            f"The geoid separation comes with {decimals} decimals{zeros}: every height can be wrong by "
            f"{1000 * u_m * 3**0.5:.0f} mm alike, more than a third of the requirement. Set the receiver to more decimals."
        )
        yield Finding("separation_coarse", severity, text, {"u_m": u_m, "decimals": decimals})


def _altitude_resolution(reduced: Reduced) -> Iterator[Finding]:
    step_m, sd_m = reduced.estimate.resolution.step_enu_m[2], reduced.estimate.sd_enu_m[2]
    if step_m is None or sd_m is None or reduced.screened.frozen_share > FROZEN_CAUTION:
        return
    few = reduced.estimate.resolution.digits["altitude"].count_distinct < FEW_DISTINCT and reduced.reduction.kept >= 30
    # a step well below what the kind of fix can tell is no lack, however still the height stands
    matters = step_m > reduced.estimate.fix_class.vertical_m / 2
    if matters and (few or step_m > 2 * sd_m):
        text = (
            f"The altitude comes in steps of {1000 * step_m:.0f} mm: resolution governs the height. "
            "Set the receiver to more decimals."
        )
        u_m = reduced.estimate.resolution.u_enu_m[2]
        yield Finding("altitude_coarse", "caution", text, {"step_m": step_m, "u_m": u_m})


def _separation(reduced: Reduced) -> Iterator[Finding]:
    digits = reduced.estimate.resolution.digits["separation"]
    values = sorted(digits.distinct)
    if values == [0]:
        text = "The geoid separation is exactly zero throughout: the altitude may already be ellipsoidal. Check the receiver."
        yield Finding("separation_zero", "caution", text)
    elif len(values) > 1 and digits.fewest_decimals is not None:
        change_m = (values[-1] - values[0]) * 1e-5
        if change_m > 3 * 10.0**-digits.fewest_decimals:
            text = f"The geoid separation changed by {change_m:.3f} m: the receiver changed its model or mode. Look at heights."
            yield Finding("separation_changed", "caution", text, {"change_m": change_m})
    if reduced.reduction.without_height:
        count = reduced.reduction.without_height
        text = (
            f"{count} kept epochs have no ellipsoidal height (altitude or separation missing); they count in plan only."
        )
        yield Finding("without_height", "info", text, {"epochs": count})


def _receiver_estimate(reduced: Reduced) -> Iterator[Finding]:
    for axis, verdict, value in (
        ("in plan", reduced.estimate.gst.horizontal, reduced.estimate.gst.horizontal_m),
        ("in height", reduced.estimate.gst.vertical, reduced.estimate.gst.vertical_m),
    ):
        if verdict == "beyond":
            text = f"The receiver's own estimate {axis}, {value:.3f} m, contradicts its fix quality. Check the fix."
            yield Finding("gst_contradicts", "caution", text, {"sigma_m": value})
        elif verdict == "used":
            text = f"The receiver's own estimate {axis}, {value:.3f} m, is worse than usual for its kind of fix and was taken."
            yield Finding("gst_used", "info", text, {"sigma_m": value})


def _receiver_estimate_and_scatter(reduced: Reduced) -> Iterator[Finding]:
    """The receiver's own sigma (GST, median) against the scatter of the epochs it speaks of."""
    gst, (east, north, up) = reduced.estimate.gst, reduced.estimate.sd_enu_m
    plan = None if east is None or north is None else max(east, north)
    # in the class's own correlation times: a sigma that was taken as prior makes the fitted one long
    long_enough = reduced.mean.observed_s >= LONG_SESSION * reduced.estimate.fix_class.correlation_s
    for axis, sigma_m, scatter_m in (
        ("in plan", gst.horizontal_m, plan),
        ("in height", gst.vertical_m, up),
    ):
        if sigma_m is None or not sigma_m > 0 or scatter_m is None:
            continue
        figures = {"axis": axis, "sigma_m": sigma_m, "scatter_m": scatter_m}
        if scatter_m > SCATTER_ABOVE * sigma_m:
            text = (
                f"The receiver calls itself good to {1000 * sigma_m:.0f} mm {axis}, its epochs scatter by "
                f"{1000 * scatter_m:.0f} mm: its own estimate is not believed. Do not rely on the receiver's display."
            )
            yield Finding("gst_scatter", "caution", text, figures)
        elif scatter_m < SCATTER_BELOW * sigma_m and long_enough:
            text = (
                f"The receiver calls itself good to {1000 * sigma_m:.0f} mm {axis}, its epochs scatter by only "
                f"{1000 * scatter_m:.0f} mm in a long session. Look for static hold or smoothing in the receiver."
            )
            yield Finding("gst_scatter", "caution", text, figures)


def _session(reduced: Reduced) -> Iterator[Finding]:
    mean, fix_class = reduced.mean, reduced.estimate.fix_class
    if mean.governed_by == "class":
        text = (
            f"The session is {mean.ratio:.1f} correlation times long (about {mean.tau_s:.0f} s each): its scatter cannot "
            f"tell the uncertainty, the kind of fix ({fix_class.name}) governs."
        )
        figures = {"correlation_time_s": mean.tau_s, "ratio": mean.ratio, "class": fix_class.name}
        yield Finding("class_governs", "info", text, figures)
    floor, plan_m = fix_class.floor_enu_m, max(mean.east.u_m, mean.north.u_m)
    if floor[0] > plan_m and (mean.up is None or floor[2] > mean.up.u_m):
        text = "Staying longer in this session hardly helps; a second occupation hours later does."
        yield Finding("floor_governs", "info", text, {"floor_m": floor[0], "u_mean_m": plan_m})
    if fix_class.name == "autonomous":
        text = "Autonomous positions: metres, not millimetres, whatever the scatter says."
        yield Finding("autonomous", "caution", text)


def _height_readings(reduced: Reduced) -> Iterator[Finding]:
    """The antenna height before and after: changed, but within the limit (beyond it the readings disagree: a stop)."""
    antenna = reduced.reduction.antenna
    if antenna.before_m is None or antenna.after_m is None:
        return
    change_m = antenna.after_m - antenna.before_m
    u_m, u_up_m = antenna.height_u_m, reduced.reduction.uncertainty.u_enu_m[2]
    if HEIGHT_CHANGE_M < abs(change_m) <= BETWEEN_OCCASIONS_LIMIT_M and u_m is not None and u_up_m:
        share = (u_m / u_up_m) ** 2
        text = (
            f"The antenna height changed by {1000 * change_m:+.1f} mm between before and after: the readings are "
            f"{100 * share:.0f} % of the height's variance. Press the tripod feet in, and read twice."
        )
        yield Finding("height_changed", "info", text, {"change_m": change_m, "u_m": u_m, "share": share})


def _station(reduced: Reduced, occupation: Occupation) -> Iterator[Finding]:
    changes, stations = reduced.screened.station_changes, list(reduced.screened.stations)
    if changes:
        times = "once" if changes == 1 else f"{changes} times"
        text = (
            f"The correction station changed {times} ({', '.join(stations)}): each has an error of its own. "
            "Keep to one station for an occupation."
        )
        # a network may renumber its virtual stations; a base of one's own may not
        severity = "info" if occupation.session.corrections.kind == "network" else "caution"
        yield Finding("station_changed", severity, text, {"changes": changes, "stations": stations})


def _evidence(reduced: Reduced, occupation: Occupation) -> Iterator[Finding]:
    if reduced.reduction.set_aside.get("datum"):
        count = reduced.reduction.set_aside["datum"]
        text = f"The receiver announced another local datum (DTM) for {count} epochs. Confirm it by a decision, or set W84."
        yield Finding("datum_not_confirmed", "stop", text, {"epochs": count})
    if occupation.session.receiver.accept_without_checksum:
        yield Finding("without_checksum", "caution", "Sentences without a checksum were accepted, as the session says.")
    if occupation.session.corrections.kind == "own base on unknown mark":
        text = "The base stood on an unknown mark: its error is in every coordinate and in no figure here. Tie to a known mark."
        yield Finding("base_unknown", "stop", text)
    if not reduced.reduction.operation.area_ok:
        yield Finding("outside_area", "caution", "The mark lies outside the area of use of its frame or operation.")
    height = reduced.reduction.height
    if height is not None and height.datum is None:
        text = f"H is a height above {height.model_name}, not above a national height datum; use the national model for that."
        yield Finding("no_height_datum", "info", text)
