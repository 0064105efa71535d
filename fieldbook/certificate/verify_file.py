"""Does a certificate file hold? Alone it can only be consistent in itself; with its book, unchanged since issue.

Three questions, each answered by a line (holds, sentence): do the facts fit their digest; does the page say what the
facts say (they are rendered again and the bytes compared, so that a changed visible number is found too); is this what
the book issued. A superseded certificate holds, and its first line says what superseded it.
"""

from __future__ import annotations

import difflib
import hashlib
from pathlib import Path

from fieldbook.certificate.identity import bare, changed_parts, facts_digest
from fieldbook.certificate.issue import RENDERERS, CertificateBook, program_versions
from fieldbook.certificate.printable import printable
from fieldbook.certificate.read_file import LIMIT_BYTES, PARSER_ERRORS, Unreadable, facts_of, text_lines
from fieldbook.certificate.signed import signature_lines
from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree
from fieldbook.model.entry import Entry
from fieldbook.signing.keyring import Trust

Line = tuple[bool, str]
COMPARED_LINES = 300


def verify_certificate(path: Path, book: CertificateBook | None = None, trust: Trust | None = None) -> list[Line]:
    """Check one certificate file, against its book where that is at hand.

    Args:
        trust: what the user has said of keys; None: of none anything.

    Returns:
        Lines of (holds, sentence); the file holds when all do.

    Raises:
        UsageError: the file does not exist or has no ending of a certificate.
    """
    extension = path.suffix.lower().removeprefix(".")
    if not path.is_file():
        raise UsageError(f"{path} does not exist.", "Check the name.")
    if extension not in {"pdf", "html", "json"}:
        raise UsageError(
            f"{path.name} is no certificate that can be verified.",
            "Verify the PDF, HTML or JSON file; plain text holds no facts.",
        )
    return [(holds, printable(text)) for holds, text in _lines(path, extension, book, trust or Trust())]


def _lines(path: Path, extension: str, book: CertificateBook | None, trust: Trust) -> list[Line]:
    try:
        if path.stat().st_size > LIMIT_BYTES:
            return [(False, f"{path.name} is larger than {LIMIT_BYTES // 1_000_000} MB and no certificate.")]
        data = path.read_bytes()
    except OSError as error:
        raise UsageError(f"{path} cannot be read: {error.strerror or error}.", "Check its permissions.") from None
    try:
        facts = facts_of(data, extension)
        signatures = signature_lines(facts, trust)
        lines = [_digest_line(facts), *_page_lines(data, facts, extension), *signatures]
        if book is not None:
            return _with_book(book, facts, data, lines)
    except Unreadable as error:
        return [(False, f"{path.name} is not readable as a certificate: {error}.")]
    except PARSER_ERRORS as error:
        return [(False, f"{path.name}: its facts are damaged ({type(error).__name__}).")]
    if all(holds for holds, _ in lines):
        if signatures:
            lines.append((True, "Consistent in itself. That it still stands, its book says."))
        else:
            lines.append(
                (
                    True,
                    "Consistent in itself, and unsigned. That it is unchanged since issue needs the book it came from.",
                )
            )
    return lines


def _name(facts: Tree) -> str:
    number = facts["document"].get("number")
    return f"Certificate {number}" if number else "Draft"


def _digest_line(facts: Tree) -> Line:
    if facts.get("digest") == facts_digest(facts):
        return True, f"{_name(facts)} of {facts['mark']['name']}: the facts fit their digest {facts['digest'][:12]}…"
    return False, f"{_name(facts)} of {facts['mark']['name']}: the facts do not fit their digest; they were changed."


def _page_lines(data: bytes, facts: Tree, extension: str) -> list[Line]:
    """The file against its own facts, rendered again."""
    again = RENDERERS[extension](facts)
    if again == data:
        return [(True, "The page says what its facts say: rendered again, it is the same to the last byte.")]
    here, there = text_lines(data, extension), text_lines(again, extension)
    other = _other_program(facts, extension)
    if here == there:
        if other:
            return [(True, f"Written by {other}: the layout may differ, the text is the same.")]
        return [(False, "The text is the one its facts give, but the file was written again by something else.")]
    if other:
        return [_figures_line(facts, here, other)]
    return [(False, f"The page does not say what its facts say: {_difference(there, here)}.")]


def _other_program(facts: Tree, extension: str) -> str:
    """What other program wrote the file, as far as its facts say; empty if this one did."""
    now, then = program_versions(), facts["versions"]
    names = {"program": "Fieldbook", "typst": "typst"} if extension == "pdf" else {"program": "Fieldbook"}
    return ", ".join(f"{name} {then[key]}" for key, name in names.items() if then.get(key) not in (None, now[key]))


def _figures_line(facts: Tree, here: list[str], other: str) -> Line:
    """Pages of another version: words may differ, the printed figures may not."""
    text = " ".join(here).replace("\u2212", "-")
    figures = sorted(set(_printed(facts["position"])))
    absent = [figure for figure in figures if figure not in text]
    if absent:
        return False, f"Written by {other}; these figures of its facts do not stand on the page: {', '.join(absent)}."
    return True, f"Written by {other}: wording and layout differ; every figure of its position stands on the page."


