"""The left page of the occupation: what would be written in ink. Formats a `LiveView`; knows no widget.

Figures stand at the digits their 95 % allows; a 95 % that does not yet rest on data says so in words.
"""

from __future__ import annotations

import math

from fieldbook.model.angles import latitude_text, longitude_text
from fieldbook.model.entry import Entry
from fieldbook.model.live import LiveView
from fieldbook.model.reduction import Initialisation, LeaveLine, Reduction, Uncertainty
from fieldbook.model.rounding import decimals_for
from fieldbook.screens.plain import clean, fit, pad
from fieldbook.screens.rows import BLANK, Row, heading, labelled, labelled_lines, paragraph, row
from fieldbook.screens.words import SEVERITY, duration, hour_minute, length_95, set_aside_word, signed_mm, stopwatch

ONE_LINE = 72  # cells: from here on the frame of the two 95 % stands beside each of them
SETTLED_LENGTHS = 5.0  # under five correlation times the 95 % rests on the kind of fix (design, section 6)


def occupation_rows(view: LiveView | None, width: int, height: int) -> list[Row]:
    """The whole left page in at most `height` rows."""
    if view is None:
        return [heading("FIGURES", width), BLANK, row(" opening the book …")]
    if view.occupation is None:
        return [
            heading("FIGURES", width),
            BLANK,
            row(" No occupation yet."),
            BLANK,
            *paragraph("Page 2 chooses the mark, page 3 the set-up; S there starts recording.", width, style="soft"),
        ]
    rate = _rate(view)
    rows = [
        heading("FIGURES", width, f"{'open' if view.occupation.open else 'ended'} {stopwatch(view.elapsed_s)}{rate}")
    ]
    if view.reduction is None:
        rows += [BLANK, *_problem(view, width)]
    else:
        rows += [
            *position_rows(view.reduction, width, view.occupation.session.requirement.in_frame),
            *([BLANK] if height > 20 else []),
        ]
        rows += _evidence(view, view.reduction, width)
    findings = _findings(view.reduction, width, max(2, height - len(rows) - 2 - (2 if height > 20 else 1)))
    rows += [BLANK, *findings]
    rows += _remarks(view.occupation.remarks, width, min(12, height - len(rows)))
    if view.reduction is not None and len(rows) + 2 * len(view.reduction.initialisations) + 2 <= height:
        rows += [BLANK, row((" INITIALISATIONS", "strong"), (", offset from the mean of those used", "soft"))]
        for run in view.reduction.initialisations:
            rows += initialisation_rows(run, width)
    return rows[:height]


def _rate(view: LiveView) -> str:
    if view.recorder is None or not view.elapsed_s or not view.recorder.epochs:
        return ""
    rate = view.recorder.epochs / max(view.elapsed_s, 1.0)
    return f", {rate:.0f} Hz" if rate >= 0.95 else f", one in {1 / rate:.0f} s"


def _problem(view: LiveView, width: int) -> list[Row]:
    if view.problem is None:
        return [row(" waiting for the first position …")]
    _, text, remedy = view.problem
    return [*paragraph(text, width, mark=("▲", "warn"), most=5), *paragraph(remedy, width, style="soft", most=4)]


def _line(reduction: Reduction, name: str) -> LeaveLine | None:
    lines = reduction.leave.lines if reduction.leave else []
    return next((item for item in lines if item.line == name), None)


def wanted_rows_uncertainty(reduction: Reduction) -> Uncertainty:
    """The uncertainty that belongs to the coordinates shown: the client's where there are client's coordinates."""
    if reduction.client is not None and reduction.uncertainty_client is not None:
        return reduction.uncertainty_client
    return reduction.uncertainty


def position_rows(reduction: Reduction, width: int, judged_in: str) -> list[Row]:
    """The mark in the client's frame with the 95 % of that frame; below, what is wanted and reached, in its own frame.

    The two 95 % differ by what the frame operation adds, so each stands beside the words it belongs to.
    """
    place = reduction.client or reduction.receiver
    stated = wanted_rows_uncertainty(reduction)
    decimals = min(6, max(0, decimals_for(stated.horizontal95_m) + 1))  # 0.001″ is about 3 cm
    height_decimals = decimals_for(stated.vertical95_m, most=4)
    h_text = "not known" if place.h_m is None else f"{place.h_m:.{height_decimals}f} m"
    lat, lon = latitude_text(place.lat_deg, decimals), longitude_text(place.lon_deg, decimals)
    wide = max(len(lat), len(lon)) + 1
    epoch = "" if place.epoch is None else f" at {place.epoch:.2f}"

    def figure(label: str, text: str, said: str = "") -> Row:
        return row((" " + pad(label, 12), "soft"), (pad(text, wide, right=True), "strong"), (f"  {said}", "text"))

    return [
        figure("Latitude", lat),
        figure("Longitude", lon, f"95 % {length_95(stated.horizontal95_m)} circle"),
        figure("Ell. height", h_text, f"95 % {length_95(stated.vertical95_m)}"),
        row((fit(f" of the mark, in {place.frame_name} ({place.frame}){epoch}", width - 1), "soft")),
        *_reached(reduction, "horizontal_95_m", "Horizontal", judged_in if width >= ONE_LINE else ""),
        *_reached(reduction, "vertical_95_m", "Height", judged_in if width >= ONE_LINE else ""),
        *([] if width >= ONE_LINE else [row((f" both against the requirement, in the {judged_in}", "soft"))]),
    ]


