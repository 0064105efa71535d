"""Numbers, drafts, supersession, refusals: what `certify` writes into the book and beside it."""

from __future__ import annotations

import hashlib
from pathlib import Path
from typing import Any

import kestrel_ridge as job
import pytest
from fake_book import FakeBook

from fieldbook.certificate import as_pdf, issue
from fieldbook.certificate.issue import Issued, certify
from fieldbook.certificate.verify_file import verify_certificate
from fieldbook.clock import FakeClock, utc_ms_of
from fieldbook.errors import FieldbookError, UsageError
from fieldbook.model.reduction import Finding, Reduction

CLOCK = FakeClock(0, utc_ms_of("2027-03-09T14:12:05.000Z"))


def prepared(reduction: Reduction | None = None) -> issue.Prepared:
    return reduction or job.reduction(), job.trace(), []


def write(book: FakeBook, out: Path, **options: Any) -> Issued:
    options = {"sign_off": job.SIGN_OFF, "reductions": prepared(), **options}
    return certify(book, options.pop("mark", "KR-07"), out, versions=job.VERSIONS, clock=CLOCK, **options)


def changed() -> issue.Prepared:
    reduction = job.reduction()
    assert reduction.client is not None
    reduction.client.h_m = 1203.351
    return prepared(reduction)


def kinds(book: FakeBook) -> list[str]:
    return [entry.kind for entry in book.entries()]


def test_first_certificate_is_number_one(tmp_path: Path) -> None:
    book = FakeBook()
    made = write(book, tmp_path / "kr07.pdf")
    assert (made.number, made.draft, made.missing, made.again) == ("3f2a91c0-1", False, [], False)
    assert kinds(book) == ["book", "certificate", "rendered"]
    entry, rendered = book.log[1:]
    assert set(entry.body) == {
        "number", "mark", "occupation", "facts", "digest", "supersedes", "reason", "issued_utc",
    }  # fmt: skip
    assert entry.body["digest"] == made.digest
    assert entry.body["facts"]["versions"]["typst"]
    assert entry.body["facts"]["book"]["head_seq"] == 1
    assert rendered.body == {
        "number": "3f2a91c0-1",
        "digest": made.digest,
        "format": "pdf",
        "name": "kr07.pdf",
        "sha256": hashlib.sha256((tmp_path / "kr07.pdf").read_bytes()).hexdigest(),
    }


def test_same_facts_in_another_format_keep_the_number(tmp_path: Path) -> None:
    book = FakeBook()
    first = write(book, tmp_path / "a.pdf")
    again = write(book, tmp_path / "a.html")
    third = write(book, tmp_path / "b.pdf")
    assert (again.number, again.digest, again.again) == (first.number, first.digest, True)
    assert kinds(book) == ["book", "certificate", "rendered", "rendered", "rendered"]
    assert (tmp_path / "a.pdf").read_bytes() == (tmp_path / "b.pdf").read_bytes()
    assert third.digest == first.digest


def test_changed_facts_need_a_reason(tmp_path: Path) -> None:
    book = FakeBook()
    write(book, tmp_path / "a.json")
    with pytest.raises(UsageError) as caught:
        write(book, tmp_path / "b.json", reductions=changed())
    assert caught.value.exit_code == 2
    assert "--supersede" in caught.value.remedy
    assert "position.client" in caught.value.text
    assert not (tmp_path / "b.json").exists()
    assert kinds(book) == ["book", "certificate", "rendered"]

    made = write(book, tmp_path / "b.json", reductions=changed(), supersede="height read again")
    assert (made.number, made.supersedes) == ("3f2a91c0-2", "3f2a91c0-1")
    assert book.log[-2].body["reason"] == "height read again"
    document = book.log[-2].body["facts"]["document"]
    assert document["revision"] == 2
    assert document["changed"] == ["coordinates (by 0.0 mm east, 0.0 mm north, 4.4 mm up)"]


def test_a_number_is_never_used_twice(tmp_path: Path) -> None:
    book = FakeBook()
    write(book, tmp_path / "a.json")
    book.append("strike", {"seq": 2, "reason": "wrong mark"}, "R. Kell")
    assert write(book, tmp_path / "b.json").number == "3f2a91c0-2"


