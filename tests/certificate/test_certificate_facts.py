"""Facts of a certificate: canonical, complete, rounded last, and what keeps them a draft."""

from __future__ import annotations

import copy
import dataclasses
import json
from pathlib import Path
from typing import Any

import kestrel_ridge as job
import pytest

from fieldbook.certificate import as_json, as_text, words
from fieldbook.certificate.facts import build_facts, parse_sign_off
from fieldbook.certificate.identity import changed_parts, facts_digest, facts_equal, sealed
from fieldbook.certificate.repeats import repeats_of
from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree, canonical_json
from fieldbook.model.entry import Entry
from fieldbook.model.epoch import SetAside
from fieldbook.model.reduction import Finding, LeaveLine, Reduction
from fieldbook.model.state import Occupation

GOLDEN = Path(__file__).parent.parent / "golden"


def facts_of(
    occupation: Occupation | None = None,
    reduction: Reduction | None = None,
    sign_off: str | None = job.SIGN_OFF,
) -> Tree:
    occ = occupation or job.occupation()
    return build_facts(
        job.state(occ),
        occ,
        reduction or job.reduction(),
        job.trace(),
        sign_off=sign_off,
        repeats=[],
        versions=job.VERSIONS,
    )


def leaves(tree: Any, path: tuple[Any, ...] = ()) -> list[tuple[Any, ...]]:
    """Paths of all single values of a tree."""
    if isinstance(tree, dict):
        return [leaf for key, value in tree.items() for leaf in leaves(value, (*path, key))]
    if isinstance(tree, list):
        return [leaf for index, value in enumerate(tree) for leaf in leaves(value, (*path, index))]
    return [path]


def changed_at(tree: Tree, path: tuple[Any, ...]) -> Tree:
    """A copy of the tree with one value changed."""
    copied = copy.deepcopy(tree)
    place: Any = copied
    for key in path[:-1]:
        place = place[key]
    old = place[path[-1]]
    place[path[-1]] = not old if isinstance(old, bool) else old + 1 if isinstance(old, int) else f"{old}x"
    return copied


@pytest.mark.parametrize(("name", "render"), [("json", as_json.render), ("txt", as_text.render)])
def test_golden_certificate(name: str, render: Any, facts: Tree) -> None:
    """What changes here is a change of the paper; `write_golden.py` writes them anew."""
    assert render(facts) == (GOLDEN / f"certificate_kr07.{name}").read_bytes()


def test_facts_are_canonical_and_round_trip(facts: Tree) -> None:
    text = canonical_json(facts)
    assert json.loads(text) == facts
    assert canonical_json(json.loads(text)) == text


def test_digest_covers_every_single_value(facts: Tree) -> None:
    body = {key: value for key, value in facts.items() if key not in {"digest", "trace"}}
    paths = leaves(body)
    assert len(paths) > 400
    digests = {facts_digest(changed_at(body, path)) for path in paths}
    assert facts_digest(body) not in digests
    assert len(digests) == len(paths)


def test_digest_is_sha256_of_canonical_facts_without_it(facts: Tree) -> None:
    import hashlib

    body = {key: value for key, value in facts.items() if key != "digest"}
    assert facts["digest"] == hashlib.sha256(canonical_json(body).encode("utf-8")).hexdigest()


def test_versions_head_and_issue_do_not_count_as_changes(facts: Tree) -> None:
    other = copy.deepcopy(facts)
    other["versions"] = {"program": "9.9"}
    other["book"]["head_seq"], other["book"]["head_hash"] = 99, "0" * 64
    other["document"] = {"kind": "certificate", "number": "3f2a91c0-7", "issued_utc": "2030-01-01T00:00:00.000Z"}
    assert facts_equal(facts, sealed(other))
    other["mark"]["condition"] = "loose"
    assert not facts_equal(facts, other)
    assert "mark.condition" in changed_parts(facts, other)


def test_stored_numbers_are_never_rounded_to_their_uncertainty(facts: Tree) -> None:
    client = facts["position"]["client"]
    assert client["lat_deg"] == "-36.412718543217"
    assert client["h_m"] == "1203.3466120"
    assert client["x_m"] == "-4373604.5628275"


def test_value_and_uncertainty_are_printed_together(facts: Tree) -> None:
    printed = facts["position"]["client"]["printed"]
    # 0.01382 m and 2.056 x 10.113 mm = 0.020793 m: two digits, rounded up.
    assert (printed["horizontal95_m"], printed["vertical95_m"]) == ("0.014", "0.021")
    assert printed["latitude"] == "36°24′45.78676″ S"
    assert printed["height_m"] == "1203.347"


