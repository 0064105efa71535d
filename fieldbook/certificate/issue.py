"""Issue of a certificate: numbering, drafts, what supersedes what, and the file that is written.

What comes in: an open book, a mark, a file name. The order is fixed, so that a refusal leaves nothing behind: arguments
are checked, the occupation reduced, the facts built and compared, the file's bytes rendered and written beside the
target; then the entries are appended; last the file takes its name. A crash in between leaves a numbered entry without
a file, and the same command writes the file of that number.

    no sign-off                          entry `draft`, no number, DRAFT across the page
    sign-off, but items are missing      UsageError naming them
    several occupations, none named      of all that can be combined; its number and revisions are its own
    first of this mark and occupation    entry `certificate` with the next number of the book
    facts as in the standing one         the standing certificate again, in the format asked for
    facts changed                        next number, needs a reason (`supersede`), names its predecessor

A number is never used twice, not even after its entry was struck.
"""

from __future__ import annotations

import hashlib
import os
from collections.abc import Callable, Iterable
from contextlib import AbstractContextManager
from dataclasses import dataclass, field
from importlib import metadata
from pathlib import Path
from typing import Any, Protocol

import fieldbook
from fieldbook.certificate import as_html, as_json, as_pdf, as_text
from fieldbook.certificate.combined import WholeMarkEvidence, build_combined_facts
from fieldbook.certificate.facts import build_facts, parse_sign_off
from fieldbook.certificate.identity import (
    bare,
    certificate_number,
    changed_parts,
    comparable,
    facts_digest,
    facts_equal,
    sealed,
)
from fieldbook.certificate.printable import printable
from fieldbook.certificate.revision import changes
from fieldbook.clock import Clock, utc_text
from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree
from fieldbook.model.entry import Entry
from fieldbook.model.reduction import Reduction, Trace
from fieldbook.model.state import BookState, Occupation
from fieldbook.signing.in_book import signed_by
from fieldbook.signing.signer import Signer

Prepared = tuple[Reduction, Trace, list[dict[str, Any]]]
RENDERERS: dict[str, Callable[[Tree], bytes]] = {
    "pdf": as_pdf.render,
    "html": as_html.render,
    "txt": as_text.render,
    "json": as_json.render,
}


class CertificateBook(Protocol):
    """What issuing needs of a book."""

    def entries(self, after_seq: int = 0) -> Iterable[Entry]:
        """The entries in order."""
        ...

    def append(self, kind: str, body: Tree, observer: str) -> Entry:
        """Write one entry."""
        ...

    def state(self) -> BookState:
        """The folded book."""
        ...

    def transaction(self) -> AbstractContextManager[None]:
        """All entries appended inside are written, or none."""
        ...


@dataclass(frozen=True)
class Issued:
    """What was written."""

    number: str | None
    draft: bool
    path: Path
    digest: str
    missing: list[str] = field(default_factory=list)  # what keeps a draft a draft
    again: bool = False  # an entry that stood already was rendered again
    supersedes: str | None = None
    signature: Tree | None = None  # block `signature` of the file


@dataclass(frozen=True)
class _Document:
    """Facts to render, and the entry to append if they are new."""

    facts: Tree
    body: Tree | None  # None: the entry stands already
    supersedes: str | None = None
    signature: Tree | None = None

    def rendered(self) -> Tree:
        """Facts, digest and signature, as a file holds them."""
        return self.facts if self.signature is None else {**self.facts, "signature": self.signature}


@dataclass(frozen=True)
class _Subject:
    """What a certificate is of: one occupation of a mark, or (occupation None) several together."""

    mark: str
    occupation: int | None
    together: tuple[int, ...] = ()


