"""One way from a book to a certificate file, for the commands and for the screens: reduce, issue, keep the operation."""

from __future__ import annotations

from pathlib import Path

from fieldbook.book.store import Book
from fieldbook.certificate.combined import WholeMarkEvidence
from fieldbook.certificate.issue import Issued, Prepared, certify
from fieldbook.certificate.repeats import repeats_of
from fieldbook.clock import Clock, SystemClock
from fieldbook.occupy.reductions import record_operation, reductions_of_mark
from fieldbook.occupy.whole_mark import WholeMark, whole_mark
from fieldbook.reduce.frames import versions
from fieldbook.reduce.occupation import Reduced
from fieldbook.signing.in_book import signed_by
from fieldbook.signing.signer import Signer


def issue(
    book: Book,
    mark: str,
    out: Path,
    *,
    occupation: int | None,
    sign_off: str | None,
    supersede: str | None = None,
    replace: bool = False,
    signer: Signer | None = None,
    clock: Clock | None = None,
) -> Issued:
    """Reduce, keep the frame operation as an entry, and write the file.

    Args:
        occupation: which one; None = all of the mark that can be combined.
        out, sign_off, supersede, replace, signer: as `certificate.issue.certify`.
        clock: the system's if None.

    Raises:
        UsageError: as `certificate.issue.certify`.
        ReductionError: the occupation cannot be reduced.
    """
    used = versions()
    certified: list[Reduced] = []

    def prepared(number: int) -> Prepared:
        own, others = reductions_of_mark(book, number)
        certified.append(own)
        return own.reduction, own.trace, repeats_of(own.reduction, [item.reduction for item in others])

    def together() -> WholeMarkEvidence:
        whole = whole_mark(book, mark)
        certified.extend(reduced for _, reduced in whole.members)
        return evidence_of(whole)

    issued = certify(
        book,
        mark,
        out,
        occupation=occupation,
        sign_off=sign_off,
        supersede=supersede,
        replace=replace,
        reductions=prepared,
        combined=together,
        versions={"proj": used.proj, "epsg": used.epsg, "pyproj": used.pyproj},
        clock=clock or SystemClock(),
        signer=signer,
    )
    with signed_by(book, signer):
        for reduced in certified:
            record_operation(book, reduced)  # only now: a refusal writes nothing
    return issued


def evidence_of(whole: WholeMark) -> WholeMarkEvidence:
    """A combined mark in the shape its certificate is built from."""
    members = [(one, reduced.reduction) for one, reduced in whole.members]
    return WholeMarkEvidence(whole.result, whole.principal, whole.reduction, whole.trace, members)