def test_convergence_sign_is_said_and_matches_the_gda2020_manual() -> None:
    """GDA2020 Technical Manual v1.3 (ICSM, 2020), Table C.1, p. 74, Flinders Peak: -1 35 03.647 in the manual's sign.

    The manual writes grid bearing = azimuth + convergence; ours has the opposite sign, and says so.
    """
    reduction = job.reduction()
    assert reduction.grid is not None
    reduction.grid.convergence_deg = 1 + 35 / 60 + 3.647 / 3600
    grid = facts_of(reduction=reduction)["position"]["grid"]
    assert grid["printed"]["convergence"] == "+1°35′03.6″"
    assert "azimuth = grid bearing + convergence" in grid["convergence_sign"]
    assert "opposite" in grid["convergence_sign"]


def test_readings_stand_as_typed_with_what_they_mean(facts: Tree) -> None:
    first, second, _ = facts["setup"]["readings"]
    assert (first["value"], first["unit"], first["printed"]["arp_m"]) == ("1.5320", "m", "1.4946")
    assert (second["value"], second["unit"]) == ("5.03", "ft")
    assert second["value_m"] == "1.5331440"  # 5.03 x 0.3048 exactly


def test_every_set_aside_code_has_words() -> None:
    assert set(words.NOT_USED_WORDS) == set(SetAside)
    assert not any("set aside" in text for text in words.NOT_USED_WORDS.values())


def test_not_stated_is_listed_and_does_not_keep_it_a_draft() -> None:
    occupation = job.occupation()
    session = occupation.session
    occupation.session = dataclasses.replace(
        session,
        job=dataclasses.replace(session.job, firm=None, client=None),
        receiver=dataclasses.replace(session.receiver, serial=None, firmware=None),
    )
    facts = facts_of(occupation)
    assert {"firm", "client", "receiver serial number", "receiver firmware"} <= set(facts["not_stated"])
    assert facts["missing"] == []


def missing_codes(facts: Tree) -> list[str]:
    return [item["code"] for item in facts["missing"]]


def test_nothing_is_missing_from_the_complete_job(facts: Tree) -> None:
    assert facts["missing"] == []
    assert facts["not_stated"] == []


def test_each_missing_item_is_named() -> None:
    assert missing_codes(facts_of(sign_off=None)) == ["sign_off"]

    simulated = job.occupation()
    simulated.simulated = True
    assert missing_codes(facts_of(simulated)) == ["simulated"]

    still_open = job.occupation()
    still_open.ended_by = None
    assert missing_codes(facts_of(still_open)) == ["open"]

    no_after = job.reduction()
    no_after.antenna.readings = no_after.antenna.readings[:2]
    occupation = job.occupation()
    occupation.heights = occupation.heights[:2]
    facts = facts_of(occupation, no_after)
    assert missing_codes(facts) == ["readings"]
    assert facts["missing"][0]["text"] == "no antenna height reading after the occupation"

    no_place = job.reduction()
    no_place.client = no_place.grid = no_place.height = None
    no_place.receiver.h_m = None
    assert missing_codes(facts_of(reduction=no_place)) == ["client", "height"]

    stopped = job.reduction()
    stopped.findings.append(Finding("separation_coarse", "stop", "Geoid separation is printed to 0.1 m only."))
    facts = facts_of(reduction=stopped)
    assert missing_codes(facts) == ["finding"]
    assert "separation_coarse" in facts["missing"][0]["text"]
    assert facts["findings"][-1]["answer"] == "open"


def test_recorder_findings_count_too() -> None:
    occupation = job.occupation()
    occupation.findings = [
        job.entry(
            9,
            "finding",
            {"occupation": 1, "code": "overlap", "severity": "stop", "text": "Times overlap.", "figures": {}},
        )
    ]
    assert missing_codes(facts_of(occupation)) == ["finding"]


def test_answered_finding_names_the_decision(facts: Tree) -> None:
    answer = next(item["answer"] for item in facts["findings"] if item["code"] == "one_initialisation_wrong")
    assert "initialisation 2 not used: wrong fix, 0.19 m off" in answer
    assert "entry 23" in answer


def test_decision_rule_stands_only_where_a_line_says_meets(facts: Tree) -> None:
    assert facts["requirement"]["decision_rule"] == words.DECISION_RULE
    reduction = job.reduction()
    assert reduction.leave is not None
    for line in reduction.leave.lines:
        if line.line in words.ACCURACY_LINES:
            line.met = False
    without = facts_of(reduction=reduction)
    assert without["requirement"]["decision_rule"] is None
    assert "Decision rule" not in as_text.render(sealed_draft(without)).decode()
    assert "Decision rule" in as_text.render(facts).decode()


