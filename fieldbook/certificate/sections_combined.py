"""Sections of a certificate of several occupations: how they were combined, and the evidence of each (facts in)."""

from __future__ import annotations

from dataclasses import replace

from fieldbook.certificate import sections_evidence as evidence
from fieldbook.certificate.blocks import Block, Bullets, Section, Sentences, Table, duration, said, trimmed, utc
from fieldbook.model.canonical import Tree


def summary_rows(facts: Tree) -> list[list[str]]:
    """The evidence in short, for the first page: one line per occupation, then what holds for all."""
    rows = []
    for member in facts["members"]:
        item, setup = member["occupation"], member["setup"]
        rows.append(
            [
                f"Occupation {item['number']}",
                f"{utc(item['started'])}, {duration(item['kept_s'])}; {item['epochs']['used']} epochs used of "
                f"{item['epochs']['heard']}; ARP {trimmed(setup['height_arp_m'], 'm', 4)}",
            ]
        )
    pairs = facts["combined"]["repeats"]
    worst = max(pairs, key=lambda one: ("independent", "partly independent", "not independent").index(one["grade"]))
    best = min(pairs, key=lambda one: ("independent", "partly independent", "not independent").index(one["grade"]))
    grade = best["grade"] if best["grade"] == worst["grade"] else f"{best['grade']} to {worst['grade']}"
    agreement = f"largest difference {max(float(one['printed']['plan_mm']) for one in pairs):.0f} mm in plan; {grade}"
    common = {row[0]: row for row in evidence.summary_rows(facts)}
    wanted = ("Fix accepted", "Corrections", "Antenna", "Receiver", "Observers", "Surveyor")
    return [*rows, ["Repeats", agreement], *(common[name] for name in wanted)]


def combined(facts: Tree) -> Section:
    """Weights, residuals and pairs."""
    item = facts["combined"]
    used = [
        [
            str(one["occupation"]),
            one["fix_class"],
            duration(one["kept_s"]),
            one["printed"]["weight"],
            *one["printed"]["residual_mm"],
            one["printed"]["significance"],
        ]
        for one in item["used"]
    ]
    heads = ["Occ.", "Kind of fix", "Time", "Weight, %", "East, mm", "North, mm", "Up, mm", "By chance, %"]
    pairs = [
        [
            f"{one['second']} − {one['first']}",
            one["printed"]["plan_mm"],
            one["printed"]["plan_tolerance_mm"],
            one["printed"]["up_mm"],
            one["printed"]["height_tolerance_mm"],
            trimmed(one["hours_apart"], decimals=1),
            one["grade"],
        ]
        for one in item["repeats"]
    ]
    pair_heads = ["Pair", "Plan, mm", "Tolerance", "Up, mm", "Tolerance", "Hours apart", "Grade"]
    blocks: list[Block] = [
        Sentences(
            [
                "The coordinates are the weighted mean of these occupations. Weights follow the kind of fix and the "
                "length, not the scatter of a session; what occupations share (station, antenna, receiver, frame "
                "operation) is not averaged. 'By chance': how often a larger residual comes up when nothing is wrong.",
                f"The figures draw the fixes of occupation {item['drawn']} about the combined mark.",
            ]
        ),
        Table(heads, "rllrrrrr", used, "Each occupation minus the combined mark"),
        Table(pair_heads, "lrrrrrl", pairs, "Occupations against each other"),
        Bullets(
            [
                f"{one['first']} and {one['second']}: {one['text']}. {one['independence']}. "
                f"Changed: {', '.join(one['changed']) or 'nothing'}; the same: {', '.join(one['same']) or 'nothing'}."
                for one in item["repeats"]
            ]
        ),
    ]
    if item["not_combined"]:
        left = [f"Occupation {one['occupation']} was not used. {one['text']}" for one in item["not_combined"]]
        blocks.append(Bullets(left))
    if not facts["ties"]:
        blocks.append(Sentences(["No tie: no check on a mark with known coordinates is recorded."]))
    return Section("Occupations combined", blocks)


def members(facts: Tree) -> list[Section]:
    """The sections of each occupation, its number in their titles."""
    found = []
    for member in facts["members"]:
        view = {**facts, **member}
        for make in (
            evidence.occupation,
            evidence.setup,
            evidence.instruments,
            evidence.requirement,
            evidence.findings,
            evidence.remarks,
        ):
            section = make(view)
            title = f"{section.title[0].lower()}{section.title[1:]}"
            found.append(replace(section, title=f"Occupation {member['occupation']['number']}: {title}"))
    return found


def received_rows(facts: Tree) -> list[tuple[str, str]]:
    """Received bytes of each occupation, for the record."""
    rows = []
    for member in facts["members"]:
        item = member["occupation"]
        sealed = said(item["received_sha256"]) if item["received_sha256"] else "not sealed"
        rows.append(
            (f"Received bytes, occupation {item['number']}", f"{said(item['received_bytes'])}, SHA-256 {sealed}")
        )
    return rows
