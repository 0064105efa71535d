"""One test per door through which other people's texts come out: nothing hidden, nothing run, nothing elsewhere."""

from __future__ import annotations

import contextlib
import copy
import csv
import functools
import io
import json
import os
import re
import sys
import unicodedata
import xml.etree.ElementTree as ET
from pathlib import Path
from typing import Any

import pytest
from hostile import TEXTS, hidden_in

from fieldbook.book.connect import printable as of_sqlite
from fieldbook.book.store import Book
from fieldbook.certificate import as_html, as_json, as_pdf, as_text
from fieldbook.certificate.identity import sealed
from fieldbook.certificate.printable import printable as on_paper
from fieldbook.certificate.read_file import facts_of, text_lines
from fieldbook.certificate.verify_file import verify_certificate
from fieldbook.clock import SystemClock
from fieldbook.commands import run
from fieldbook.commands.output import plain
from fieldbook.model.item import Item, ItemKind
from fieldbook.model.visible import LONGEST_STEM, file_stem, visible
from fieldbook.nmea.describe import describe
from fieldbook.occupy.rebuild import occupation_of
from fieldbook.occupy.writer import Writer
from fieldbook.screens.plain import clean, fit, pad, width_of, wrapped
from fieldbook.settings.session import load_session

from .victims import sample

GOLDEN = Path(__file__).parents[1] / "golden" / "certificate_kr07.json"
each = pytest.mark.parametrize("name", TEXTS)


# -- showing: the functions every text passes -------------------------------------------------------------------


@each
def test_shown_on_a_terminal_a_screen_and_paper(name: str) -> None:
    text = TEXTS[name]
    for shown in (
        visible(text),
        plain(text),
        clean(text),
        on_paper(text),
        of_sqlite(text),
        fit(text, 30),
        *wrapped(text, 30),
    ):
        assert hidden_in(shown) == []
        assert "\n" not in shown
    assert width_of(pad(text, 40)) == 40
    assert visible(visible(text)) == visible(text)


def test_texts_that_look_alike_are_shown_apart() -> None:
    """A name with something hidden in it never passes for the name without."""
    alike = ["KR-07", "KR\u200b-07", "KR-07\ufe0f", "KR\u3164-07", "KR\u00ad-07", "KR-07\U000e0041", "KR-07\x00"]
    for show in (plain, clean, on_paper):
        assert len({show(text) for text in alike}) == len(alike)


def test_every_character_without_ink_or_with_a_mind_of_its_own_is_escaped() -> None:
    """All of Unicode, by the categories of this Python's own table."""
    for number in range(sys.maxunicode + 1):
        letter = chr(number)
        if unicodedata.category(letter) in {"Cc", "Cf", "Cs", "Co", "Cn", "Zl", "Zp"}:
            assert visible(letter).isascii(), hex(number)


@each
def test_a_name_made_into_a_file_name(name: str, tmp_path: Path) -> None:
    stem = file_stem(TEXTS[name])
    assert stem
    assert len(stem) <= LONGEST_STEM + 1
    assert Path(stem).name == stem
    assert not set(stem) & set('/\\:*?"<>| \x00')
    assert hidden_in(stem) == []
    assert not re.fullmatch(r"(con|prn|aux|nul|(com|lpt)[0-9¹²³])(\..*)?", stem, re.IGNORECASE)
    assert stem[0] not in "-."
    assert stem[-1] != "."
    path = tmp_path / f"{stem}-1.pdf"
    path.write_bytes(b"x")
    assert path.resolve().parent == tmp_path.resolve()


# -- paper --------------------------------------------------------------------------------------------------------


def _facts(text: str) -> dict[str, Any]:
    """The golden certificate with the text in every place where a person typed one."""
    facts: dict[str, Any] = copy.deepcopy(json.loads(GOLDEN.read_bytes()))
    facts["mark"].update(name=text, description=text, id=text, inscription=text, access=text, condition=text)
    facts["job"].update(title=text, client=text, firm=text, purpose=text, remarks=text, observers=[text])
    facts["corrections"].update(station=text)
    facts["receiver"].update(maker=text, model=text, serial=text, firmware=text)
    facts["antenna"].update(serial=text)
    facts["requirement"].update(source=text)
    facts["sign_off"] = {"name": text, "licence": text}
    for place in ("remarks", "findings"):
        for item in facts[place]:
            item["text"] = text
    return sealed(facts)


