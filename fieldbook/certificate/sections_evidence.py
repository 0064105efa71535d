"""Sections on people, mark, occupation, set-up, instruments, requirement, findings (facts in, blocks out)."""

from __future__ import annotations

from fieldbook.certificate.blocks import (
    Block,
    Bullets,
    Pairs,
    Section,
    Sentences,
    Table,
    clock,
    duration,
    said,
    trimmed,
    utc,
)
from fieldbook.certificate.words import NOT_MET
from fieldbook.model.canonical import Tree


def summary_rows(facts: Tree) -> list[list[str]]:
    """The evidence in short, for the first page."""
    occupation, setup = facts["occupation"], facts["setup"]
    epochs = occupation["epochs"]
    not_used = epochs["heard"] - epochs["used"]
    used = [item for item in occupation["initialisations"] if item["used"]]
    readings = setup["readings"]
    when = [name for name in ("before", "during", "after") if any(item["when"] == name for item in readings)]
    sign_off = facts["sign_off"]
    return [
        [
            "Observed",
            f"{utc(occupation['started'])} to {clock(occupation['ended'])}, occupation {occupation['number']}",
        ],
        [
            "Epochs",
            f"{epochs['used']} used of {epochs['heard']}, {not_used} not used; "
            f"{duration(occupation['kept_s'])} on the mark",
        ],
        ["Fix accepted", facts["requirement"]["accept_quality"]],
        ["Initialisations", f"{len(used)} used of {len(occupation['initialisations'])}"],
        ["Corrections", _corrections_text(facts["corrections"])],
        ["Antenna", f"{facts['antenna']['model']}, serial {said(facts['antenna']['serial'])}"],
        ["Receiver", _receiver_text(facts["receiver"])],
        [
            "Height of the ARP",
            f"{trimmed(setup['height_arp_m'], 'm', 4)}, {len(readings)} readings, {' and '.join(when) or 'none'}",
        ],
        ["Observers", ", ".join(facts["job"]["observers"]) or "not stated"],
        [
            "Surveyor",
            "not signed off" if sign_off is None else f"{sign_off['name']}, {sign_off['licence']}",
        ],
    ]


def _receiver_text(receiver: Tree) -> str:
    name = " ".join(item for item in (receiver["maker"], receiver["model"]) if item)
    return f"{said(name)}, serial {said(receiver['serial'])}, firmware {said(receiver['firmware'])}"


def _corrections_text(corrections: Tree) -> str:
    station = corrections["station"]
    return f"{corrections['kind']}, station {station}" if station else str(corrections["kind"])


def people(facts: Tree) -> Section:
    """Who asked, who did it, who answers for it."""
    job, sign_off = facts["job"], facts["sign_off"]
    rows = [
        ["Job", job["title"]],
        ["Client", said(job["client"])],
        ["Purpose", said(job["purpose"])],
        ["Firm", said(job["firm"])],
        ["Responsible surveyor", "not signed off" if sign_off is None else sign_off["name"]],
        ["Licence", "not signed off" if sign_off is None else sign_off["licence"]],
        ["Observers", ", ".join(job["observers"]) or "not stated"],
    ]
    if job["remarks"]:
        rows.append(["Remarks", job["remarks"]])
    return Section("Client, firm and people", [Pairs(rows)])


def mark(facts: Tree) -> Section:
    """The mark, its condition, how to get there, witness marks."""
    item = facts["mark"]
    rows = [
        ["Name", item["name"]],
        ["Identifier", said(item["id"])],
        ["Description", said(item["description"])],
        ["Inscription", said(item["inscription"])],
        *([["Read from the metal", item["inscription_read"]]] if item.get("inscription_read") else []),
        ["Condition", said(item["condition"])],
        ["Access", said(item["access"])],
    ]
    blocks: list[Block] = [Pairs(rows)]
    if item["witness_marks"]:
        witnesses = [
            [one["text"], one["azimuth_deg"] or "–", one["distance_m"] or "–"] for one in item["witness_marks"]
        ]
        blocks.append(Table(["Witness mark", "Azimuth from the mark, °", "Distance, m"], "lrr", witnesses))
    else:
        blocks.append(Pairs([["Witness marks", "not stated"]]))
    return Section("The mark", blocks)