def _printed(tree: object, *, inside: bool = False) -> list[str]:
    if isinstance(tree, dict):
        return [
            text for key, value in tree.items() for text in _printed(value, inside=inside or key == "printed") if text
        ]
    return [tree.split(" ")[0]] if inside and isinstance(tree, str) else []


def _difference(expected: list[str], found: list[str]) -> str:
    """The first differing lines, in words."""
    same = next((n for n, (one, other) in enumerate(zip(expected, found, strict=False)) if one != other), None)
    start = min(len(expected), len(found)) if same is None else same
    # lines far behind the first difference are not compared: a hostile file can have millions of them
    expected, found = expected[start : start + COMPARED_LINES], found[start : start + COMPARED_LINES]
    matcher = difflib.SequenceMatcher(a=expected, b=found, autojunk=False)
    said = []
    for kind, a, b, c, d in matcher.get_opcodes():
        if kind == "equal":
            continue
        wanted, here = " / ".join(expected[a:b])[:90], " / ".join(found[c:d])[:90]
        said.append(f"“{here or 'nothing'}” where “{wanted or 'nothing'}” belongs")
        if len(said) == 3:
            break
    return "; ".join(said)


def _with_book(book: CertificateBook, facts: Tree, data: bytes, lines: list[Line]) -> list[Line]:
    entries = list(book.entries())
    number, digest = facts["document"].get("number"), str(facts.get("digest"))
    kind = "certificate" if number else "draft"
    issued = [entry for entry in entries if entry.kind == kind]
    entry = next(
        (
            item
            for item in issued
            if (number and item.body.get("number") == number) or item.body.get("digest") == digest
        ),
        None,
    )
    if entry is None:
        rescued = book.state().rescued
        if rescued is not None and any(old.get("digest") == digest for old in rescued.body["certificates"]):
            old_id = rescued.body["from"]["id"]
            text = f"{_name(facts)} was issued from the damaged book {old_id}, from which this one was rescued."
            return [*lines, (False, f"{text} It does not stand here: issue it anew.")]
        return [*lines, (False, f"{_name(facts)} was not issued from this book ({book.state().id}).")]
    first = _standing_lines(book, entries, entry)
    return [*first, *lines, *_entry_lines(entry, facts), _file_line(entries, digest, data, lines)]


def _standing_lines(book: CertificateBook, entries: list[Entry], entry: Entry) -> list[Line]:
    """Whether it still stands; what came after it does not make it wrong."""
    number = entry.body.get("number")
    lines: list[Line] = []
    for later in entries:
        if number and later.kind == "certificate" and later.body.get("supersedes") == number:
            lines.append(
                (
                    True,
                    f"SUPERSEDED by {later.body['number']} on {later.body['issued_utc'][:10]}: {later.body['reason']}",
                )
            )
    strikes = book.state().strikes
    if entry.seq in strikes:
        strike = strikes[entry.seq]
        lines.append((True, f"STRUCK OUT on {strike.utc[:10]} by {strike.observer}: {strike.body.get('reason')}"))
    head = entry.body["facts"]["book"]["head_seq"]
    numbers = entry.body.get("occupations") or [entry.body["occupation"]]
    rested = {item.seq: item for item in entries if item.body.get("occupation") in numbers}
    for seq, strike in sorted(strikes.items()):
        if seq in rested and seq <= head < strike.seq:
            lines.append(
                (True, f"Evidence struck since issue: entry {seq} ({rested[seq].kind}), {strike.body.get('reason')}")
            )
    return lines


def _entry_lines(entry: Entry, facts: Tree) -> list[Line]:
    kept, body = entry.body["facts"], bare(facts)
    lines: list[Line] = []
    if facts_digest(kept) != entry.body["digest"]:
        lines.append((False, f"Entry {entry.seq} of the book: its facts do not fit its digest."))
    changed = changed_parts(kept, body)
    if changed or facts.get("digest") != entry.body["digest"]:
        lines.append(
            (False, f"Not what entry {entry.seq} of the book holds; changed: {', '.join(changed) or 'digest'}.")
        )
    elif facts.get("signature") != entry.body.get("signature"):
        what = "is not the one" if "signature" in facts and "signature" in entry.body else "was added or taken off"
        lines.append((False, f"Its facts are those of entry {entry.seq} of the book, but its signature {what}."))
    else:
        lines.append((True, f"Unchanged since issue: number, digest and facts are those of entry {entry.seq}."))
    return lines


def _file_line(entries: list[Entry], digest: str, data: bytes, lines: list[Line]) -> Line:
    sha256 = hashlib.sha256(data).hexdigest()
    for entry in entries:
        if entry.kind == "rendered" and entry.body.get("sha256") == sha256 and entry.body.get("digest") == digest:
            return True, f"The file is the one written as {entry.body['name']} (entry {entry.seq})."
    if all(holds for holds, _ in lines):
        return True, "The book does not list this file, but its content is what the book would write."
    return False, "The book does not list this file among those it wrote."
