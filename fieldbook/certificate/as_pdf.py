"""The certificate as PDF, set by typst from its wheel: offline, no system fonts, the time taken from the entry.

User text reaches the typesetter as data only (one JSON text in `sys_inputs`), never as markup. The facts are attached
to the PDF as the JSON that `as_json` writes, so that a machine reads what a person sees. Equal facts give equal bytes
with one version of typst; that version is among the facts of a certificate.
"""

from __future__ import annotations

import dataclasses
import io
import json
import re
from importlib import resources
from typing import Any

from fieldbook.certificate import as_json
from fieldbook.certificate.blocks import Block, Section, Table
from fieldbook.certificate.figures import captions, height_svg, plan_svg
from fieldbook.certificate.printable import for_face, printable
from fieldbook.certificate.sections import first_page, qr_text, sections
from fieldbook.clock import utc_ms_of
from fieldbook.model.canonical import Tree

ATTACHMENT = "certificate.json"
WIDE_CELL = 26  # a left column with longer texts than this takes the room that is left,
FULL_WIDTH = 96  # where the table would not fit its natural width (characters, gaps counted as 4)
LONG_WORD = 34  # longer words get places to break
_NEGATIVE = re.compile(r"(?<![\w.-])-(?=\d)")
_HALF_WIDTH = re.compile(r"± (\S+) (?=m\b)")
_HASH = re.compile(r"[0-9a-f]{64}|[0-9a-f]{8}(-[0-9a-f]{4}){3}-[0-9a-f]{12}")


def render(facts: Tree) -> bytes:
    """The sealed facts as a PDF with its JSON attached."""
    import typst

    content = {
        "page": _set(dataclasses.asdict(first_page(facts))),
        "sections": [_section(item) for item in sections(facts)],
        "sign_off": _set(facts["sign_off"]),
        "short_mark": _set(_short(printable(facts["mark"]["name"]))),
        "author": _set(printable(facts["job"]["firm"] or "")),
        "note": _face_note(facts),
        "figure_note": _figure_note(facts),
        "captions": list(captions(facts)),
    }
    template = resources.files("fieldbook.certificate") / "templates" / "certificate.typ"
    made: bytes = typst.compile(
        template.read_bytes(),
        format="pdf",
        ignore_system_fonts=True,
        sys_inputs={
            "content": json.dumps(content, ensure_ascii=False, sort_keys=True),
            "facts": as_json.render(facts).decode("utf-8"),
            "plan": plan_svg(facts),
            "height": height_svg(facts),
            "qr": qr_svg(qr_text(facts)),
        },
        timestamp=_timestamp(facts),
        pdf_standards=["a-3b"],
    )
    return made


def qr_svg(text: str) -> str:
    """A QR code as SVG without size, error correction M."""
    import segno

    out = io.BytesIO()
    code = segno.make(text, error="m", micro=False)
    code.save(out, kind="svg", xmldecl=False, svgclass=None, lineclass=None, omitsize=True, border=2)
    return out.getvalue().decode("utf-8").strip()


def _timestamp(facts: Tree) -> int:
    return utc_ms_of(facts["document"]["issued_utc"]) // 1000


def _section(section: Section) -> Tree:
    return {"title": section.title, "blocks": [_block(block) for block in section.blocks]}


def _block(block: Block) -> Tree:
    tree: Tree = {"kind": type(block).__name__.lower(), **_set(dataclasses.asdict(block))}
    if isinstance(block, Table):
        tree["wide"] = _wide(block)
    return tree


def _wide(table: Table) -> list[bool]:
    """Which columns take the room that is left; none where the table fits as it is."""
    longest = [max((len(row[index]) for row in table.rows), default=0) for index in range(len(table.heads))]
    if sum(longest) + 4 * len(longest) <= FULL_WIDTH:
        return [False] * len(longest)
    return [side == "l" and length > WIDE_CELL for side, length in zip(table.align, longest, strict=True)]


def _set(value: Any) -> Any:
    """Every text of a tree ready for the face: numbers for what it lacks, true minus signs, places to break."""
    if isinstance(value, str):
        text = _NEGATIVE.sub("\u2212", for_face(value))
        return _breakable(_HALF_WIDTH.sub("±\u00a0\\1\u00a0", text))
    if isinstance(value, dict):
        return {key: _set(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_set(item) for item in value]
    return value


def _breakable(text: str) -> str:
    words = text.split(" ")
    return " ".join(
        "\u200b".join(word[start : start + 6] for start in range(0, len(word), 6))
        if len(word) > LONG_WORD and not _HASH.search(word)
        else word
        for word in words
    )


def _short(text: str, limit: int = 40) -> str:
    return text if len(text) <= limit else text[: limit - 1] + "…"


def _face_note(facts: Tree) -> str:
    """A sentence where some character cannot be shown by the face."""
    if all(for_face(text) == text for text in _texts(facts)):
        return ""
    return (
        "Characters that this print cannot show stand as their Unicode number, ‹U+…›; "
        "the attached facts hold them as typed."
    )


def _texts(value: Any) -> list[str]:
    if isinstance(value, str):
        return [value]
    if isinstance(value, dict):
        return [text for item in value.values() for text in _texts(item)]
    if isinstance(value, list):
        return [text for item in value for text in _texts(item)]
    return []


def _figure_note(facts: Tree) -> str:
    trace = facts["trace"]
    epochs = max(trace["epochs"], trace["drawn"])
    return f"{trace['drawn']} of {epochs} epochs drawn"