def occupation(facts: Tree) -> Section:
    """Times, what was used and what was not, initialisations, interruptions."""
    item = facts["occupation"]
    epochs = item["epochs"]
    rows = [
        ["Occupation", f"{item['number']}, ended by {said(item['ended_by'])}"],
        ["Heard", f"{utc(item['heard_from'])} to {utc(item['heard_to'])}"],
        ["First and last epoch used", f"{utc(item['started'])} to {utc(item['ended'])}"],
        ["Time on the mark", duration(item["kept_s"])],
        ["Epochs heard, used", f"{epochs['heard']}, {epochs['used']}"],
    ]
    if epochs["without_height"]:
        rows.append(["Used without height", str(epochs["without_height"])])
    blocks: list[Block] = [Pairs(rows)]
    if item["not_used"]:
        lines = [[row["words"], str(row["epochs"])] for row in item["not_used"]]
        lines.append(["All epochs not used", str(sum(row["epochs"] for row in item["not_used"]))])
        blocks.append(Table(["Epochs not used, first reason that applies", "Epochs"], "lr", lines, last_rows=1))
    if item["initialisations"]:
        blocks.append(_initialisations(item))
    blocks += _interruptions(item)
    return Section("The occupation", blocks)


def _initialisations(item: Tree) -> Table:
    rows = [
        [
            str(one["number"]),
            clock(one["from"]),
            clock(one["to"]),
            str(one["epochs"]),
            *one["printed"],
            "used" if one["used"] else "not used" + (f": {one['reason']}" if one["reason"] else ""),
            "–" if not one["used"] else "yes" if one["independent"] else "no, resumed",
        ]
        for one in item["initialisations"]
    ]
    heads = ["No.", "From, UTC", "To, UTC", "Epochs", "East, mm", "North, mm", "Up, mm", "Used", "Independent"]
    return Table(heads, "rllrrrrll", rows, "Initialisations, offset from the mean of those used")


def _interruptions(item: Tree) -> list[Block]:
    lines = []
    for one in item["interruptions"]:
        seconds = "" if one["seconds"] is None else f", {one['seconds']} s"
        reason = f" ({one['reason']})" if one["reason"] else ""
        lines.append(f"{utc(one['utc'])}: {one['kind']}{seconds}{reason}")
    return [Bullets(lines)] if lines else []


def setup(facts: Tree) -> Section:
    """Set-up and every height reading as typed."""
    item = facts["setup"]
    centring = f"{item['centring']}, standard uncertainty {trimmed(item['centring_sigma_m'], 'm', 4)} per axis"
    rows = [
        ["Support", said(item["support"])],
        ["Centring", centring],
        ["Tribrach, last check", f"{said(item['tribrach_id'])}, {said(item['last_check'])}"],
        ["Coordinates refer to", item["reported_point"]],
    ]
    if item["pole_length_m"]:
        bubble = said(item["bubble_arcmin"])
        rows.append(["Pole", f"{trimmed(item['pole_length_m'], 'm', 4)}, bubble {bubble}′"])
    if item["receiver_height_m"]:
        rows.append(["Height keyed into the receiver", trimmed(item["receiver_height_m"], "m", 4)])
    occasions = ", ".join(
        f"{name} {trimmed(item[f'{name}_m'], 'm', 4)}"
        for name in ("before", "during", "after")
        if item[f"{name}_m"] is not None
    )
    rows += [
        ["Height of the ARP by occasion", occasions or "not read"],
        [
            "Height of the ARP applied",
            f"{trimmed(item['height_arp_m'], 'm', 4)}, standard uncertainty {trimmed(item['height_u_m'], 'm', 4)}",
        ],
    ]
    if item["reading_sigma_assumed"]:
        rows.append(["Uncertainty of a reading", "assumed, not stated by the party"])
    blocks: list[Block] = [Pairs(rows)]
    if item["readings"]:
        lines = [
            [
                one["when"],
                _METHODS.get(one["method"], one["method"]),
                _typed(one),
                one["printed"]["value_m"],
                one["printed"]["arp_m"],
                one["printed"]["sigma_mm"],
                one["at"] or "–",
                one["reader"] or "–",
                one["time"] or "–",
            ]
            for one in item["readings"]
        ]
        heads = ["When", "Method", "As typed", "Reading, m", "ARP above mark, m", "u, mm", "At", "Reader", "Time"]
        blocks.append(Table(heads, "llrrrrlll", lines, "Antenna height, every reading"))
    return Section("Set-up and antenna height", blocks)