def sealed_draft(facts: Tree) -> Tree:
    return sealed({**facts, "document": {"kind": "draft", "number": None, "issued_utc": "2027-03-09T14:12:05.000Z"}})


def test_reached_figure_is_rounded_up_like_the_stated_one() -> None:
    reduction = job.reduction()
    assert reduction.leave is not None
    reduction.leave.lines[0].have = 0.0132
    assert facts_of(reduction=reduction)["requirement"]["lines"][0]["have"] == "0.014 m"


def test_trace_is_thinned_and_keeps_what_was_not_used(facts: Tree) -> None:
    trace = facts["trace"]
    assert trace["drawn"] == len(trace["east"]) <= 400
    assert trace["used"].count(0) == 74  # 68 epochs of the wrong initialisation and 6 outliers, all of them
    assert all(isinstance(value, int) for value in trace["east"] + trace["time_ds"])
    assert trace["time_ds"] == sorted(trace["time_ds"])


def test_repeats_compare_in_the_clients_frame() -> None:
    repeat = repeats_of(job.reduction(), [job.reduction(), job.second_reduction()])
    assert len(repeat) == 1
    east, north, up = (float(value) for value in repeat[0]["difference_enu_m"])
    # 4e-8 degrees of latitude are 4.44 mm, 6e-8 of longitude at 36.4 degrees south 5.38 mm (one degree of latitude
    # there is 110 980 m, of longitude 89 690 m by the usual series; common practice, no source). Tolerance 0.01 mm.
    assert north == pytest.approx(0.00444, abs=1e-5)
    assert east == pytest.approx(-0.00538, abs=1e-5)
    assert up == pytest.approx(0.006088, abs=1e-6)
    assert repeat[0]["hours_apart"] == "28.52"


@pytest.mark.parametrize("text", ["", "M. Okonjo", "; 2291", "M. Okonjo;", " ; "])
def test_sign_off_needs_name_and_licence(text: str) -> None:
    with pytest.raises(UsageError) as caught:
        parse_sign_off(text)
    assert "name; licence" in caught.value.remedy


def test_study_names_never_reach_a_page(facts: Tree) -> None:
    text = as_text.render(facts).decode().lower()
    for word in ("bgm", "oracle", "class floor", "set aside"):
        assert word not in text
    assert "least uncertainty claimed for this kind of fix" in text
    assert "not a cadastral determination; local law and a licensed surveyor come first" in text


def test_cautions_follow_the_corrections() -> None:
    occupation = job.occupation()
    occupation.session = dataclasses.replace(
        occupation.session, corrections=dataclasses.replace(occupation.session.corrections, kind="none")
    )
    cautions = " ".join(facts_of(occupation)["cautions"])
    assert "autonomous" in cautions
    assert "moves every mark" not in cautions


def test_what_was_left_open_prints_with_its_reason() -> None:
    line = LeaveLine("minimum_time_s", "set-up", 900.0, 610.0, "s", False, 290.0, "290 s more")
    gate = LeaveLine("max_pdop", "set-up", 4.0, None, "", False, None, "not reported")
    made = job.reduction()
    assert made.leave is not None
    made = dataclasses.replace(made, leave=dataclasses.replace(made.leave, lines=[*made.leave.lines, line, gate]))
    occ = job.occupation()
    body = {"occupation": occ.number, "not_met": "minimum_time_s", "reason": "thunderstorm"}
    entry = Entry(77, "2027-03-04T01:30:00.000Z", "decision", body, "R. Kell", "0" * 64, "7" * 64)
    occ = dataclasses.replace(occ, decisions=[*occ.decisions, entry])
    facts = facts_of(occ, made)
    document = {"kind": "draft", "number": None, "issued_utc": "2027-03-09T14:12:05.000Z"}
    by_line = {one["line"]: one for one in facts["requirement"]["lines"]}
    assert by_line["minimum_time_s"]["reason"] == "thunderstorm (R. Kell, entry 77)"
    assert by_line["max_pdop"]["verdict"] == "not shown"
    assert not any("reason" in one for one in facts_of()["requirement"]["lines"]), "facts of old certificates stay"
    text = as_text.render(sealed({**facts, "document": document})).decode("utf-8")
    assert "Left although not met" in text
    assert "thunderstorm (R. Kell, entry 77)" in text
    assert "no reason was written" in text
