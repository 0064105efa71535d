"""The certificate's content in reading order, as blocks without layout: what HTML, PDF and text have in common.

In come the facts only; out come the first page and the later sections, as pairs, tables, sentences and lists of
texts. A format decides how a block looks, never what it says, so no format can say more or less than another.
Null reads 'not stated'. All texts are printable (see `printable`); escaping is each format's own.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

from fieldbook.certificate import position_local, signed
from fieldbook.certificate import sections_combined as several
from fieldbook.certificate import sections_evidence as evidence
from fieldbook.certificate import sections_position as position
from fieldbook.certificate.blocks import Block, Bullets, Pairs, Section, Sentences, said, utc
from fieldbook.certificate.printable import shown
from fieldbook.model.canonical import Tree


@dataclass(frozen=True)
class FirstPage:
    """What stands on the first page, above the sections."""

    firm: str
    title: str
    number: str
    status: list[str]  # revision, what it replaces, date of issue
    mark: str
    mark_lines: list[str]
    box_head: str  # frame and epoch of the box
    box: list[list[str]]  # label, value, unit or hemisphere, 95 %
    circle: str  # the 95 % figure that holds for latitude and longitude together
    grid: list[list[str]]  # label, value, unit
    geocentric: list[list[str]]
    frame_lines: list[str]
    evidence: list[list[str]]
    watermark: str  # "", "DRAFT", "SIMULATED · DRAFT"
    running_head: str  # datum, epoch, heights, units, date: stands on every later page
    code: str  # content of the QR code
    digest: str
    missing: list[str] = field(default_factory=list)


def watermark(facts: Tree) -> str:
    """The word across each page."""
    if facts["simulated"]:
        return "SIMULATED · DRAFT"
    return "DRAFT" if facts["document"]["kind"] == "draft" else ""


def qr_text(facts: Tree) -> str:
    """Content of the QR code: number and digest."""
    return f"{facts['document']['number'] or 'DRAFT'} {facts['digest']}"


def first_page(facts: Tree) -> FirstPage:
    """The first page's statements."""
    code = qr_text(facts)
    facts = shown(facts)
    document, mark = facts["document"], facts["mark"]
    lines = [said(mark["description"])]
    if mark["id"]:
        lines.append(f"Identifier {mark['id']}")
    lines.append(f"{facts['job']['title']} · client: {said(facts['job']['client'])}")
    return FirstPage(
        firm="Firm not stated" if facts["job"]["firm"] is None else facts["job"]["firm"],
        title=facts["title"],
        number=document["number"] or "Draft, no number",
        status=_status(document),
        mark=mark["name"],
        mark_lines=lines,
        box_head=position.box_head(facts),
        box=position.box_rows(facts),
        circle=position.circle_text(facts),
        grid=position.grid_rows(facts),
        geocentric=position.geocentric_rows(facts),
        frame_lines=[*position.frame_lines(facts), *position_local.local_line(facts)],
        evidence=several.summary_rows(facts) if facts.get("combined") else evidence.summary_rows(facts),
        watermark=watermark(facts),
        running_head=position.running_head(facts),
        code=code,
        digest=facts["digest"],
        missing=[item["text"] for item in facts["missing"]],
    )


def _status(document: dict[str, Any]) -> list[str]:
    issued = utc(document.get("issued_utc"))
    if document["kind"] == "draft":
        return [f"drawn up {issued}", "not issued"]
    lines = [f"revision {document['revision']}, issued {issued}"]
    if document.get("supersedes"):
        lines.append(f"replaces {document['supersedes']}: {said(document.get('reason'))}")
    return lines


def sections(facts: Tree) -> list[Section]:
    """All sections after the first page, in order."""
    facts = shown(facts)
    return [
        *_drafts(facts),
        evidence.people(facts),
        evidence.mark(facts),
        position.as_observed(facts),
        position.uncertainty(facts),
        position.frames(facts),
        *position_local.local_sections(facts),
        *_evidence(facts),
        _limits(facts),
        Section("Cautions", [Bullets(signed.cautions(facts))]),
        _record(facts),
    ]


def _evidence(facts: Tree) -> list[Section]:
    if facts.get("combined"):
        own = [evidence.requirement(facts), evidence.findings(facts), several.combined(facts)]
        return [*own, *several.members(facts)]
    return [
        evidence.occupation(facts),
        evidence.setup(facts),
        evidence.instruments(facts),
        evidence.requirement(facts),
        evidence.findings(facts),
        evidence.remarks(facts),
        evidence.repeats(facts),
    ]


def _drafts(facts: Tree) -> list[Section]:
    if not facts["missing"]:
        return []
    items = [item["text"] for item in facts["missing"]]
    return [Section("What keeps this a draft", [Bullets(items)])]


def _limits(facts: Tree) -> Section:
    blocks: list[Block] = [
        Sentences(["Covered by the stated 95 %:"]),
        Bullets(facts["covers"]),
        Sentences(["Not covered, and not to be known from this occupation:"]),
        Bullets(facts["does_not_cover"]),
    ]
    return Section("What the 95 % covers and what it does not", blocks)


def _record(facts: Tree) -> Section:
    book, versions = facts["book"], facts["versions"]
    rows = [
        ("Program", f"Fieldbook {versions.get('program', 'version not stated')}"),
        ("Geodetic library and data", f"PROJ {said(versions.get('proj'))}, EPSG {said(versions.get('epsg'))}"),
        ("Other versions", _others(versions)),
        ("Book", f"{book['id']}, up to entry {book['head_seq']}"),
        ("Hash of that entry", book["head_hash"]),
        *(several.received_rows(facts) if facts.get("combined") else _received(facts["occupation"])),
        ("Digest of these facts", facts["digest"]),
        signed.signature_row(facts),
        *_revision(facts["document"]),
        ("Not stated by the party", ", ".join(facts["not_stated"]) or "nothing"),
    ]
    return Section("Record", [Pairs([list(row) for row in rows])])


def _others(versions: dict[str, Any]) -> str:
    rest = {key: value for key, value in versions.items() if key not in {"program", "proj", "epsg"}}
    return ", ".join(f"{key} {value}" for key, value in sorted(rest.items())) or "–"


def _received(occupation: dict[str, Any]) -> list[tuple[str, str]]:
    if occupation["received_sha256"] is None:
        return [("Received bytes", "not sealed")]
    return [
        ("Received bytes", str(occupation["received_bytes"])),
        ("Their SHA-256", occupation["received_sha256"]),
    ]


def _revision(document: dict[str, Any]) -> list[tuple[str, str]]:
    if not document.get("supersedes"):
        return []
    changed = "; ".join(document.get("changed") or []) or "not stated"
    return [("Replaces", document["supersedes"]), ("Why", said(document.get("reason"))), ("What changed", changed)]