@each
def test_certificates_in_html_text_and_json(name: str) -> None:
    facts = _facts(TEXTS[name])
    page = as_html.render(facts).decode("utf-8")
    root = ET.fromstring(page)  # noqa: S314 - our own; well-formed whatever the text
    kinds = [item.tag.rpartition("}")[2] for item in root.iter()]
    assert kinds.count("script") == 1
    assert not {"img", "iframe", "object", "link", "a", "form"} & set(kinds)
    assert not [key for item in root.iter() for key in item.attrib if key.lower().startswith("on")]
    assert hidden_in(page) == []
    assert facts_of(page.encode(), "html") == facts
    text = as_text.render(facts).decode("utf-8")
    assert hidden_in(text) == []
    assert max(map(len, text.splitlines())) <= 92
    data = as_json.render(facts)
    assert hidden_in(data.decode("utf-8")) == []
    assert facts_of(data, "json") == facts


@pytest.mark.parametrize(
    "name", ["colour", "nul", "direction override", "no characters", "typst code", "typst markup", "template", "longer", "emoji"]
)  # fmt: skip
def test_certificates_in_pdf(name: str, tmp_path: Path) -> None:
    facts = _facts(TEXTS[name])
    data = as_pdf.render(facts)
    assert facts_of(data, "pdf") == facts
    shown = "\n".join(text_lines(data, "pdf")).replace("\u200b", "").replace("\u00ad", "")
    assert hidden_in(shown) == []
    if name == "typst code":
        assert '#read("/etc/passwd")' in shown.replace("\u201d", '"').replace("\n", " ")
    path = tmp_path / "hostile.pdf"
    path.write_bytes(data)
    for _, line in verify_certificate(path):
        assert hidden_in(line) == []


# -- the command line: errors ------------------------------------------------------------------------------------


def _said(*arguments: object) -> tuple[int, str]:
    out = io.StringIO()
    with contextlib.redirect_stdout(out), contextlib.redirect_stderr(out):
        code = run([str(one) for one in arguments])
    return code, out.getvalue()


@functools.cache
def _session_text() -> str:
    return (Path(__file__).parents[1] / "settings" / "contract_sample.toml").read_text(encoding="utf-8")