def test_without_sign_off_it_is_a_draft(tmp_path: Path) -> None:
    book = FakeBook()
    made = write(book, tmp_path / "a.html", sign_off=None)
    assert (made.number, made.draft) == (None, True)
    assert made.missing == ["no sign-off by a responsible surveyor"]
    assert kinds(book) == ["book", "draft", "rendered"]
    assert "number" not in book.log[1].body
    assert book.log[2].body["number"] is None
    assert "DRAFT" in (tmp_path / "a.html").read_text(encoding="utf-8")
    write(book, tmp_path / "b.txt", sign_off=None)
    assert kinds(book) == ["book", "draft", "rendered", "rendered"]


def test_a_draft_does_not_stand_in_for_a_certificate(tmp_path: Path) -> None:
    book = FakeBook()
    write(book, tmp_path / "a.json", sign_off=None)
    assert write(book, tmp_path / "b.json").number == "3f2a91c0-1"
    assert write(book, tmp_path / "c.json", sign_off=None).draft


def test_sign_off_is_refused_while_items_are_missing(tmp_path: Path) -> None:
    book = FakeBook()
    reduction = job.reduction()
    reduction.findings.append(Finding("datum_unconfirmed", "stop", "The receiver reports a local datum."))
    with pytest.raises(UsageError) as caught:
        write(book, tmp_path / "a.pdf", reductions=prepared(reduction))
    assert "datum_unconfirmed" in caught.value.text
    assert caught.value.exit_code == 2
    assert kinds(book) == ["book"]
    assert list(tmp_path.iterdir()) == []


def test_simulated_occupations_give_drafts_only(tmp_path: Path) -> None:
    book = FakeBook()
    book.base.occupations[1].simulated = True
    with pytest.raises(UsageError):
        write(book, tmp_path / "a.html")
    write(book, tmp_path / "a.html", sign_off=None)
    assert "SIMULATED" in (tmp_path / "a.html").read_text(encoding="utf-8")


def refusal(book: FakeBook, out: Path, **options: Any) -> UsageError:
    before = kinds(book)
    with pytest.raises(UsageError) as caught:
        write(book, out, **options)
    assert kinds(book) == before
    assert caught.value.remedy
    return caught.value


def test_refusals_write_nothing(tmp_path: Path) -> None:
    book = FakeBook(tmp_path / "job.json")
    (tmp_path / "job.json").write_bytes(b"the book")
    assert "no mark KR-08" in refusal(book, tmp_path / "a.pdf", mark="KR-08").text
    assert "ending" in refusal(book, tmp_path / "a.doc").text
    assert "does not exist" in refusal(book, tmp_path / "nowhere" / "a.pdf").text
    assert "not one of mark" in refusal(book, tmp_path / "a.pdf", occupation=5).text
    (tmp_path / "b.pdf").mkdir()
    assert "folder" in refusal(book, tmp_path / "b.pdf").text
    assert "itself" in refusal(book, tmp_path / "job.json", replace=True).text
    assert (tmp_path / "job.json").read_bytes() == b"the book"
    (tmp_path / "a.pdf").write_bytes(b"mine")
    assert "exists already" in refusal(book, tmp_path / "a.pdf").text
    assert (tmp_path / "a.pdf").read_bytes() == b"mine"
    write(book, tmp_path / "a.pdf", replace=True)
    assert (tmp_path / "a.pdf").read_bytes().startswith(b"%PDF")


def test_open_occupations_are_refused(tmp_path: Path) -> None:
    book = FakeBook()
    book.base.occupations[1].ended_by = None
    assert "still open" in refusal(book, tmp_path / "a.pdf", sign_off=None).text


def test_several_occupations_need_a_choice(tmp_path: Path) -> None:
    book = FakeBook(occupations=2)
    assert "--occupation" in refusal(book, tmp_path / "a.json").remedy
    asked: list[int] = []

    def reductions(number: int) -> issue.Prepared:
        asked.append(number)
        return prepared(job.second_reduction() if number == 2 else job.reduction())

    assert write(book, tmp_path / "a.json", occupation=1, reductions=reductions).number == "3f2a91c0-1"
    made = write(book, tmp_path / "b.json", occupation=2, reductions=reductions)
    assert (made.number, made.supersedes) == ("3f2a91c0-2", None)
    assert asked == [1, 2]