_METHODS = {"mount": "to bottom of mount", "rod": "rod, fixed"}


def _typed(reading: Tree) -> str:
    """The reading as typed, with the tape's offset where one was stated."""
    offset = reading.get("tape_offset_m")
    text = f"{reading['value']} {reading['unit']}"
    return text if offset is None else f"{text}, tape {'' if offset.startswith('-') else '+'}{trimmed(offset, 'm', 4)}"


def instruments(facts: Tree) -> Section:
    """Antenna, receiver, what corrected it."""
    antenna, receiver, corrections = facts["antenna"], facts["receiver"], facts["corrections"]
    calibration = antenna.get("calibration")
    offset = calibration["offset_enu_m"] if calibration else antenna["arp_to_phase_centre_enu_m"]
    east, north, up = (trimmed(value, "m", 4) for value in offset)
    orientation = trimmed(antenna["orientation_deg"], "°").replace(" °", "°")
    rows = [
        ["Antenna", f"{antenna['model']}, serial {said(antenna['serial'])}, orientation {orientation}"],
        ["ARP to phase centre", f"east {east}, north {north}, up {up} ({said(antenna['offset_frequency'])})"],
        *_calibration_rows(antenna),
        ["Receiver", _receiver_text(receiver)],
        ["Corrections", _corrections_text(corrections)],
        ["Coordinates of the base", said(corrections["coordinates"])],
        ["Their frame and epoch", f"{said(corrections['frame'])}, {said(corrections['epoch'])}"],
        ["Their source", said(corrections["source"])],
        ["Their 95 %, distance", f"{trimmed(corrections['u95_m'], 'm', 3)}, {trimmed(corrections['distance_m'], 'm')}"],
    ]
    if receiver["class_source"]:
        rows.append(["Figures of the kind of fix", receiver["class_source"]])
    return Section("Instruments and corrections", [Pairs(rows)])


def _calibration_rows(antenna: Tree) -> list[list[str]]:
    """What is stated beyond the offset: where it is from, what the receiver applies, what the pattern moved."""
    rows = []
    if antenna.get("source"):
        rows.append(["Source of dimensions", antenna["source"]])
    if antenna.get("arp_above_mount_m"):
        rows.append(["ARP above the bottom of the mount", trimmed(antenna["arp_above_mount_m"], "m", 4)])
    if antenna.get("receiver_applies"):
        rows.append(["Applied by the receiver itself", antenna["receiver_applies"]])
    calibration = antenna.get("calibration")
    if calibration:
        whose = f"of serial {calibration['serial']}" if calibration["individual"] else "mean of the type"
        made = ", ".join(item for item in (calibration["method"], calibration["date"]) if item) or "method not stated"
        rows.append(["Calibration", f"{calibration['type']}, {whose}; {made}"])
        rows.append(["Calibration file", f"{calibration['file']}, SHA-256 {calibration['file_sha256']}"])
        pattern = calibration["pattern"]
        if pattern:
            east, north, up = pattern["printed_mm"]
            rows.append(["Pattern taken off", f"east {east}, north {north}, up {up} mm, over the {pattern['sky']} sky"])
    return rows


