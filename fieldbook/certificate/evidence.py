"""The evidence's part of the facts: occupation, readings, instruments, findings and answers, repeats, trace.

Everything is taken from the folded book and the reduction; nothing is computed anew but differences between repeated
occupations and the thinning of the trace for the figures.
"""

from __future__ import annotations

import math
from decimal import Decimal
from typing import Any

from fieldbook.certificate.position import metres
from fieldbook.certificate.words import ANSWER_KEYS, DECISION_WORDS, NOT_USED_WORDS
from fieldbook.model.canonical import Tree, fixed
from fieldbook.model.entry import Entry
from fieldbook.model.reduction import Initialisation, ReadingReduced, Reduction, Trace
from fieldbook.model.rounding import rounded
from fieldbook.model.state import BookState, Occupation

TRACE_LIMIT = 400
NOT_USED_SHARE = 100  # of the points drawn, at most so many may be of epochs not used


def occupation_facts(occupation: Occupation, reduction: Reduction) -> Tree:
    """Times, epochs used and not used by code in words, initialisations, interruptions."""
    return {
        "number": occupation.number,
        "started": reduction.started,
        "ended": reduction.ended,
        "heard_from": reduction.heard_from,
        "heard_to": reduction.heard_to,
        "ended_by": occupation.ended_by,
        "kept_s": fixed(reduction.kept_s, 1),
        "epochs": {
            "heard": reduction.heard,
            "used": reduction.kept,
            "without_height": reduction.without_height,
        },
        "not_used": [
            {"code": code, "words": NOT_USED_WORDS.get(code, code), "epochs": count}
            for code, count in sorted(reduction.set_aside.items(), key=lambda item: _code_rank(item[0]))
            if count
        ],
        "initialisations": [_initialisation(item) for item in reduction.initialisations],
        "interruptions": [_interruption(entry) for entry in occupation.gaps],
        "epoch_of_observation": fixed(reduction.epoch_of_observation, 4),
        "received_sha256": occupation.received_sha256,
        "received_bytes": occupation.received_bytes,
        "link": occupation.link,
    }


def _code_rank(code: str) -> int:
    order = list(NOT_USED_WORDS)
    return order.index(code) if code in order else len(order)


def _initialisation(item: Initialisation) -> Tree:
    offset = item.offset_enu_m
    return {
        "number": item.number,
        "from": item.from_utc,
        "to": item.to_utc,
        "epochs": item.kept,
        "used": item.used,
        "independent": item.independent,
        "reason": item.reason or None,
        "offset_enu_m": None if offset is None else [metres(value) for value in offset],
        "printed": ["–"] * 3 if offset is None else [_millimetres(value) for value in offset],
    }


def _millimetres(value_m: float | None) -> str:
    return "–" if value_m is None else rounded(value_m * 1000, 0)


def _interruption(entry: Entry) -> Tree:
    body = entry.body
    if entry.kind == "resumed":
        return {"kind": "resumed", "utc": entry.utc, "seconds": plain_tree(body.get("after_s")), "reason": None}
    return {
        "kind": "interrupted",
        "utc": body.get("from_utc") or entry.utc,
        "seconds": plain_tree(body.get("seconds")),
        "reason": body.get("reason"),
    }


def setup_facts(occupation: Occupation, reduction: Reduction) -> Tree:
    """Support, centring, every height reading as typed with what it means, and the height that was applied."""
    setup, antenna = occupation.session.setup, reduction.antenna
    return {
        "reported_point": antenna.reported_point,
        "receiver_height_m": metres(setup.receiver_height_m),
        "support": setup.support,
        "pole_length_m": metres(setup.pole_length_m),
        "bubble_arcmin": fixed(setup.bubble_arcmin, 1),
        "tribrach_id": setup.tribrach_id,
        "last_check": setup.last_check,
        "centring": setup.centring,
        "centring_sigma_m": metres(setup.centring_sigma_m),
        "height_arp_m": metres(antenna.height_arp_m),
        "height_u_m": metres(antenna.height_u_m),
        "before_m": metres(antenna.before_m),
        "during_m": metres(antenna.during_m),
        "after_m": metres(antenna.after_m),
        "reading_sigma_assumed": antenna.reading_sigma_assumed,
        "readings": [_reading(item) for item in antenna.readings],
    }