def _reached(reduction: Reduction, name: str, label: str, judged_in: str) -> list[Row]:
    line = _line(reduction, name)
    if line is None:
        return []
    have = length_95(line.have) if isinstance(line.have, int | float) else "not known"
    wanted = length_95(line.wanted) if isinstance(line.wanted, int | float) else str(line.wanted)
    state = ("✓ reached", "good") if line.met else ("○ open", "warn")
    return [
        row(
            (" " + pad(label, 12), "soft"),
            ("95 % ", "text"),
            (pad(have, 8), "strong"),
            f"wanted {pad(wanted, 7)} ",
            state,
            (f"  in the {judged_in}" if judged_in else "", "soft"),
        )
    ]


def _evidence(view: LiveView, reduction: Reduction, width: int) -> list[Row]:
    worth = view.effective_epochs
    kept = f"{reduction.kept} kept of {reduction.heard}"
    kept += f", worth about {worth:.0f}" if worth is not None else ""
    rows = [labelled("Epochs", kept, width)]
    if reduction.set_aside:
        parts = sorted(reduction.set_aside.items(), key=lambda item: -item[1])
        rows += labelled_lines("Set aside", " · ".join(f"{set_aside_word(code)} {n}" for code, n in parts), width)
    rows += labelled_lines("Initialis.", initialisations_text(reduction), width)
    rows += labelled_lines("Correlation", correlation_text(view, reduction), width)
    rows += [labelled("95 % rests", rests_on(view, reduction), width)]
    arp = reduction.antenna.height_arp_m
    height = "ARP not read yet" if arp is None else f"ARP {arp:.4f} m"
    rows += labelled_lines("Antenna", f"{height}; receiver reports {reduction.antenna.reported_point}", width)
    return rows


def initialisations_text(reduction: Reduction) -> str:
    """`2 agree within 6 mm, 1 set aside`."""
    used = [item for item in reduction.initialisations if item.used]
    aside = len(reduction.initialisations) - len(used)
    offsets = [
        (item.offset_enu_m[0] or 0.0, item.offset_enu_m[1] or 0.0) for item in used if item.offset_enu_m is not None
    ]
    apart = max((math.dist(first, second) for first in offsets for second in offsets), default=0.0)
    text = f"{len(used)} used"
    text += f", means {1000 * apart:.0f} mm apart" if len(offsets) > 1 else ""
    return text + (f"; {aside} not used" if aside else "")


def correlation_text(view: LiveView, reduction: Reduction) -> str:
    """How long neighbouring epochs repeat one another, and how many such lengths the session has."""
    tau = reduction.uncertainty.correlation_time_s
    if tau is None:
        return "not known yet"
    lengths = view.correlation_lengths
    return f"about {duration(tau)}" + (f"; the session is {lengths:.1f} of these" if lengths is not None else "")


def rests_on(view: LiveView, reduction: Reduction) -> str:
    """What the stated 95 % rests on: data, class, or both."""
    if view.correlation_lengths is not None and view.correlation_lengths < SETTLED_LENGTHS:
        return "on the kind of fix, not yet on data"
    return {"class": "on the kind of fix", "class and data": "on the kind of fix and the data"}.get(
        reduction.uncertainty.governed_by, "on the data"
    )


def _findings(reduction: Reduction | None, width: int, most: int) -> list[Row]:
    """Open findings, the worst first, in at most `most` rows; what does not fit is counted."""
    items = [item for item in reduction.findings if item.severity != "info"] if reduction else []
    if not items:
        return [row((" FINDINGS    ", "strong"), "none open")]
    order = sorted(items, key=lambda item: item.severity != "stop")
    room, lines_each = most - 1, 2 if most - 1 >= 2 * len(items) else 1
    shown = order if len(order) * lines_each <= room else order[: max(1, room)]
    left = len(order) - len(shown)
    rows = [row((" FINDINGS    ", "strong"), f"{len(items)} open" + (f", {left} more on page 6" if left else ""))]
    for item in shown:
        rows += paragraph(item.text, width, mark=SEVERITY.get(item.severity, ("·", "soft")), most=lines_each)
    return rows


def _remarks(remarks: list[Entry], width: int, most: int) -> list[Row]:
    if most < 1:
        return []
    if not remarks:
        return [row((" REMARKS     ", "strong"), ("none", "soft"))]

    def said(entry: Entry, room: int) -> list[tuple[str, str]]:
        text = f"{clean(entry.body.get('text', ''))} · {entry.observer}"
        return [(f"{hour_minute(entry.utc)} ", "soft"), (fit(text, room - 7), "text")]

    if most < 3:
        return [row((" REMARKS     ", "strong"), *said(remarks[-1], width - 13))]
    return [
        row((" REMARKS", "strong")),
        *[row(" ", *said(entry, width - 1)) for entry in remarks[-max(1, most - 1) :]],
    ]


def initialisation_rows(run: Initialisation, width: int) -> list[Row]:
    """One initialisation: times, epochs, used or not and why, offset from the mean; two lines on a narrow leaf."""
    offset = "no offset"
    if run.offset_enu_m is not None:
        parts = [f"{axis} {signed_mm(value)}" for axis, value in zip("enu", run.offset_enu_m, strict=False)]
        offset = "  ".join(parts) + " mm"
    used = ("used", "good") if run.used else ("not used", "warn")
    reason = f"  {run.reason}" if run.reason else ("" if run.independent else "  resumed")
    times = f"{hour_minute(run.from_utc)} to {hour_minute(run.to_utc)}"
    head = row(f" {run.number:>3}  {times}  {run.kept:>5} epochs  ", used)
    if width >= 76:
        return [row(*head, fit(f"  {offset}{reason}", width - 42))]
    return [head, row((fit(f"      {offset}{reason}", width - 1), "soft"))]
