"""Every statement of the certificate as data: facts first, paper afterwards.

In comes the folded book, the occupation and its reduction; out comes one canonical tree (integers, texts, decimal
strings, booleans, null). No layout here. Numbers are stored unrounded (metres 7 decimals, degrees 12) and beside them
as `printed` texts rounded together with their uncertainty. What nobody stated is null and reads 'not stated' on
paper; it does not keep a certificate back. What does keep it back is listed in `missing`, each item named:

    sign_off       no responsible surveyor ("name; licence")
    simulated      the occupation was recorded from the simulated receiver
    open           the occupation has not ended
    client         no coordinates in the client's frame
    height         no ellipsoidal height of the mark
    readings       antenna height not read before and after, where the requirement asks for both
    finding        a finding of severity 'stop' is open, one item each

The list follows the contract (absent optional keys are 'not stated', and the certificate says so); the issuer's name
and the identity and condition of the mark (ISO/IEC 17025:2017, 7.8.2.1) are therefore printed as 'not stated', in
`not_stated`, rather than refused.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Sequence
from typing import Any

from fieldbook.certificate import evidence, position, words
from fieldbook.certificate.identity import SCHEMA
from fieldbook.certificate.position_local import local_facts
from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree, fixed, normalised
from fieldbook.model.entry import Entry
from fieldbook.model.reduction import LeaveLine, Reduction, Trace
from fieldbook.model.rounding import decimals_for, rounded_up
from fieldbook.model.session import Session
from fieldbook.model.state import BookState, Occupation


def build_facts(
    state: BookState,
    occupation: Occupation,
    reduction: Reduction,
    trace: Trace,
    *,
    sign_off: str | None,
    repeats: list[dict[str, Any]],
    versions: dict[str, str],
) -> Tree:
    """All facts of one occupation's certificate, without number, issue time and digest.

    Args:
        state: the folded book.
        occupation: the occupation to be certified.
        reduction, trace: its reduction, and the epochs the figures draw.
        sign_off: "name; licence" of the responsible surveyor, None for a draft.
        repeats: other occupations of the mark, as `repeats.repeats_of` gives them.
        versions: program, proj, epsg and what else made the figures.

    Raises:
        UsageError: `sign_off` is not of the form "name; licence".
    """
    session = occupation.session
    antenna, receiver = evidence.instruments(occupation, reduction)
    findings = evidence.findings_facts(occupation, reduction)
    facts: Tree = {
        "schema": SCHEMA,
        "title": words.TITLE,
        "document": {"kind": "draft", "number": None},
        "versions": dict(versions),
        "book": {"id": state.id, "head_seq": state.head_seq, "head_hash": state.head_hash},
        "simulated": occupation.simulated,
        "job": _job(occupation),
        "sign_off": parse_sign_off(sign_off),
        "mark": _mark(state, occupation),
        "position": {
            "client": position.client_facts(reduction),
            "grid": position.grid_facts(reduction),
            "height": position.height_facts(reduction),
            "receiver": position.receiver_facts(reduction),
        },
        "uncertainty": _uncertainty(reduction),
        "operation": position.operation_facts(reduction.operation),
        "taken_as": [_floats(dataclasses.asdict(item)) for item in session.frame.taken_as],
        "motion": [_floats(dataclasses.asdict(item)) for item in session.frame.motion],
        "realisation": session.frame.realisation,
        "occupation": evidence.occupation_facts(occupation, reduction),
        "setup": evidence.setup_facts(occupation, reduction),
        "antenna": antenna,
        "receiver": receiver,
        "corrections": evidence.corrections_facts(occupation),
        "requirement": requirement_facts(session, reduction, occupation.decisions),
        "findings": findings,
        "decisions": evidence.decisions_facts(occupation),
        "remarks": evidence.entries_facts(occupation.remarks),
        "struck": evidence.struck_facts(state, occupation),
        "repeats": [evidence.plain_tree(item) for item in repeats],
        "ties": [],
        "covers": _covers(reduction),
        "does_not_cover": list(words.DOES_NOT_COVER),
        "cautions": _cautions(session, reduction),
        "trace": evidence.trace_facts(trace),
    }
    local = local_facts(state, reduction)
    if local:  # a book without local grids has the facts it always had
        facts["position"]["local"] = local
    facts["not_stated"] = not_stated(facts)
    facts["missing"] = missing_items(occupation, reduction, signed=facts["sign_off"] is not None)
    tree: Tree = normalised(facts)
    return tree


def parse_sign_off(text: str | None) -> Tree | None:
    """Responsible surveyor and licence from "name; licence".

    Raises:
        UsageError: one of the two is missing.
    """
    if text is None:
        return None
    name, _, licence = (part.strip() for part in text.partition(";"))
    if not name or not licence:
        raise UsageError(
            f'The sign-off "{text}" does not name a surveyor and a licence.',
            'Give both, separated by a semicolon: --sign-off "name; licence".',
        )
    return {"name": name, "licence": licence}


def _job(occupation: Occupation) -> Tree:
    job = occupation.session.job
    people = [job.observer, occupation.observer, *(item.reader for item in occupation.heights)]
    return {
        "title": job.title,
        "client": job.client,
        "purpose": job.purpose,
        "firm": job.firm,
        "remarks": job.remarks,
        "observers": list(dict.fromkeys(name for name in people if name)),
    }


def _mark(state: BookState, occupation: Occupation) -> Tree:
    """The mark as last described in the book, else as in the occupation's session."""
    mark = occupation.session.mark
    latest = state.marks.get(occupation.mark, {})
    facts: Tree = {"name": occupation.mark}
    for key in ("id", "description", "inscription", "access", "condition"):
        facts[key] = latest.get(key, getattr(mark, key))
    if occupation.session.setup.inscription_read is not None:
        facts["inscription_read"] = occupation.session.setup.inscription_read
    witnesses = latest.get("witness_marks")
    facts["witness_marks"] = (
        [
            {
                "text": item.text,
                "azimuth_deg": fixed(item.azimuth_deg, 1),
                "distance_m": fixed(item.distance_m, 3),
            }
            for item in mark.witness_marks
        ]
        if witnesses is None
        else [{key: _as_text(item.get(key)) for key in ("text", "azimuth_deg", "distance_m")} for item in witnesses]
    )
    return facts