def _reading(item: ReadingReduced) -> Tree:
    return {
        "method": item.method,
        "value": item.value,
        "unit": item.unit,
        "when": item.when,
        "at": item.at,
        "reader": item.reader,
        "time": item.time,
        "seq": item.seq,
        "value_m": metres(item.value_m),
        "arp_m": metres(item.arp_m),
        "sigma_m": metres(item.sigma_m),
        **({} if item.tape_offset_m is None else {"tape_offset_m": metres(item.tape_offset_m)}),
        "printed": {
            "value_m": rounded(item.value_m, 4),
            "arp_m": rounded(item.arp_m, 4),
            "sigma_mm": rounded(item.sigma_m * 1000, 1),
        },
    }


def instruments(occupation: Occupation, reduction: Reduction) -> tuple[Tree, Tree]:
    """Antenna and receiver: type, serial, firmware, and the offsets that were applied."""
    antenna, receiver = occupation.session.antenna, occupation.session.receiver
    fix_class = receiver.fix_class
    stated = {
        "source": antenna.source,
        "receiver_applies": antenna.receiver_applies,
        "arp_above_mount_m": metres(antenna.arp_above_mount_m),
        "calibration": _calibration(reduction.antenna.phase_centre),
    }
    return (
        {
            **{key: value for key, value in stated.items() if value is not None},
            "model": antenna.model,
            "serial": antenna.serial,
            "orientation_deg": fixed(antenna.orientation_deg, 1),
            "arp_to_phase_centre_enu_m": [
                metres(antenna.arp_to_phase_centre_east_m),
                metres(antenna.arp_to_phase_centre_north_m),
                metres(antenna.arp_to_phase_centre_up_m),
            ],
            "offset_frequency": antenna.offset_frequency,
            "slant_radius_m": metres(antenna.slant_radius_m),
            "slant_mark_above_arp_m": metres(antenna.slant_mark_above_arp_m),
        },
        {
            "maker": receiver.maker,
            "model": receiver.model,
            "serial": receiver.serial,
            "firmware": receiver.firmware,
            "class_source": None if fix_class is None else fix_class.source,
        },
    )


def _calibration(figures: dict[str, Any] | None) -> Tree | None:
    """The calibration that was used, and what its pattern moved; lengths as decimal texts."""
    if figures is None:
        return None
    kept = {
        key: figures[key]
        for key in ("file", "file_sha256", "type", "serial", "individual", "method", "date", "frequency")
    }
    north, east, up = figures["offset_neu_m"]
    pattern = figures["pattern"]
    return {
        **kept,
        "offset_enu_m": [metres(east), metres(north), metres(up)],
        "pattern": None
        if pattern is None
        else {
            "sky": pattern["sky"],
            "shift_enu_m": [metres(value) for value in pattern["shift_enu_m"]],
            "printed_mm": [rounded(1000 * value, 1) for value in pattern["shift_enu_m"]],
        },
    }


def corrections_facts(occupation: Occupation) -> Tree:
    """What corrected the receiver, and the base or network behind it as far as stated."""
    item = occupation.session.corrections
    return {
        "kind": item.kind,
        "station": item.station,
        "coordinates": item.coordinates,
        "frame": item.frame,
        "epoch": item.epoch,
        "source": item.source,
        "u95_m": metres(item.u95_m),
        "antenna": item.antenna,
        "distance_m": fixed(item.distance_m, 1),
    }


def findings_facts(occupation: Occupation, reduction: Reduction) -> list[Tree]:
    """Findings of recorder and reduction, each with its answer: the decision taken, or that it stands."""
    rows = [
        (entry.body.get("code"), entry.body.get("severity"), entry.body.get("text"), entry.body.get("figures"))
        for entry in occupation.findings
    ]
    known = {(row[0], row[2]) for row in rows}
    rows += [
        (item.code, item.severity, item.text, item.figures)
        for item in reduction.findings
        if (item.code, item.text) not in known
    ]
    return [
        {
            "code": code,
            "severity": severity,
            "text": text,
            "figures": plain_tree(figures or {}),
            "answer": _answer(str(code), str(severity), occupation),
        }
        for code, severity, text, figures in rows
    ]