@pytest.fixture(scope="module")
def plain_book(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("plain")
    path = folder / "a.book"
    session = load_session(sample("kestrel-ridge-1", folder, 80))
    Book.create(path, clock=SystemClock(), observer="R. Kell", session_tree=session.tree).close()
    return path


@each
def test_errors_that_repeat_what_was_typed(name: str, plain_book: Path, tmp_path: Path) -> None:
    text = TEXTS[name].replace("\x00", "")  # where an argument ends
    table = tmp_path / "marks.csv"
    table.write_text(f'name,"{text}"\r\nKR-07,1\r\n', encoding="utf-8", newline="")
    session = tmp_path / "session.toml"
    session.write_text(f"{json.dumps(text)} = 1\n" + _session_text(), encoding="utf-8")
    other = tmp_path / "other.toml"
    other.write_text(_session_text().replace('"EPSG:7912"', json.dumps(text)), encoding="utf-8")
    commands: list[tuple[object, ...]] = [
        (text,), ("--" + text,), ("status", text), ("status", plain_book, "--" + text), ("watch", plain_book, "--count", text),
        ("reduce", plain_book, "--mark", text), ("certify", plain_book, text, "--out", tmp_path / "x.pdf"),
        ("certify", plain_book, "KR-07", "--out", f"{tmp_path}/none/{text}"), ("verify", text), ("marks", text),
        ("marks", "import", plain_book, table, "--by", "R. Kell"), ("marks", "import", plain_book, text, "--by", "R. Kell"),
        ("entry", plain_book, text, "--by", "R. Kell"), ("entry", plain_book, "height", "--set", text, "--by", "R. Kell"),
        ("entry", plain_book, "height", "--set", f"method={text}", "--by", "R. Kell"), ("strike", plain_book, text, "--reason", "x", "--by", "y"),
        ("observe", plain_book, "--session", text), ("observe", plain_book, "--session", session), ("observe", plain_book, "--session", other),
        ("observe", plain_book, "--session", plain_book.parent / "session.toml", "--link", text),
        ("observe", plain_book, "--session", plain_book.parent / "session.toml", "--link", "serial:///dev/x?" + text),
        ("observe", plain_book, "--session", plain_book.parent / "session.toml", "--for", text),
        ("export", plain_book, "--raw", "--occupation", text, "--out", tmp_path / "y"), ("links", "--listen", "tcp://" + text),
        ("new", plain_book, "--from", text), ("frames", text), ("profiles", text), ("antenna", text), ("key", text), ("rescue", text),
    ]  # fmt: skip
    for command in commands:
        code, out = _said(*command)
        assert hidden_in(out) == [], command
        assert "Traceback" not in out
        assert code in (0, 1, 2, 3, 4, 5), command
        if text not in ("",) and not text.isspace():
            _, tree = _said(*command, "--json")
            assert hidden_in(tree) == [], command
    assert sorted(path.name for path in tmp_path.iterdir()) == ["marks.csv", "other.toml", "session.toml"]


@pytest.mark.skipif(sys.platform != "linux", reason="file names of any bytes")
@pytest.mark.parametrize(
    "raw", [b"\x1b[2J", b"\xff\xfe", b"a\nb", b"\xe2\x80\xae", b"-rf", b"'; --", b"[b]x", b"=1", b"\xc2\x9b"]
)
def test_file_names_of_any_bytes(raw: bytes, plain_book: Path, tmp_path: Path) -> None:
    name = os.fsdecode(raw)
    book = tmp_path / f"{name}.book"
    with contextlib.closing(Book.open(plain_book, clock=SystemClock())) as opened:
        tree = opened.state().session.tree if opened.state().session else None
    Book.create(book, clock=SystemClock(), observer="R. Kell", session_tree=tree).close()
    for command in (("status",), ("verify",), ("marks", "list"), ("reduce",)):
        for more in ((), ("--json",)):
            code, out = _said(*command, book, *more)
            assert hidden_in(out) == []
            assert code in (0, 1, 5)
    code, out = _said("marks", "export", book, "--out", tmp_path / f"{name}.csv")
    assert (code, hidden_in(out)) == (0, [])
    assert {path.parent for path in tmp_path.rglob("*")} == {tmp_path}


# -- the command line: a whole job of hostile texts ---------------------------------------------------------------


def _occupied(folder: Path, texts: list[str]) -> tuple[Path, str]:
    """A book whose every typed text is one of these; its mark."""
    session = load_session(sample("kestrel-ridge-1", folder, 400))
    tree, left = copy.deepcopy(session.tree), list(texts)

    def put(table: str, *keys: str) -> None:
        for key in keys:
            tree[table][key] = left.pop(0)

    put("mark", "name", "description", "id", "inscription", "access", "condition")
    put("job", "title", "client", "firm", "purpose", "remarks", "observer")
    put("receiver", "maker", "model", "serial", "firmware")
    put("antenna", "serial")
    put("corrections", "station")
    put("requirement", "source")
    book = folder / "hostile.book"
    name = unicodedata.normalize("NFC", str(tree["mark"]["name"]))
    log = (folder / "receiver.nmea").read_bytes()
    with Book.create(book, clock=SystemClock(), observer="R. Kell", session_tree=None) as opened:
        body = {"occupation": 1, "mark": name, "session": tree, "link": f"file:{texts[-1]}", "simulated": False}
        opened.append("mark", tree["mark"], "R. Kell")
        opened.append("occupation", body, tree["job"]["observer"] if tree["job"]["observer"].strip() else "R. Kell")
        writer = Writer(opened, occupation_of(opened, 1), SystemClock())
        writer.write([Item(ItemKind.BYTES, log)])
        for kind, text in (("remark", texts[-2]), ("alarm", texts[-3]), ("finding", texts[-4])):
            more = {"code": texts[-5], "acknowledged": False, "severity": "caution", "figures": {}}
            opened.append(kind, {"occupation": 1, "text": text, **(more if kind != "remark" else {})}, "R. Kell")
        opened.append("gap", {"occupation": 1, "reason": texts[-6], "seconds": "1.0"}, "R. Kell")
        writer.state.link_state, writer.state.link_reason = "lost", texts[-7]
        writer.state.alarms = [texts[-8]]
        writer.finish("end of file", live=False)
    return book, name


USABLE = [text for name, text in TEXTS.items() if name not in ("empty", "blanks")]


@pytest.mark.parametrize("turn", range(0, len(USABLE), 9))
def test_a_whole_job_of_hostile_texts(turn: int, tmp_path: Path) -> None:
    texts = [*USABLE[turn:], *USABLE[:turn]]
    book, mark = _occupied(tmp_path / "job", texts)
    out = tmp_path / "out"
    out.mkdir()
    by = ("--by", "R. Kell")
    commands: list[tuple[object, ...]] = [
        ("status", book), ("status", book, "--json"), ("watch", book, "--count", 1), ("reduce", book), ("reduce", book, "--json"),
        ("reduce", book, "--mark", mark), ("marks", "list", book), ("marks", "list", book, "--json"),
        ("marks", "export", book, "--out", out / "marks.csv"), ("entry", book, "remark", "--set", f"text={texts[3]}", *by),
        ("certify", "--out", out / "a.txt", "--", book, mark), ("certify", "--out", out / "a.html", "--", book, mark),
        ("certify", "--out", out / "a.json", "--", book, mark), ("certify", "--out", out / "a.pdf", "--", book, mark),
        ("verify", book, out / "a.html", out / "a.json", out / "a.pdf"), ("export", book, "--raw", "--out", out / "raw"),
        ("strike", book, 1, "--reason", texts[5], *by), ("strike", book, 2, "--reason", texts[5], *by),
    ]  # fmt: skip
    for command in commands:
        code, said = _said(*command)
        assert hidden_in(said) == [], command
        assert "Traceback" not in said
        assert code in (0, 1, 2), (command[0], said[-300:])
    assert sorted(path.name for path in out.iterdir()) == ["a.html", "a.json", "a.pdf", "a.txt", "marks.csv", "raw"]
    for ending in ("txt", "html", "json"):
        assert hidden_in((out / f"a.{ending}").read_text(encoding="utf-8")) == []
    code, said = _said("certify", "--out", out / "a.pdf", "--", book, mark)
    assert (code, "exists already" in said) == (2, True)
    with Book.open(book, clock=SystemClock()) as opened:
        assert len(opened.entries()) > 8  # DROP TABLE was a text


# -- tables and receivers -----------------------------------------------------------------------------------------


@each
def test_a_table_of_marks_holds_no_formula_and_comes_back_as_it_was(name: str, tmp_path: Path) -> None:
    session = load_session(sample("kestrel-ridge-1", tmp_path / "s", 10))
    text = " ".join(TEXTS[name].replace("\x00", "").split()) or "x"  # a cell is one line, without blanks at its ends
    path, other = tmp_path / "a.book", tmp_path / "b.book"
    with Book.create(path, clock=SystemClock(), observer="R. Kell", session_tree=session.tree) as book:
        book.append("mark", {"name": text, "description": text}, "R. Kell")
    Book.create(other, clock=SystemClock(), observer="R. Kell", session_tree=session.tree).close()
    table = tmp_path / "marks.csv"
    assert _said("marks", "export", path, "--out", table)[0] == 0
    with table.open(encoding="utf-8", newline="") as file:
        rows = list(csv.reader(file))
    for cell in [cell for row in rows[1:] for cell in row[:6]]:
        assert not cell.lstrip().startswith(("=", "+", "-", "@", "\uff1d"))
    code, said = _said("marks", "import", other, table, "--by", "R. Kell", "--update")
    assert code == 0, said
    with Book.open(other, clock=SystemClock()) as book:
        assert book.state().marks[unicodedata.normalize("NFC", text)]["description"] == unicodedata.normalize(
            "NFC", text
        )


@pytest.mark.parametrize(
    ("data", "words"),
    [
        (b"name\r\n" + b"KR-07\r\n" * 900_000, "larger than 4 MB"),
        (b'name\r\n"' + b"x" * 200_000 + b'"\r\n', "no proper CSV"),
        (b"name,id\r\n" + b'"' * 99_999 + b"\r\n", "no proper CSV"),
        (b"name" + b",name" * 50_000 + b"\r\nx\r\n", ""),
        (b"\xff\xfe" + "name\r\nKR-07\r\n".encode("utf-16-le"), "no UTF-8"),
        (b"name,position\r\nKR-07,\"" + b"9" * 100_000 + b"\"\r\n", ""),
        (b"name,lat_deg,lon_deg\r\nKR-07,1e999999999,1\r\n", ""),
        (b"name,lat_deg,lon_deg\r\nKR-07,nan,inf\r\n", ""),
    ],
    ids=["size", "field", "quotes", "columns", "utf-16", "digits", "exponent", "nan"],
)  # fmt: skip
def test_tables_that_are_bombs_are_refused(data: bytes, words: str, plain_book: Path, tmp_path: Path) -> None:
    table = tmp_path / "marks.csv"
    table.write_bytes(data)
    code, said = _said("marks", "import", plain_book, table, "--by", "R. Kell")
    assert (code, "Traceback" in said) == (2, False), said[:300]
    assert words in said
    assert len(said) < 5000
    assert hidden_in(said) == []


@each
def test_names_of_sentences_on_the_links_page(name: str) -> None:
    text = TEXTS[name].encode("utf-8", "replace")[:60]
    for body in (text, b"GNGGA," + text, b"P" + text, text + b"GGA,1"):
        total = functools.reduce(lambda one, other: one ^ other, body, 0)
        told = json.dumps(describe(b"$" + body + b"*%02X\r\n" % total, 1.0), default=str, ensure_ascii=False)
        assert hidden_in(told) == []
