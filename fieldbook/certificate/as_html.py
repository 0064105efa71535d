"""The certificate as one HTML file: no scripts, no external resources, figures and QR code inside.

Every text is escaped; the facts stand in a data block of type application/json, with `<`, `>` and `&` written as
JSON escapes, so that no text can end the block. Equal facts give equal bytes.
"""

from __future__ import annotations

import json
from html import escape
from importlib import resources
from string import Template

from fieldbook.certificate.as_pdf import qr_svg
from fieldbook.certificate.blocks import Block, Bullets, Pairs, Sentences, Table
from fieldbook.certificate.figures import captions, height_svg, plan_svg
from fieldbook.certificate.printable import printable
from fieldbook.certificate.sections import FirstPage, first_page, sections
from fieldbook.model.canonical import Tree, normalised
from fieldbook.model.visible import is_hidden

LONG_NAME = 14
_ESCAPES = {"<": "\\u003c", ">": "\\u003e", "&": "\\u0026", "\u2028": "\\u2028", "\u2029": "\\u2029"}


def render(facts: Tree) -> bytes:
    """The sealed facts as one HTML file in UTF-8, well-formed as XML too."""
    page = first_page(facts)
    parts = [_head(page), _box(page), _figures(facts), _pairs(page.evidence)]
    for section in sections(facts):
        blocks = "\n".join(_block(block) for block in section.blocks)
        parts.append(f"<section>\n<h2>{_e(section.title)}</h2>\n{blocks}\n</section>")
    parts.append(_sign(facts, page))
    template = resources.files("fieldbook.certificate") / "templates" / "certificate.html"
    text = Template(template.read_text(encoding="utf-8")).substitute(
        title=_e(f"{page.title} {page.number}, {page.mark}"),
        watermark=f'<div class="across" aria-hidden="true">{_e(page.watermark)}</div>\n' if page.watermark else "",
        body="\n".join(parts),
        facts=embedded(facts),
    )
    return text.encode("utf-8")


def embedded(facts: Tree) -> str:
    """The facts as JSON that can stand inside an element of HTML and of XML."""
    text = json.dumps(normalised(facts), ensure_ascii=False, sort_keys=True, separators=(",", ":"), allow_nan=False)
    for char, escaped in _ESCAPES.items():
        text = text.replace(char, escaped)
    return "".join(json.dumps(char)[1:-1] if is_hidden(char) else char for char in text)


def _e(text: str) -> str:
    return escape(text, quote=True)


def _head(page: FirstPage) -> str:
    status = "<br/>".join(_e(line) for line in page.status)
    lines = "<br/>".join(_e(line) for line in page.mark_lines)
    name_class = ' class="long"' if len(page.mark) > LONG_NAME else ""
    return (
        f"<header><div><p>{_e(page.firm)}</p><h1>{_e(page.title)}</h1></div>"
        f'<div class="number"><strong>{_e(page.number)}</strong>{status}</div></header>\n'
        f'<div class="mark"><h2{name_class}>{_e(page.mark)}</h2><p>{lines}</p></div>'
    )


def _box(page: FirstPage) -> str:
    rows = []
    for index, (label, value, unit, u95) in enumerate(page.box):
        last = ""
        if index == 0:
            last = f'<td rowspan="2">{_e(page.circle)} <span class="muted">radius of the circle, 95 %</span></td>'
        elif index > 1:
            words = f'{_e(u95)} <span class="muted">95 %</span>' if u95.startswith("±") else _e(u95)
            last = f"<td>{words}</td>"
        rows.append(
            f'<tr><td class="muted">{_e(label)}</td><td class="v">{_e(value)}</td><td>{_e(unit)}</td>{last}</tr>'
        )
    parts = "".join(_small_table(table) for table in (page.grid, page.geocentric) if table)
    lines = "".join(f"<p>{_e(line)}</p>" for line in page.frame_lines)
    return (
        f'<div class="box"><p class="head">{_e(page.box_head)}</p>\n<table>{"".join(rows)}</table>\n'
        + (f'<div class="parts">{parts}</div>\n' if parts else "")
        + f'<div class="frame">{lines}</div></div>'
    )


def _small_table(rows: list[list[str]]) -> str:
    lines = "".join(
        f'<tr><td class="muted">{_e(label)}</td><td class="v">{_e(value)}</td><td>{_e(unit)}</td></tr>'
        for label, value, unit in rows
    )
    return f"<div><table>{lines}</table></div>"


def _figures(facts: Tree) -> str:
    trace = facts["trace"]
    drawn = f"{trace['drawn']} of {max(trace['epochs'], trace['drawn'])} epochs drawn"
    plan, height = captions(facts)
    return (
        f'<div class="figures"><figure><figcaption>{_e(plan)} <small>{drawn}</small></figcaption>'
        f"{plan_svg(facts)}</figure>\n<figure><figcaption>{_e(height)}</figcaption>"
        f"{height_svg(facts)}</figure></div>"
    )


def _block(block: Block) -> str:
    if isinstance(block, Pairs):
        return _pairs(block.rows)
    if isinstance(block, Sentences):
        return "\n".join(f"<p>{_e(item)}</p>" for item in block.items)
    if isinstance(block, Bullets):
        return "<ul>" + "".join(f"<li>{_e(item)}</li>" for item in block.items) + "</ul>"
    return _table(block)


def _pairs(rows: list[list[str]]) -> str:
    return "<dl>" + "".join(f"<dt>{_e(label)}</dt><dd>{_e(value)}</dd>" for label, value in rows) + "</dl>"


def _table(table: Table) -> str:
    caption = f"<caption>{_e(table.caption)}</caption>" if table.caption else ""
    heads = "".join(f'<th class="{side}">{_e(head)}</th>' for head, side in zip(table.heads, table.align, strict=True))
    totals = len(table.rows) - table.last_rows
    lines = []
    for number, row in enumerate(table.rows):
        kind = ' class="total first"' if number == totals else ' class="total"' if number > totals else ""
        cells = "".join(f'<td class="{side}">{_e(cell)}</td>' for cell, side in zip(row, table.align, strict=True))
        lines.append(f"<tr{kind}>{cells}</tr>")
    return (
        f'<div class="data"><table>{caption}<thead><tr>{heads}</tr></thead>'
        f"<tbody>{''.join(lines)}</tbody></table></div>"
    )


def _sign(facts: Tree, page: FirstPage) -> str:
    sign_off = facts["sign_off"]
    if sign_off is None:
        words = "<p>Not signed off. This is a draft and not a certificate.</p>"
    else:
        words = (
            "<p>The figures above are certified for the mark as occupied.</p>"
            f"<p><strong>{_e(printable(sign_off['name']))}</strong><br/>{_e(printable(sign_off['licence']))}</p>"
            '<div class="line">signature or seal, date</div>'
        )
    return (
        f'<div class="sign"><div><h2>Sign-off</h2>{words}</div><div>{qr_svg(page.code)}'
        '<span class="muted">number and digest</span></div></div>\n'
        '<p class="end">end of certificate</p>\n'
        f'<p class="foot"><strong>{_e(page.number)}</strong> &#183; {_e(page.digest)}<br/>{_e(page.running_head)}</p>'
    )
