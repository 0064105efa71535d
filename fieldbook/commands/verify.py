"""`fieldbook verify`: is a book, a register or a certificate unchanged and consistent; if not, what, where, since when.

A book named together with certificates is the evidence they are compared with. Exit 1 when anything does not hold.
"""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from fieldbook.clock import SystemClock
from fieldbook.commands.output import line, write_json
from fieldbook.errors import BookError, ExitCode, FieldbookError, UsageError
from fieldbook.signing.keyring import Trust

if TYPE_CHECKING:
    from fieldbook.occupy.verifying import Verified

CERTIFICATE_ENDINGS = (".pdf", ".html", ".json", ".txt")


@click.command()
@click.argument("files", nargs=-1, required=True, type=click.Path(path_type=Path))
@click.option("--json", "as_json", is_flag=True, help="Result as JSON.")
def command(files: tuple[Path, ...], as_json: bool) -> int:
    """Verify FILES: books, registers, and certificates (together with their book, where it is named too)."""
    for path in files:
        if not path.exists():
            raise UsageError(f"{path} does not exist.", "Check the name.", code="missing")
        if path.suffix.lower() == ".txt":
            raise UsageError(f"{path} is a plain text copy.", "Verify the .pdf, .html or .json of the certificate.")
    books = [path for path in files if path.suffix.lower() not in CERTIFICATE_ENDINGS]
    papers = [path for path in files if path.suffix.lower() in CERTIFICATE_ENDINGS]
    from fieldbook.signing.keyring import trust

    known = trust()
    results = [_book(path, known) for path in books] + [_certificate(path, books, known) for path in papers]
    holds = all(result["holds"] for result in results)
    if as_json:
        write_json({"schema": "fieldbook.verify/1", "holds": holds, "files": results})
    else:
        _print(results)
    return int(ExitCode.OK if holds else ExitCode.DOES_NOT_HOLD)


def book_findings(path: Path, trust: Trust) -> list[Verified]:
    """Every line on a book: what is stored, certificates, signatures. Raises nothing for a file that exists."""
    from fieldbook.commands.verify_certified import verify_certified
    from fieldbook.commands.verify_signatures import verify_signatures
    from fieldbook.occupy.verifying import verify_stored

    findings = verify_stored(path)
    if all(item.holds for item in findings):
        findings += verify_certified(path)
    return findings + verify_signatures(path, trust)


def _register(path: Path) -> dict[str, object]:
    from fieldbook.register.audit import NOT_PROVEN, audit_register

    lines = [
        {"holds": item.holds, "where": item.where, "text": item.text, "since": item.since_seq}
        for item in audit_register(path)
    ]
    holds = all(bool(item["holds"]) for item in lines)
    return {
        "file": str(path),
        "kind": "register",
        "holds": holds,
        "lines": lines,
        "looks_like": [],
        "not_proven": list(NOT_PROVEN),
    }


def _book(path: Path, trust: Trust) -> dict[str, object]:
    from fieldbook.book.causes import causes
    from fieldbook.commands.verify_limits import to_compare
    from fieldbook.commands.verify_signatures import not_proven
    from fieldbook.register.store import Register

    if Register.recognises(path):
        return _register(path)
    findings = book_findings(path, trust)
    lines = [
        {"holds": item.holds, "where": item.where, "text": item.text, "since": item.since_seq} for item in findings
    ]
    holds = all(item.holds for item in findings)
    return {
        "file": str(path),
        "kind": "book",
        "holds": holds,
        "lines": lines,
        "looks_like": [] if holds else causes(path),
        "not_proven": [*not_proven(findings), *to_compare(path)],
    }


def _certificate(path: Path, books: list[Path], trust: Trust) -> dict[str, object]:
    from fieldbook.book.store import Book
    from fieldbook.certificate.verify_file import verify_certificate

    lines = verify_certificate(path, None, trust) if not books else []
    for book_path in books:
        try:
            with Book.open(book_path, clock=SystemClock()) as book:
                lines = verify_certificate(path, book, trust)
        except BookError as error:
            lines = [*verify_certificate(path, None, trust), (False, f"{book_path}: {error.text}")]
        except FieldbookError as error:
            lines = [(False, error.text)]
        if all(ok for ok, _ in lines):
            break  # it belongs to this book
    tree = [{"holds": ok, "where": path.name, "text": text, "since": None} for ok, text in lines]
    return {"file": str(path), "kind": "certificate", "holds": all(ok for ok, _ in lines), "lines": tree}


def _print(results: list[dict[str, object]]) -> None:
    for result in results:
        line(f"{result['file']}: {'holds' if result['holds'] else 'DOES NOT HOLD'}")
        for item in result["lines"]:  # type: ignore[attr-defined]
            since = f" (since entry {item['since']})" if item["since"] is not None else ""
            line(f"  {'ok ' if item['holds'] else 'NOT'}  {item['where']}: {item['text']}{since}")
        for text in result.get("looks_like", []):  # type: ignore[attr-defined]
            line(f"  --   looks like {text}")
        for text in result.get("not_proven", []):  # type: ignore[attr-defined]
            line(f"  --   cannot prove {text}")