def certify(
    book: CertificateBook,
    mark: str,
    out: Path,
    *,
    occupation: int | None = None,
    sign_off: str | None = None,
    supersede: str | None = None,
    replace: bool = False,
    reductions: Prepared | Callable[[int], Prepared],
    combined: Callable[[], WholeMarkEvidence] | None = None,
    versions: dict[str, str],
    clock: Clock,
    signer: Signer | None = None,
) -> Issued:
    """Write the certificate, or the draft, of one occupation of a mark, or of all of them together.

    Args:
        out: `.pdf`, `.html`, `.txt` or `.json`.
        occupation: which one, where the mark has several.
        sign_off: "name; licence"; without it a draft.
        supersede: why a standing certificate is replaced.
        replace: overwrite `out`.
        reductions: the reduction, trace and repeats of the occupation, or a function of its number that makes them.
        combined: makes the combined mark where it has several occupations and none is named; without it one must be.
        versions: proj, epsg and pyproj as the reduction used them; program and typesetter are added here.
        signer: key that signs a new certificate and its entry; one that stands already stays as it was issued.

    Raises:
        UsageError: unknown mark or occupation, open occupation, wrong ending, `out` exists, sign-off while items are
            missing, changed facts without `supersede`. Nothing was written.
        ReductionError: from `reductions` or `combined`.
    """
    extension = _extension(out)
    _check_target(book, out, replace=replace)
    parse_sign_off(sign_off)
    state = book.state()
    made = {**versions, **program_versions()}
    if combined is not None and occupation is None and len(state.of_mark(mark)) > 1:
        whole = combined()
        facts = build_combined_facts(state, whole, sign_off=sign_off, versions=made)
        subject = _Subject(mark, None, tuple(item.number for item, _ in whole.members))
    else:
        chosen = choose_occupation(state, mark, occupation)
        reduction, trace, repeats = reductions(chosen.number) if callable(reductions) else reductions
        facts = build_facts(state, chosen, reduction, trace, sign_off=sign_off, repeats=repeats, versions=made)
        subject = _Subject(mark, chosen.number)
    missing = [item["text"] for item in facts["missing"]]
    if sign_off is not None and missing:
        raise UsageError(
            f"The certificate of {mark} cannot be signed off: {'; '.join(missing)}.",
            "Put these right, or leave out --sign-off for a draft.",
            code="not_ready",
        )
    issued_utc = utc_text(clock.utc_ms())
    if sign_off is None:
        document = _draft(state, facts, subject, issued_utc)
    else:
        document = _certificate(book, state, facts, subject, supersede, issued_utc, signer)
    _write(book, document, out, extension, RENDERERS[extension], facts, signer, replace=replace)
    number = document.facts["document"]["number"]
    return Issued(
        number,
        number is None,
        out,
        facts_digest(document.facts),
        missing,
        document.body is None,
        document.supersedes,
        document.signature,
    )


def program_versions() -> dict[str, str]:
    """This program and what sets its pages."""
    return {
        "program": fieldbook.__version__,
        "typst": metadata.version("typst"),
        "segno": metadata.version("segno"),
    }


def choose_occupation(state: BookState, mark: str, number: int | None) -> Occupation:
    """The occupation to certify.

    Raises:
        UsageError: unknown mark, none or several occupations, another mark's number, or still open.
    """
    found = state.of_mark(mark)
    if not found:
        names = set(state.marks) | {item.mark for item in state.occupations.values()}
        known = [printable(name) for name in sorted(names)]
        if mark in names:
            raise UsageError(f"Mark {mark} has no occupation in this book.", "Observe it first.", code="no_occupation")
        raise UsageError(
            f"There is no mark {mark} in this book.",
            f"It holds {', '.join(known)}." if known else "It holds no marks yet.",
            code="unknown_mark",
        )
    numbers = ", ".join(str(item.number) for item in found)
    if number is None and len(found) > 1:
        raise UsageError(
            f"Mark {mark} has {len(found)} occupations: {numbers}.",
            "Say which with --occupation N; the others print as repeats.",
            code="several_occupations",
        )
    chosen = found[0] if number is None else next((item for item in found if item.number == number), None)
    if chosen is None:
        raise UsageError(f"Occupation {number} is not one of mark {mark}.", f"Its occupations: {numbers}.")
    if chosen.open:
        raise UsageError(
            f"Occupation {chosen.number} of {mark} is still open.",
            "End it first: fieldbook entry BOOK end.",
            code="open",
        )
    return chosen


def standing_entry(state: BookState, kind: str, mark: str, occupation: int | None) -> Entry | None:
    """The latest `certificate` or `draft` entry of this mark and occupation (None: combined) that is not struck."""
    found = [
        entry
        for entry in state.documents
        if entry.kind == kind
        and entry.body.get("mark") == mark
        and entry.body.get("occupation") == occupation
        and entry.seq not in state.strikes
    ]
    return found[-1] if found else None


def _draft(state: BookState, facts: Tree, subject: _Subject, issued_utc: str) -> _Document:
    standing = standing_entry(state, "draft", subject.mark, subject.occupation)
    if standing is not None and facts_equal(standing.body["facts"], facts):
        return _Document(sealed(standing.body["facts"]), None)
    facts = {**facts, "document": {"kind": "draft", "number": None, "issued_utc": issued_utc}}
    return _Document(sealed(facts), _body(facts, subject))