def _answer(code: str, severity: str, occupation: Occupation) -> str:
    answers = [
        f"{decision_words(entry)}: {entry.body.get('reason') or 'no reason given'} "
        f"({entry.observer}, entry {entry.seq})"
        for entry in occupation.decisions
        if any(key in entry.body and any(word in code for word in words) for key, words in ANSWER_KEYS.items())
    ]
    if answers:
        return "; ".join(answers)
    return {"info": "for information", "stop": "open"}.get(severity, "stands as a caution")


def decision_words(entry: Entry) -> str:
    """What a `decision` entry decides, in words."""
    body = entry.body
    for key, words in DECISION_WORDS.items():
        if key in body:
            value = body[key]
            if key == "initialisation":
                return words.format(value) + (" used" if body.get("used") else " not used")
            return words.format(", ".join(map(str, value)) if isinstance(value, list) else value)
    return "decision"


def entries_facts(entries: list[Entry]) -> list[Tree]:
    """Remarks as written, with who and when."""
    return [
        {"seq": entry.seq, "utc": entry.utc, "observer": entry.observer, "text": entry.body.get("text")}
        for entry in entries
    ]


def decisions_facts(occupation: Occupation) -> list[Tree]:
    """Every decision with its reason."""
    return [
        {
            "seq": entry.seq,
            "utc": entry.utc,
            "observer": entry.observer,
            "text": decision_words(entry),
            "reason": entry.body.get("reason"),
        }
        for entry in occupation.decisions
    ]


def struck_facts(state: BookState, occupation: Occupation) -> list[Tree]:
    """Struck entries stay legible: what was struck, by whom, why."""
    rows = []
    for entry in occupation.struck:
        strike = state.strikes.get(entry.seq)
        rows.append(
            {
                "seq": entry.seq,
                "kind": entry.kind,
                "utc": None if strike is None else strike.utc,
                "observer": None if strike is None else strike.observer,
                "reason": None if strike is None else strike.body.get("reason"),
            }
        )
    return rows


def trace_facts(trace: Trace, limit: int = TRACE_LIMIT) -> Tree:
    """The trace thinned to at most `limit` points, integers of 0.1 mm and of 0.1 s.

    Epochs not used are rare and must stay visible: they keep up to `NOT_USED_SHARE` of the points.
    """
    indices = range(len(trace.time_s))
    used = [index for index in indices if trace.kept[index]]
    other = [index for index in indices if not trace.kept[index]]
    other = _thinned(other, min(NOT_USED_SHARE, limit // 4))
    chosen = sorted(_thinned(used, limit - len(other)) + other)
    return {
        "unit": "0.1 mm",
        "epochs": len(trace.time_s) * trace.step,
        "drawn": len(chosen),
        "time_ds": [round(trace.time_s[index] * 10) for index in chosen],
        "east": [_tenths(trace.east_m[index]) for index in chosen],
        "north": [_tenths(trace.north_m[index]) for index in chosen],
        "up": [_tenths(trace.up_m[index]) for index in chosen],
        "used": [int(trace.kept[index]) for index in chosen],
        "initialisation": [int(trace.initialisation[index]) for index in chosen],
    }


def _thinned(items: list[int], limit: int) -> list[int]:
    stride = max(1, math.ceil(len(items) / limit)) if limit > 0 else len(items) + 1
    return items[::stride]


def _tenths(value_m: float | None) -> int | None:
    return None if value_m is None or not math.isfinite(value_m) else round(value_m * 10_000)


def plain_tree(value: Any) -> Any:
    """Figures as canonical values: floats as decimal text of nine significant digits."""
    if isinstance(value, bool) or value is None or isinstance(value, int | str):
        return value
    if isinstance(value, float):
        return format(Decimal(f"{value:.9g}"), "f") if math.isfinite(value) else None
    if isinstance(value, dict):
        return {str(key): plain_tree(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [plain_tree(item) for item in value]
    return str(value)


def stop_findings(findings: list[Tree]) -> list[Tree]:
    """The findings that keep a certificate a draft."""
    return [item for item in findings if item["severity"] == "stop"]