def test_a_failing_renderer_leaves_book_and_folder_alone(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def fails(facts: Any) -> bytes:
        raise FieldbookError("no page")

    monkeypatch.setitem(issue.RENDERERS, "pdf", fails)
    book = FakeBook()
    with pytest.raises(FieldbookError, match="no page"):
        write(book, tmp_path / "a.pdf")
    assert kinds(book) == ["book"]
    assert list(tmp_path.iterdir()) == []


def test_a_book_that_cannot_be_written_leaves_no_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    book = FakeBook()

    def fails(*_: Any) -> None:
        raise FieldbookError("locked")

    monkeypatch.setattr(book, "append", fails)
    with pytest.raises(FieldbookError, match="locked"):
        write(book, tmp_path / "a.json")
    assert list(tmp_path.iterdir()) == []


def test_two_writers_cannot_take_one_number(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    book = FakeBook()

    def slow(facts: Any) -> bytes:
        write(book, tmp_path / "first.txt", reductions=changed())
        return b"late"

    monkeypatch.setitem(issue.RENDERERS, "json", slow)
    with pytest.raises(UsageError, match="meanwhile"):
        write(book, tmp_path / "second.json")
    assert kinds(book) == ["book", "certificate", "rendered"]
    assert [path.name for path in tmp_path.iterdir()] == ["first.txt"]


# --- verification -----------------------------------------------------------------------------------------------


def verdict(path: Path, book: FakeBook | None = None) -> tuple[bool, str]:
    lines = verify_certificate(path, book)
    return all(holds for holds, _ in lines), "\n".join(text for _, text in lines)


@pytest.mark.parametrize("extension", ["pdf", "html", "json"])
def test_an_issued_file_holds(tmp_path: Path, extension: str) -> None:
    book = FakeBook()
    out = tmp_path / f"a.{extension}"
    write(book, out)
    holds, text = verdict(out)
    assert holds, text
    assert "Consistent in itself" in text
    holds, text = verdict(out, book)
    assert holds, text
    assert "Unchanged since issue" in text
    assert "(entry 3)" in text


@pytest.mark.parametrize(
    ("old", "new"),
    [("0.014", "0.004"), ("1203.347", "1203.341"), ("R. Kell", "R. Kelp"), ("#1a1a1a", "#1a1a1b")],
)
def test_a_changed_page_is_found_without_the_book(tmp_path: Path, old: str, new: str) -> None:
    out = tmp_path / "a.html"
    write(FakeBook(), out)
    page, mark, data = out.read_text(encoding="utf-8").partition('<script type="application/json"')
    out.write_text(page.replace(old, new, 1) + mark + data, encoding="utf-8")
    holds, text = verdict(out)
    assert not holds, text


def test_a_changed_visible_number_of_a_pdf_is_found_and_named(tmp_path: Path) -> None:
    """A PDF with another page content but the true facts attached."""
    from pypdf import PdfReader, PdfWriter

    book = FakeBook()
    out = tmp_path / "a.pdf"
    write(book, out)
    reduction = job.reduction()
    assert reduction.client is not None
    reduction.client.h_m = 1203.3999
    write(FakeBook(), tmp_path / "other.pdf", reductions=prepared(reduction))
    true_facts = bytes(PdfReader(out).attachments[as_pdf.ATTACHMENT][0])
    writer = PdfWriter()
    for page in PdfReader(tmp_path / "other.pdf").pages:
        writer.add_page(page)
    writer.add_attachment(as_pdf.ATTACHMENT, true_facts)
    forged = tmp_path / "forged.pdf"
    writer.write(forged)
    for at_hand in (None, book):
        holds, text = verdict(forged, at_hand)
        assert not holds
        assert "1203.400" in text


@pytest.mark.parametrize("extension", ["html", "json"])
def test_changed_facts_are_found(tmp_path: Path, extension: str) -> None:
    book = FakeBook()
    out = tmp_path / f"a.{extension}"
    write(book, out)
    assert out.read_bytes().count(b"0.0138200") == 1  # the circle of the client's frame, unrounded: in the facts only
    out.write_bytes(out.read_bytes().replace(b"0.0138200", b"0.0108200"))
    holds, text = verdict(out)
    assert not holds
    assert "do not fit their digest" in text
    holds, text = verdict(out, book)
    assert not holds
    assert "changed: uncertainty.client.horizontal95_m" in text


def test_a_forgery_consistent_in_itself_needs_the_book(tmp_path: Path) -> None:
    """Who changes facts, digest and page alike makes a consistent file; only the book tells."""
    book, forger = FakeBook(), FakeBook()
    write(book, tmp_path / "true.json")
    write(forger, tmp_path / "forged.json", reductions=changed())
    assert verdict(tmp_path / "forged.json")[0]
    holds, text = verdict(tmp_path / "forged.json", book)
    assert not holds
    assert "position.client.h_m" in text


def test_superseded_certificates_hold_and_say_so_first(tmp_path: Path) -> None:
    book = FakeBook()
    write(book, tmp_path / "a.json")
    write(book, tmp_path / "b.json", reductions=changed(), supersede="height read again")
    lines = verify_certificate(tmp_path / "a.json", book)
    assert all(holds for holds, _ in lines)
    assert lines[0][1] == "SUPERSEDED by 3f2a91c0-2 on 2027-03-09: height read again"
    assert "SUPERSEDED" not in verdict(tmp_path / "b.json", book)[1]


def test_drafts_verify_like_certificates(tmp_path: Path) -> None:
    book = FakeBook()
    write(book, tmp_path / "a.pdf", sign_off=None)
    holds, text = verdict(tmp_path / "a.pdf", book)
    assert holds, text
    assert text.startswith("Draft of KR-07")


def test_struck_certificate_and_struck_evidence_are_said(tmp_path: Path) -> None:
    book = FakeBook()
    book.append("height", {"occupation": 1, "value": "1.5320"}, "R. Kell")
    write(book, tmp_path / "a.json")
    book.append("strike", {"seq": 2, "reason": "read to the wrong notch"}, "R. Kell")
    book.append("strike", {"seq": 3, "reason": "withdrawn"}, "R. Kell")
    holds, text = verdict(tmp_path / "a.json", book)
    assert holds
    assert "STRUCK OUT" in text
    assert "Evidence struck since issue: entry 2 (height)" in text


def test_another_books_certificate_is_named(tmp_path: Path) -> None:
    write(FakeBook(), tmp_path / "a.json")
    holds, text = verdict(tmp_path / "a.json", FakeBook())
    assert not holds
    assert "not issued from this book" in text


def test_file_of_another_program_version(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    out = tmp_path / "a.html"
    monkeypatch.setattr(issue.fieldbook, "__version__", "0.0.9")
    write(FakeBook(), out)
    monkeypatch.undo()
    out.write_bytes(out.read_bytes().replace(b"padding: 48px 56px", b"padding: 40px 50px"))
    holds, text = verdict(out)
    assert holds, text
    assert "Written by Fieldbook 0.0.9: the layout may differ" in text
    page, mark, data = out.read_bytes().partition(b"<script")
    out.write_bytes(page.replace(b"1203.347", b"1203.341") + mark + data)
    holds, text = verdict(out)
    assert not holds
    assert "1203.347" in text


@pytest.mark.parametrize(
    ("name", "data"),
    [
        ("a.json", b""),
        ("a.json", b"{}"),
        ("a.json", b'{"schema": "fieldbook.certificate/1"}'),
        ("a.json", b"[" * 100_000),
        ("a.json", b'{"schema": "fieldbook.certificate/1", "x": "\\ud800", "mark": {"name": "a"}}'),
        ("a.html", b"<html></html>"),
        ("a.html", b"\xff\xfe"),
        ("a.pdf", b""),
        ("a.pdf", b"%PDF-1.7\nnothing"),
        ("a.pdf", b"\x00" * 5000),
    ],
)
def test_damaged_files_are_one_clear_line(tmp_path: Path, name: str, data: bytes) -> None:
    (tmp_path / name).write_bytes(data)
    lines = verify_certificate(tmp_path / name)
    assert [holds for holds, _ in lines] == [False]
    assert name in lines[0][1]


def test_truncated_pdf_does_not_hold(tmp_path: Path) -> None:
    out = tmp_path / "a.pdf"
    write(FakeBook(), out)
    data = out.read_bytes()
    for share in (0.3, 0.7, 0.99):
        out.write_bytes(data[: int(len(data) * share)])
        assert not verdict(out)[0]


def test_missing_and_other_files_are_usage_errors(tmp_path: Path) -> None:
    with pytest.raises(UsageError):
        verify_certificate(tmp_path / "none.pdf")
    (tmp_path / "a.txt").write_text("x")
    with pytest.raises(UsageError, match="no certificate"):
        verify_certificate(tmp_path / "a.txt")
