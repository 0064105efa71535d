"""Facts of a certificate that rests on several occupations of the mark.

The tree is that of one occupation's certificate (`facts.build_facts`): position, uncertainty, requirement and findings
are the combined mark's; `occupation`, `setup`, `antenna`, `receiver`, `corrections` and `trace` are those of the
occupation with the greatest weight, whose fixes the figures draw. Two parts are added:

    combined    which occupations with which weight, residual and significance; the pairs with difference, tolerances and
                grade of independence; what was not combined and why
    members     the whole evidence of each of them: occupation, set-up and readings, instruments, corrections, requirement,
                findings and answers, decisions, remarks, struck entries
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from fieldbook.certificate import evidence, words
from fieldbook.certificate.facts import build_facts, missing_items, not_stated, requirement_facts
from fieldbook.certificate.position import metres
from fieldbook.model.canonical import Tree, fixed, normalised
from fieldbook.model.reduction import MarkOccupation, MarkResult, Reduction, Repeat, Trace
from fieldbook.model.rounding import rounded, rounded_up
from fieldbook.model.state import BookState, Occupation

MEMBER_PARTS = ("job", "requirement", "corrections", "mark", "antenna", "receiver")


@dataclass(frozen=True)
class WholeMarkEvidence:
    """What a combined certificate is built from.

    principal: the occupation with the greatest weight. reduction, trace: the combined mark in the shape of a reduction
    of it. members: every combined occupation with its own reduction, in order of number.
    """

    result: MarkResult
    principal: Occupation
    reduction: Reduction
    trace: Trace
    members: Sequence[tuple[Occupation, Reduction]]


def build_combined_facts(
    state: BookState, whole: WholeMarkEvidence, *, sign_off: str | None, versions: dict[str, str]
) -> Tree:
    """All facts of the certificate of a combined mark, without number, issue time and digest.

    Raises:
        UsageError: `sign_off` is not of the form "name; licence".
    """
    facts = build_facts(
        state, whole.principal, whole.reduction, whole.trace, sign_off=sign_off, repeats=[], versions=versions
    )
    members = [_member(state, occupation, reduction) for occupation, reduction in whole.members]
    people = [name for member in members for name in member["observers"]]
    facts["job"]["observers"] = list(dict.fromkeys([*facts["job"]["observers"], *people]))
    facts["simulated"] = any(occupation.simulated for occupation, _ in whole.members)
    facts["covers"] = [*facts["covers"], words.COVERS_COMBINED]
    facts.update(decisions=[], remarks=[], struck=[], members=members, combined=_combined(whole))
    unknown = [name for member in members for name in not_stated({**facts, **member})]
    facts["not_stated"] = list(dict.fromkeys(unknown))
    facts["missing"] = missing_of_mark(whole, signed=facts["sign_off"] is not None)
    tree: Tree = normalised(facts)
    return tree


def _member(state: BookState, occupation: Occupation, reduction: Reduction) -> Tree:
    antenna, receiver = evidence.instruments(occupation, reduction)
    observers = [occupation.session.job.observer, occupation.observer, *(item.reader for item in occupation.heights)]
    return {
        "observers": list(dict.fromkeys(name for name in observers if name)),
        "occupation": evidence.occupation_facts(occupation, reduction),
        "setup": evidence.setup_facts(occupation, reduction),
        "antenna": antenna,
        "receiver": receiver,
        "corrections": evidence.corrections_facts(occupation),
        "requirement": requirement_facts(occupation.session, reduction, occupation.decisions),
        "findings": evidence.findings_facts(occupation, reduction),
        "decisions": evidence.decisions_facts(occupation),
        "remarks": evidence.entries_facts(occupation.remarks),
        "struck": evidence.struck_facts(state, occupation),
    }


def _combined(whole: WholeMarkEvidence) -> Tree:
    result = whole.result
    return {
        "occupations": [item.occupation for item in result.used],
        "drawn": whole.principal.number,
        "used": [_used(item) for item in result.used],
        "repeats": [_repeat(item) for item in result.repeats],
        "not_combined": [
            {"occupation": item.occupation, "code": item.code, "text": item.text} for item in result.not_combined
        ],
    }


def _used(item: MarkOccupation) -> Tree:
    height = item.height_significance
    return {
        "occupation": item.occupation,
        "fix_class": item.fix_class,
        "kept_s": fixed(item.kept_s, 1),
        "weight_enu": [fixed(value, 6) for value in item.weight_enu],
        "residual_enu_m": [metres(value) for value in item.residual_enu_m],
        "residual_u_enu_m": [metres(value) for value in item.residual_u_enu_m],
        "plan_significance": fixed(item.plan_significance, 6),
        "height_significance": fixed(height, 6),
        "printed": {
            "weight": rounded(50 * (item.weight_enu[0] + item.weight_enu[1]), 1),
            "residual_mm": [_mm(value) for value in item.residual_enu_m],
            "significance": rounded(100 * min(item.plan_significance, 1.0 if height is None else height), 0),
        },
    }


def _repeat(item: Repeat) -> Tree:
    apart = item.independence
    return {
        "first": item.first,
        "second": item.second,
        "difference_enu_m": [metres(value) for value in item.difference_enu_m],
        "u_enu_m": [metres(value) for value in item.u_enu_m],
        "plan_significance": fixed(item.plan_significance, 6),
        "height_significance": fixed(item.height_significance, 6),
        "level": fixed(item.level, 6),
        "plan_tolerance_m": metres(item.plan_tolerance_m),
        "height_tolerance_m": metres(item.height_tolerance_m),
        "agrees": item.agrees,
        "text": item.text,
        "grade": apart.grade,
        "hours_apart": fixed(apart.hours_apart, 2),
        "sky_apart_h": fixed(apart.sky_apart_h, 2),
        "changed": list(apart.changed),
        "same": list(apart.same),
        "not_known": list(apart.not_known),
        "independence": apart.text,
        "printed": {
            "plan_mm": rounded(1000 * item.plan_m, 0),
            "plan_tolerance_mm": rounded(1000 * item.plan_tolerance_m, 0),
            "up_mm": _mm(item.difference_enu_m[2]),
            "height_tolerance_mm": rounded(1000 * item.height_tolerance_m, 0),
            "u_mm": [
                "–" if value is None else rounded_up(1000 * value, 0) for value in (item.u_enu_m[0], item.u_enu_m[2])
            ],
        },
    }


def _mm(value_m: float | None) -> str:
    return "–" if value_m is None else rounded(1000 * value_m, 0)


def missing_of_mark(whole: WholeMarkEvidence, *, signed: bool) -> list[Tree]:
    """What the mark and each of its occupations lack; the sign-off is asked for once."""
    found = missing_items(whole.principal, whole.reduction, signed=signed)
    found = [item for item in found if item["code"] != "readings" and "finding occupation_has_stop" not in item["text"]]
    for occupation, reduction in whole.members:
        for item in missing_items(occupation, reduction, signed=True):
            found.append({"code": item["code"], "text": f"occupation {occupation.number}: {item['text']}"})
    return [item for item in found if item["code"] != "simulated" or item["text"].startswith("occupation ")]
