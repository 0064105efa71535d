"""The four formats: equal bytes for equal facts, nothing unescaped, the facts inside."""

from __future__ import annotations

import copy
import io
import json
import xml.etree.ElementTree as ET
from typing import Any

import kestrel_ridge as job
import pypdf
import pytest

from fieldbook.certificate import as_html, as_json, as_pdf, as_text
from fieldbook.certificate.blocks import Pairs, Table
from fieldbook.certificate.figures import height_svg, nice, plan_svg
from fieldbook.certificate.identity import sealed
from fieldbook.certificate.printable import FACE_RANGES, for_face, printable
from fieldbook.certificate.read_file import facts_of, text_lines
from fieldbook.certificate.sections import first_page, sections
from fieldbook.model.canonical import Tree

RENDERERS = {"json": as_json.render, "txt": as_text.render, "html": as_html.render, "pdf": as_pdf.render}
HOSTILE = [
    "<script>alert(1)</script>",
    '#import "x": y',
    "[bold] *b* _i_ $x$ `c` @ref <label>",
    "\x1b[31mred\x1b[0m\x07",
    "\u202eKR-70\u202c",
    "漢字 岩",
    "שלום",
    "W" * 300,
    "</script><!-- ]]> &amp; & \u2028 -->",
    "#panic() \\ // /* */",
]


def named(name: str, **document: object) -> Tree:
    facts = copy.deepcopy(job.issued_facts(**document))
    facts["mark"]["name"] = name
    facts["remarks"][0]["text"] = name
    return sealed(facts)


def pdf_text(data: bytes) -> str:
    return " ".join(text_lines(data, "pdf")).replace("\u2212", "-").replace("\u00a0", " ").replace("\u200b", "")


def parsed(text: str) -> ET.Element:
    """The text as XML; it is our own."""
    return ET.fromstring(text)  # noqa: S314


def local(element: ET.Element) -> str:
    return element.tag.rpartition("}")[2]


@pytest.mark.parametrize("name", RENDERERS)
def test_second_rendering_is_identical(name: str, facts: Tree) -> None:
    assert RENDERERS[name](facts) == RENDERERS[name](json.loads(json.dumps(facts)))


def test_html_is_well_formed_and_self_contained(facts: Tree) -> None:
    text = as_html.render(facts).decode("utf-8")
    root = parsed(text)
    assert [local(item) for item in root] == ["head", "body"]
    for item in root.iter():
        assert local(item) not in {"link", "iframe", "img", "object", "form"}
        assert not {key.rpartition("}")[2] for key in item.attrib} & {"src", "href", "onload", "onclick"}
    assert "url(" not in text
    assert text.count("<svg") == 3  # plan, height, QR
    assert facts_of(text.encode(), "html") == facts


@pytest.mark.parametrize("name", HOSTILE)
def test_hostile_names_are_text_in_html(name: str) -> None:
    facts = named(name)
    text = as_html.render(facts).decode("utf-8")
    root = parsed(text)
    scripts = [item for item in root.iter() if local(item) == "script"]
    assert [item.attrib["type"] for item in scripts] == ["application/json"]
    heading = next(item for item in root.iter() if local(item) == "h2")
    assert heading.text == printable(name)
    assert facts_of(text.encode(), "html") == facts
    assert "\x1b" not in text
    assert "\u202e" not in text.split("<script")[0]


@pytest.mark.parametrize("name", HOSTILE)
def test_hostile_names_are_text_in_pdf(name: str) -> None:
    facts = named(name)
    data = as_pdf.render(facts)
    assert facts_of(data, "pdf") == facts
    text = pdf_text(data)
    if name.isascii() and "\x1b" not in name and len(name) < 60:
        assert name in text
    elif "\x1b" in name:
        assert "‹U+001B›[31mred" in text
    elif "漢" in name:
        assert "‹U+6F22›" in text
        assert "cannot show" in text
    elif len(name) == 300:
        assert "W" * 300 in text.replace(" ", "")


@pytest.mark.parametrize("name", HOSTILE)
def test_hostile_names_are_harmless_in_text(name: str) -> None:
    text = as_text.render(named(name)).decode("utf-8")
    assert not [char for char in text if ord(char) < 32 and char != "\n"]
    assert "\u202e" not in text
    assert max(len(line) for line in text.splitlines()) <= 92


def test_pdf_says_what_the_facts_say(facts: Tree) -> None:
    data = as_pdf.render(facts)
    reader = pypdf.PdfReader(io.BytesIO(data))
    assert json.loads(bytes(reader.attachments["certificate.json"][0])) == facts
    assert bytes(reader.attachments["certificate.json"][0]) == as_json.render(facts)
    text = pdf_text(data)
    for printed in (
        "36°24′45.78676″",
        "148°18′38.75119″",
        "1203.347",
        "1183.162",
        "617520.500",
        "5969475.413",
        "-4373604.563",
        "0.99958138",
        "0.014 m",
        "± 0.021 m",
        "GDA2020 (EPSG:7843), static frame",
        "ITRF2014 (EPSG:7912)",
        "no stated 95 %",
        "end of certificate",
        "replaces 3f2a91c0-1: antenna serial number corrected",
        "not used",
    ):
        assert printed in text, printed


def test_pdf_pages_carry_number_digest_and_count(facts: Tree) -> None:
    pages = pypdf.PdfReader(io.BytesIO(as_pdf.render(facts))).pages
    for number, page in enumerate(pages, 1):
        text = page.extract_text()
        assert f"page {number} of {len(pages)}" in text
        assert "3f2a91c0-2" in text
        assert facts["digest"] in text
        assert round(float(page.mediabox.width) / 72 * 25.4) == 210  # A4, ISO 216: 210 x 297 mm
        assert round(float(page.mediabox.height) / 72 * 25.4) == 297
        if number > 1:
            assert "GDA2020 (EPSG:7843)" in text  # datum and epoch on every sheet


