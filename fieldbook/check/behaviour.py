"""Findings on how the errors of an occupation behave: steps, drift, waves, bursts, smoothing.

In: what the detectors found (`reduce.detectors`), which state sizes and set nothing aside. Out: findings, each with its
figures and one sentence of what to do. Only a step is a stop: one place out of two is right, and nothing says which.
"""

from __future__ import annotations

from collections.abc import Iterator

from fieldbook.clock import utc_ms_of, utc_text
from fieldbook.model.reduction import Finding
from fieldbook.reduce.detectors import Detected, detect
from fieldbook.reduce.drift import NOT_SETTLED
from fieldbook.reduce.occupation import Reduced
from fieldbook.reduce.smoothing import SMOOTHED_BELOW


def behaviour_findings(reduced: Reduced) -> list[Finding]:
    """All findings on the behaviour of the errors of one occupation."""
    found = detect(reduced.estimate)
    return [
        *_steps(reduced, found),
        *_drift(found),
        *_periodic(found),
        *_bursts(reduced, found),
        *_smoothed(reduced, found),
        *_settling(found),
    ]


def _steps(reduced: Reduced, found: Detected) -> Iterator[Finding]:
    if not found.steps:
        return
    worst = max(found.steps, key=lambda step: abs(step.size_m))
    at = _clock_time(reduced, worst.at_ms)
    others = "" if len(found.steps) == 1 else f", the largest of {len(found.steps)} such steps"
    text = (
        f"The position stepped by {1000 * worst.size_m:+.0f} mm in {worst.axis}{at} without loss of fix{others}: a wrong "
        f"fix, or the antenna moved. {_place_of_mean(reduced)}: check the tripod, end this occupation, occupy again."
    )
    figures = {
        "axis": worst.axis,
        "size_m": worst.size_m,
        "utc": _utc(reduced, worst.at_ms),
        "steps": len(found.steps),
        "set_aside": reduced.judged.apart,
    }
    yield Finding("step", "stop", text, figures)


def _place_of_mean(reduced: Reduced) -> str:
    if reduced.judged.apart:
        return f"{reduced.judged.apart} epochs on one side were set aside, and nothing proves the other side right"
    return "The mean lies between two places"


def _drift(found: Detected) -> Iterator[Finding]:
    drift = found.drift
    if drift is None:
        return
    text = (
        f"The position drifted by {1000 * drift.change_m:+.0f} mm in {drift.axis} over {drift.span_s / 60:.0f} min, more "
        "than its correlation explains: the fix still converges or the tripod sinks. Check the tripod, and stay longer."
    )
    figures = {"axis": drift.axis, "change_m": drift.change_m, "u_m": drift.u_m, "span_s": drift.span_s, "p": drift.p}
    yield Finding("drift", "caution", text, figures)


def _periodic(found: Detected) -> Iterator[Finding]:
    wave = found.periodic
    if wave is None:
        return
    text = (
        f"A wave of {wave.period_s:.0f} s and {1000 * wave.amplitude_m:.1f} mm amplitude in {wave.axis}, as a reflecting "
        f"surface makes: {wave.periods:.1f} periods seen. Stay whole periods, at least three."
    )
    figures = {
        "axis": wave.axis,
        "period_s": wave.period_s,
        "amplitude_m": wave.amplitude_m,
        "periods": wave.periods,
        "p": wave.p,
    }
    yield Finding("periodic", "caution", text, figures)


def _bursts(reduced: Reduced, found: Detected) -> Iterator[Finding]:
    bursts = found.bursts
    if bursts is None:
        return
    text = (
        f"{bursts.blocks} of {bursts.of} stretches of 10 s lie apart from the rest and come back, by up to "
        f"{1000 * bursts.largest_m:.0f} mm in {bursts.axis}; {_told(reduced.judged.apart)}. Keep clear of the antenna, "
        "stay longer."
    )
    figures = {
        "blocks": bursts.blocks,
        "of": bursts.of,
        "axis": bursts.axis,
        "largest_m": bursts.largest_m,
        "set_aside": reduced.judged.apart,
    }
    yield Finding("bursts", "caution", text, figures)


def _told(apart: int) -> str:
    return f"{apart} epochs were set aside as outliers for it" if apart else "they are in the mean"


def _smoothed(reduced: Reduced, found: Detected) -> Iterator[Finding]:
    ratio = found.inside_ratio
    if ratio is None or ratio >= SMOOTHED_BELOW:
        return
    # code receivers filter as a rule; a carrier receiver that does hides what its epochs are worth
    severity = "caution" if reduced.estimate.fix_class.is_rtk_fixed else "info"
    text = (
        "The output is smoothed: neighbouring epochs follow a curve without any noise of their own, so many of them say "
        "no more than one. Switch position smoothing, averaging or static hold off in the receiver."
    )
    yield Finding("smoothed", severity, text, {"ratio": ratio, "limit": SMOOTHED_BELOW})


def _settling(found: Detected) -> Iterator[Finding]:
    index = found.settling_index
    if index is not None and index > NOT_SETTLED and found.drift is None and not found.steps:
        text = (
            f"The average is not settling yet (index {index:.2f}; independent parts give 0.25): the session is of one "
            "piece with the errors of its time of day. Stay longer, or come back hours later."
        )
        yield Finding("not_settled", "info", text, {"index": index, "limit": NOT_SETTLED})


def _utc(reduced: Reduced, instant_ms: int) -> str | None:
    started = reduced.reduction.started
    if started is None:
        return None
    return utc_text(utc_ms_of(started) + instant_ms - reduced.estimate.first_ms)


def _clock_time(reduced: Reduced, instant_ms: int) -> str:
    text = _utc(reduced, instant_ms)
    return "" if text is None else f" about {text[11:16]} UTC"