def requirement(facts: Tree) -> Section:
    """What was wanted, what was reached, and the decision rule where a line says 'meets'."""
    item = facts["requirement"]
    limits = [
        f"HDOP at most {trimmed(item['max_hdop'])}" if item["max_hdop"] else "",
        f"PDOP at most {trimmed(item['max_pdop'])}" if item["max_pdop"] else "",
        f"age of corrections at most {trimmed(item['max_correction_age_s'], 's')}"
        if item["max_correction_age_s"]
        else "",
        f"satellites at least {item['min_satellites']}" if item["min_satellites"] else "",
    ]
    rows = [
        ["Source", said(item["source"])],
        ["Uncertainty judged in", f"the {item['in_frame']}"],
        ["Fix quality accepted", item["accept_quality"]],
        ["Epochs used only with", ", ".join(limit for limit in limits if limit) or "no further limit stated"],
    ]
    blocks: list[Block] = [Pairs(rows)]
    if item["lines"]:
        lines = [
            [
                one["words"],
                "of the mark" if one["scope"] == "mark" else "of the set-up",
                one["wanted"],
                one["have"],
                one["verdict"],
            ]
            for one in item["lines"]
        ]
        blocks.append(Table(["Requirement", "Scope", "Wanted", "Reached", "Verdict"], "llrrl", lines))
    owed = [one for one in item["lines"] if one["scope"] == "set-up" and one["verdict"] in NOT_MET]
    if owed:
        why = [[one["words"], one.get("reason") or "no reason was written"] for one in owed]
        blocks.append(Table(["Left although not met", "Reason"], "ll", why))
    if item["decision_rule"]:
        blocks.append(Sentences([item["decision_rule"]]))
    return Section("Requirement", blocks)


def findings(facts: Tree) -> Section:
    """Findings and how they were answered."""
    if not facts["findings"]:
        return Section("Findings and how they were answered", [Sentences(["No findings."])])
    rows = [[one["severity"], one["text"], one["answer"]] for one in facts["findings"]]
    return Section("Findings and how they were answered", [Table(["Severity", "Finding", "Answer"], "lll", rows)])


def remarks(facts: Tree) -> Section:
    """Decisions, remarks and struck entries, as in the book."""
    rows = [
        [str(one["seq"]), utc(one["utc"]), one["observer"], f"decision: {one['text']}; {said(one['reason'])}"]
        for one in facts["decisions"]
    ]
    rows += [[str(one["seq"]), utc(one["utc"]), one["observer"], said(one["text"])] for one in facts["remarks"]]
    rows += [
        [
            str(one["seq"]),
            utc(one["utc"]),
            said(one["observer"]),
            f"{one['kind']} entry struck: {said(one['reason'])}",
        ]
        for one in facts["struck"]
    ]
    if not rows:
        return Section("Remarks, decisions, struck entries", [Sentences(["None."])])
    rows.sort(key=lambda row: int(row[0]))
    return Section("Remarks, decisions, struck entries", [Table(["Entry", "When", "By", "Text"], "rlll", rows)])


def repeats(facts: Tree) -> Section:
    """Other occupations of the mark and checks on known marks."""
    blocks: list[Block] = []
    if facts["repeats"]:
        rows = []
        for one in facts["repeats"]:
            printed = one.get("printed") or {}
            figures = [
                printed.get(key, "–") for key in ("east_mm", "north_mm", "up_mm", "horizontal95_mm", "vertical95_mm")
            ]
            rows.append(
                [
                    str(one.get("occupation", "–")),
                    utc(one.get("started")),
                    trimmed(one.get("hours_apart"), decimals=1),
                    *figures,
                ]
            )
        heads = ["Occ.", "Started", "Hours apart", "East, mm", "North, mm", "Up, mm", "95 % plan, mm", "95 % up, mm"]
        blocks.append(Table(heads, "rlrrrrrr", rows, "Other occupations of this mark: that one minus this one"))
        blocks.append(
            Sentences([f"Compared in {said(facts['repeats'][0].get('frame'))}. Not combined in this certificate."])
        )
    else:
        blocks.append(Sentences(["No other occupation of this mark stands in the book."]))
    if not facts["ties"]:
        blocks.append(Sentences(["No tie: no check on a mark with known coordinates is recorded."]))
    return Section("Repeats and ties", blocks)