@pytest.mark.parametrize(
    ("simulated", "words"), [(False, ["DRAFT"]), (True, ["SIMULATED", "DRAFT"])], ids=["draft", "simulated"]
)
def test_drafts_say_so_across_each_page(simulated: bool, words: list[str]) -> None:
    facts = named("KR-07", kind="draft", number=None)
    facts["simulated"] = simulated
    facts = sealed(facts)
    for page in pypdf.PdfReader(io.BytesIO(as_pdf.render(facts))).pages:
        assert all(word in page.extract_text() for word in words)
    assert f'<div class="across" aria-hidden="true">{" · ".join(words)}' in as_html.render(facts).decode()
    assert f"*** {' · '.join(words)} ***" in as_text.render(facts).decode()


def test_a_certificate_has_no_watermark(facts: Tree) -> None:
    assert 'class="across"' not in as_html.render(facts).decode()
    assert "DRAFT" not in pdf_text(as_pdf.render(facts))


def test_every_statement_stands_in_every_format(facts: Tree) -> None:
    """One content for all formats: each cell of each section is in the HTML, the text and the PDF."""
    html = "".join(text_lines(as_html.render(facts), "html")).replace(" ", "")
    plain = as_text.render(facts).decode().replace(" ", "").replace("\n", "")
    pdf = pdf_text(as_pdf.render(facts)).replace(" ", "")
    for section in sections(facts):
        for block in section.blocks:
            if isinstance(block, Pairs):
                for _, value in block.rows:
                    bare = value.replace(" ", "")
                    assert bare in html, value
                    assert bare in plain, value
                    assert bare in pdf, value
            elif isinstance(block, Table):
                for cell in (cell for row in block.rows for cell in row if " " not in cell):
                    assert cell in html, cell
                    assert cell in plain, cell
                    assert cell in pdf, cell


def test_qr_code_reads_number_and_digest(facts: Tree) -> None:
    assert first_page(facts).code == f"3f2a91c0-2 {facts['digest']}"
    assert as_pdf.qr_svg(first_page(facts).code) in as_html.render(facts).decode()


def test_figures_are_well_formed_and_one_to_one(facts: Tree) -> None:
    for svg in (plan_svg(facts), height_svg(facts)):
        parsed(svg)
    plan = parsed(plan_svg(facts))
    ellipse = next(item for item in plan.iter() if local(item) == "ellipse")
    major, minor = float(ellipse.attrib["rx"]), float(ellipse.attrib["ry"])
    stated = facts["uncertainty"]["receiver"]["ellipse95"]
    assert major / minor == pytest.approx(float(stated["major_m"]) / float(stated["minor_m"]), rel=1e-3)
    # azimuth 36.6 degrees from north, clockwise, is 53.4 degrees above east: SVG turns clockwise from east.
    assert ellipse.attrib["transform"].startswith("rotate(-53.40 ")


def test_figures_without_heights_or_epochs(facts: Tree) -> None:
    bare = copy.deepcopy(facts)
    bare["trace"]["up"] = [None] * bare["trace"]["drawn"]
    assert "no heights received" in height_svg(bare)
    for key in ("time_ds", "east", "north", "up", "used", "initialisation"):
        bare["trace"][key] = []
    parsed(plan_svg(bare))
    parsed(height_svg(bare))


@pytest.mark.parametrize(("value", "step"), [(0.0119, 0.01), (0.05, 0.05), (3.4, 2.0), (1.0, 1.0), (0.99, 0.5)])
def test_nice_lengths(value: float, step: float) -> None:
    assert nice(value) == pytest.approx(step)


def test_wide_metres_and_bare_sessions_render(facts: Tree) -> None:
    bare = copy.deepcopy(facts)
    bare["position"]["grid"] = bare["position"]["height"] = None
    bare["position"]["client"] = bare["uncertainty"]["client"] = None
    bare["sign_off"] = None
    bare["requirement"]["lines"], bare["findings"], bare["repeats"] = [], [], []
    bare["operation"]["steps"] = []
    bare = sealed(bare)
    for render in RENDERERS.values():
        assert render(bare)
    assert "Not in the client's frame, as observed" in as_text.render(bare).decode()


def test_face_ranges_are_really_in_the_face() -> None:
    """PDF/A refuses a page with a missing glyph, so a page of every listed character proves the table."""
    import typst

    text = "".join(chr(code) for first, last in FACE_RANGES for code in range(first, last + 1) if code != 0xAD)
    source = b'#set text(font: "Libertinus Serif", fallback: false)\n#str(sys.inputs.t)'
    assert typst.compile(
        source,
        format="pdf",
        ignore_system_fonts=True,
        sys_inputs={"t": printable(text)},
        timestamp=0,
        pdf_standards=["a-2u"],
    )


def test_for_face_numbers_what_is_lacking() -> None:
    assert for_face("Łódź Ω Я a\u0301") == "Łódź Ω Я a\u0301"
    assert for_face("岩") == "‹U+5CA9›"
    assert for_face("a\u200fb") == "a‹U+200F›b"


def test_embedded_facts_survive_any_text() -> None:
    nasty: Any = "".join(map(chr, range(0x20))) + "\x7f\u2028\u2029</script>&<>"
    facts = named(nasty)
    assert facts_of(as_html.render(facts), "html") == facts