def _as_text(value: Any) -> str | None:
    return None if value is None else str(value)


def _uncertainty(reduction: Reduction) -> Tree:
    receiver, client = reduction.receiver, reduction.client
    measured = f"Mark in the receiver's frame, {receiver.frame_name} ({receiver.frame}), what was measured"
    statement = reduction.uncertainty_client
    facts: Tree = {"receiver": position.uncertainty_facts(reduction.uncertainty, measured), "client": None}
    if statement is not None and client is not None:
        given = f"Mark in the client's frame, {client.frame_name} ({client.frame}), with the frame operation"
        facts["client"] = position.uncertainty_facts(statement, given)
    return facts


def requirement_facts(session: Session, reduction: Reduction, decisions: Sequence[Entry]) -> Tree:
    """The requirement with every line of the leave check, and the decision rule where a line says 'meets'.

    A line that was not met has `reason` where the observer wrote one before leaving.
    """
    reasons = {
        str(entry.body["not_met"]): f"{entry.body.get('reason')} ({entry.observer}, entry {entry.seq})"
        for entry in decisions
        if "not_met" in entry.body
    }
    requirement = session.requirement
    lines = [_requirement_line(line, reasons) for line in (reduction.leave.lines if reduction.leave else [])]
    meets = any(line["verdict"] == "meets" for line in lines)
    return {
        "source": requirement.source,
        "in_frame": requirement.in_frame,
        "accept_quality": words.quality_text(requirement.accept_quality),
        "max_hdop": fixed(requirement.max_hdop, 2),
        "max_pdop": fixed(requirement.max_pdop, 2),
        "max_correction_age_s": fixed(requirement.max_correction_age_s, 1),
        "min_satellites": requirement.min_satellites,
        "lines": lines,
        "decision_rule": words.DECISION_RULE if meets else None,
    }


def _requirement_line(line: LeaveLine, reasons: dict[str, str]) -> Tree:
    if line.line in words.ACCURACY_LINES:
        verdict = "meets" if line.met else "does not meet"
    elif line.line in words.GATE_LINES:
        verdict = "kept" if line.met else "not shown"
    else:
        verdict = "done" if line.met else "not done"
    why = {} if line.met or line.line not in reasons else {"reason": reasons[line.line]}
    return why | {
        "line": line.line,
        "words": words.REQUIREMENT_WORDS.get(line.line, line.line),
        "scope": line.scope,
        "wanted": _quantity(line.wanted, line.unit),
        "have": _reached(line),
        "verdict": verdict,
        "text": line.text,
    }


def _quantity(value: float | str | None, unit: str) -> str:
    """A wanted or reached value with its unit, without trailing zeros beyond the millimetre."""
    if value is None:
        return "–"
    if isinstance(value, str):
        return value
    text = f"{value:.3f}" if unit == "m" else f"{value:.1f}".removesuffix(".0")
    return f"{text} {unit}".strip()


