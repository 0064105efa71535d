"""The certificate as plain text, 92 columns at most, for a terminal or a mail. No figures: it says where they are."""

from __future__ import annotations

import textwrap

from fieldbook.certificate.blocks import Block, Bullets, Pairs, Sentences, Table
from fieldbook.certificate.sections import FirstPage, first_page, sections
from fieldbook.model.canonical import Tree

WIDTH = 92
LABEL = 30


def render(facts: Tree) -> bytes:
    """The whole certificate as UTF-8 text."""
    page = first_page(facts)
    lines = _first(page)
    for section in sections(facts):
        lines += ["", section.title.upper(), "-" * len(section.title)]
        for block in section.blocks:
            lines += _block(block)
    lines += ["", "Figures (plan of the fixes, height over time) are in the PDF and HTML of the same number."]
    lines += [f"Number: {page.number}", f"Digest: {page.digest}", "", "end of certificate", ""]
    return "\n".join(line.rstrip() for line in lines).encode("utf-8")


def _first(page: FirstPage) -> list[str]:
    lines = []
    if page.watermark:
        lines += [f"*** {page.watermark} ***".center(WIDTH), ""]
    lines += [*_wrapped(page.firm), page.title.upper(), f"Number {page.number}"]
    lines += [text for line in page.status for text in _wrapped(line)]
    lines += ["", *_wrapped(f"MARK {page.mark}")]
    lines += [text for line in page.mark_lines for text in _wrapped(line)]
    lines += ["", "=" * WIDTH]
    lines += [*_wrapped(page.box_head), ""]
    for label, value, unit, _u95 in page.box[:2]:
        note = f"95 %: {page.circle} radius in plan" if label == "Latitude" else ""
        lines.append(f"{label:<22}{value:>26} {unit:<2} {note}")
    for label, value, unit, u95 in page.box[2:]:
        head = textwrap.wrap(label, 44)
        lines += head[:-1]
        width = max(48 - len(head[-1]), len(value) + 1)
        lines.append(f"{head[-1]}{value:>{width}} {unit:<2} 95 %: {u95}")
    for rows in (page.grid, page.geocentric):
        if rows:
            lines.append("")
            lines += [f"{label:<22}{value:>26} {unit}" for label, value, unit in rows]
    lines.append("=" * WIDTH)
    lines += [text for line in page.frame_lines for text in _wrapped(line)]
    lines.append("")
    return lines + _pairs(page.evidence)


def _block(block: Block) -> list[str]:
    if isinstance(block, Pairs):
        return _pairs(block.rows)
    if isinstance(block, Sentences):
        return [text for item in block.items for text in _wrapped(item)]
    if isinstance(block, Bullets):
        return [text for item in block.items for text in _wrapped(item, "- ", "  ")]
    return _table(block)


def _wrapped(text: str, first: str = "", rest: str = "") -> list[str]:
    return textwrap.wrap(text, WIDTH, initial_indent=first, subsequent_indent=rest) or [first]


def _pairs(rows: list[list[str]]) -> list[str]:
    lines = []
    for label, value in rows:
        lines += _wrapped(value, f"{label:<{LABEL}}"[: max(LABEL, len(label) + 1)], " " * LABEL)
    return lines


def _table(table: Table) -> list[str]:
    """Columns as wide as their widest cell; where that is too wide, the longest text column wraps."""
    bodies = [max((len(row[index]) for row in table.rows), default=0) for index in range(len(table.heads))]
    words = [max(len(word) for word in head.split() or [""]) for head in table.heads]
    widths = [max(body, word) for body, word in zip(bodies, words, strict=True)]
    for index, head in enumerate(table.heads):  # a head on one line where there is room
        spare = WIDTH - 2 * (len(widths) - 1) - sum(widths)
        if len(head) > widths[index] and len(head) - widths[index] <= spare:
            widths[index] = len(head)
    while sum(widths) + 2 * (len(widths) - 1) > WIDTH and max(widths) > 12:
        widths[widths.index(max(widths))] -= 1
    lines = ["", *_wrapped(table.caption)] if table.caption else [""]
    lines += _row(table.heads, widths, table.align)
    lines.append("  ".join("-" * width for width in widths))
    for number, row in enumerate(table.rows):
        if table.last_rows and number == len(table.rows) - table.last_rows:
            lines.append("  ".join("-" * width for width in widths))
        lines += _row(row, widths, table.align)
    return [*lines, ""]


def _row(cells: list[str], widths: list[int], align: str) -> list[str]:
    columns = [textwrap.wrap(cell, width) or [""] for cell, width in zip(cells, widths, strict=True)]
    lines = []
    for index in range(max(len(column) for column in columns)):
        parts = []
        for column, width, side in zip(columns, widths, align, strict=True):
            text = column[index] if index < len(column) else ""
            parts.append(text.rjust(width) if side == "r" else text.ljust(width))
        lines.append("  ".join(parts).rstrip())
    return lines