def _certificate(
    book: CertificateBook,
    state: BookState,
    facts: Tree,
    subject: _Subject,
    supersede: str | None,
    issued_utc: str,
    signer: Signer | None,
) -> _Document:
    standing = standing_entry(state, "certificate", subject.mark, subject.occupation)
    if standing is not None:
        before = standing.body["facts"]
        if facts_equal(before, facts):
            return _Document(sealed(before), None, signature=standing.body.get("signature"))
        if not (supersede or "").strip():
            changed = ", ".join(changed_parts(comparable(before), comparable(facts), limit=6))
            raise UsageError(
                f"Certificate {standing.body['number']} of {subject.mark} stands, and its facts have changed "
                f"({changed}).",
                "To replace it give the reason: --supersede REASON.",
                code="supersede",
            )
    replaced = None if standing is None else str(standing.body["number"])
    facts = {
        **facts,
        "document": {
            "kind": "certificate",
            "number": certificate_number(state.id, _running(book)),
            "revision": 1 if standing is None else int(standing.body["facts"]["document"].get("revision", 1)) + 1,
            "issued_utc": issued_utc,
            "supersedes": replaced,
            "reason": None if standing is None else (supersede or "").strip(),
            "changed": [] if standing is None else changes(standing.body["facts"], facts),
        },
    }
    whole, body = sealed(facts), _body(facts, subject)
    signature = None if signer is None else signer.certificate_signature(whole["digest"])
    if signature is not None:
        body["signature"] = signature
    return _Document(whole, body, replaced, signature)


def _running(book: CertificateBook) -> int:
    """The next running number; struck certificates keep theirs."""
    used = [
        int(str(entry.body["number"]).rpartition("-")[2])
        for entry in book.entries()
        if entry.kind == "certificate" and entry.body.get("number")
    ]
    return max(used, default=0) + 1


def _body(facts: Tree, subject: _Subject) -> Tree:
    """Body of a `certificate` or `draft` entry (DEVELOPERS.md, section 2)."""
    document = facts["document"]
    body: Tree = {
        "mark": subject.mark,
        "occupation": subject.occupation,
        "facts": bare(facts),
        "digest": facts_digest(facts),
        "supersedes": document.get("supersedes"),
        "reason": document.get("reason"),
        "issued_utc": document["issued_utc"],
    }
    if subject.together:
        body["occupations"] = list(subject.together)
    return body if document["number"] is None else {"number": document["number"], **body}


def _extension(out: Path) -> str:
    extension = out.suffix.lower().removeprefix(".")
    if extension not in RENDERERS:
        raise UsageError(
            f"{out.name} has no ending that says its format.",
            "Use .pdf, .html, .txt or .json.",
            code="format",
        )
    return extension


def _check_target(book: CertificateBook, out: Path, *, replace: bool) -> None:
    if out.is_dir():
        raise UsageError(f"{out} is a folder.", "Name a file.")
    own = getattr(book, "path", None)
    if own is not None and out.resolve() == Path(own).resolve():
        raise UsageError(f"{out} is the book itself.", "Name another file.")
    if (out.exists() or out.is_symlink()) and not replace:
        raise UsageError(f"{out} exists already.", "Name another file, or add --replace.", code="exists")
    if not out.resolve().parent.is_dir():
        raise UsageError(f"The folder {out.resolve().parent} does not exist.", "Make it first.")


def _write(
    book: CertificateBook,
    document: _Document,
    out: Path,
    extension: str,
    render: Callable[[Tree], bytes],
    facts: Tree,
    signer: Signer | None,
    *,
    replace: bool,
) -> None:
    """Bytes first, then entries, then the name."""
    data = render(document.rendered())
    sha256 = hashlib.sha256(data).hexdigest()
    signed = document.facts["sign_off"]
    observer = signed["name"] if signed else (facts["job"]["observers"] or ["not stated"])[0]
    waiting = out.with_name(f".{out.name}.{os.getpid()}.part")
    try:
        _save(waiting, data)
        if (out.exists() or out.is_symlink()) and not replace:
            raise UsageError(f"{out} has appeared meanwhile.", "Name another file and run the command again.")
        with signed_by(book, signer):
            _enter(book, document, extension, out.name, sha256, observer)
        waiting.replace(out)
    except OSError as error:
        raise UsageError(
            f"{out} cannot be written: {error.strerror or error}.", "Choose another folder or file."
        ) from error
    finally:
        waiting.unlink(missing_ok=True)


def _enter(book: CertificateBook, document: _Document, extension: str, name: str, sha256: str, observer: str) -> None:
    """The entries of what was rendered, both or none."""
    number = document.facts["document"]["number"]
    rendered = {
        "number": number,
        "digest": document.facts["digest"],
        "format": extension,
        "name": name,
        "sha256": sha256,
    }
    with book.transaction():
        if document.body is not None:
            if number is not None and number.rpartition("-")[2] != str(_running(book)):
                raise UsageError(
                    f"Number {number} was given to another certificate meanwhile.", "Run the command again."
                )
            book.append(document.facts["document"]["kind"], document.body, observer)
        if not any(entry.kind == "rendered" and entry.body == rendered for entry in book.entries()):
            book.append("rendered", rendered, observer)


def _save(path: Path, data: bytes) -> None:
    with path.open("wb") as file:
        file.write(data)
        file.flush()
        os.fsync(file.fileno())