def _reached(line: LeaveLine) -> str:
    """What was reached; a 95 % figure rounded up, as everywhere on the certificate."""
    if line.line in words.ACCURACY_LINES and isinstance(line.have, float):
        return f"{rounded_up(line.have, decimals_for(line.have, most=4))} {line.unit}".strip()
    return _quantity(line.have, line.unit)


def _covers(reduction: Reduction) -> list[str]:
    client = [words.COVERS_CLIENT] if reduction.uncertainty_client is not None else []
    return [*words.COVERS, *client]


def _cautions(session: Session, reduction: Reduction) -> list[str]:
    frame, height = session.frame, reduction.height
    found = [words.CADASTRAL]
    caution = words.CORRECTION_CAUTIONS.get(session.corrections.kind)
    if caution:
        found.append(caution)
    found.append(
        f"The frame of the receiver's coordinates ({frame.receiver}) is the one the party declared; "
        "a receiver does not send it. Coordinates hold for the epoch stated with them only."
    )
    if height is not None and height.datum is None:
        found.append(
            f"The height by {height.model_name} is no height in a national height datum; "
            "do not mix it with levelled heights."
        )
    if height is not None and height.vertical95_m is None:
        found.append("The geoid model states no uncertainty, so the height by that model has no stated 95 %.")
    if any(step.authority == "motion" for step in reduction.operation.steps):
        found.append(
            "The client's coordinates hold for another epoch than that of the observation: the motion in between was stated, "
            "not measured, and an earthquake or a slide since would not show."
        )
    found += [f"{item.code} was taken as {item.as_code} by declaration ({item.source})." for item in frame.taken_as]
    if reduction.uncertainty.governed_by != "data":
        found.append(
            "The figures known for this kind of fix are working values, not a measured property of this receiver; "
            "the stated 95 % rests on them."
        )
    found.append("The results apply only to the mark as found, at the time of the occupation.")
    found.append(
        "A file alone can be shown to be consistent in itself only; that it is unchanged since issue needs the book "
        "it was issued from."
    )
    return found


# Paths of optional statements and their names on paper, in the order of the session file.
OPTIONAL = (
    ("job", "client", "client"),
    ("job", "firm", "firm"),
    ("job", "purpose", "purpose"),
    ("requirement", "source", "source of the requirement"),
    ("corrections", "station", "correction station"),
    ("corrections", "coordinates", "coordinates of the base"),
    ("mark", "description", "description of the mark"),
    ("mark", "inscription", "inscription"),
    ("mark", "access", "access"),
    ("mark", "condition", "condition of the mark"),
    ("mark", "witness_marks", "witness marks"),
    ("antenna", "serial", "antenna serial number"),
    ("antenna", "orientation_deg", "antenna orientation"),
    ("receiver", "model", "receiver model"),
    ("receiver", "serial", "receiver serial number"),
    ("receiver", "firmware", "receiver firmware"),
)


def not_stated(facts: Tree) -> list[str]:
    """Names of the optional statements that are missing."""
    return [name for table, key, name in OPTIONAL if facts[table].get(key) in (None, "", [])]


def missing_items(occupation: Occupation, reduction: Reduction, *, signed: bool) -> list[Tree]:
    """What keeps the certificate of an occupation a draft: `{code, text}` each (see the module docstring)."""
    found: list[tuple[str, str]] = []
    if not signed:
        found.append(("sign_off", "no sign-off by a responsible surveyor"))
    if occupation.simulated:
        found.append(("simulated", "the occupation is simulated"))
    if occupation.open or reduction.open:
        found.append(("open", f"occupation {occupation.number} is still open"))
    if reduction.client is None:
        found.append(("client", "no coordinates in the client's frame"))
    if (reduction.client.h_m if reduction.client else reduction.receiver.h_m) is None:
        found.append(("height", "no ellipsoidal height of the mark"))
    if occupation.session.requirement.height_readings == "before and after":
        read = {item.when for item in reduction.antenna.readings} | {item.when for item in occupation.heights}
        found += [
            ("readings", f"no antenna height reading {when} the occupation")
            for when in ("before", "after")
            if when not in read
        ]
    found += [
        ("finding", f"finding {item['code']}: {item['text']}")
        for item in evidence.stop_findings(evidence.findings_facts(occupation, reduction))
        if item["code"] != "simulated"
    ]
    return [{"code": code, "text": text} for code, text in found]


def _floats(tree: Tree) -> Tree:
    """A dataclass of the session as canonical values."""
    plain: Tree = evidence.plain_tree(tree)
    return plain
