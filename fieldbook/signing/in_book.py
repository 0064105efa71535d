"""Entries signed as they are written: a `signature` entry over the head, in the same transaction.

A signature is an entry of the chain, so taking one out of the middle breaks the chain, and no table of its own is needed.
It covers the entry it names and all before it, whoever wrote them: what the recorder wrote since the last signature is
covered by the next act of a person. Before its first signature in a book a key is announced by an entry `key`: from there
on the entries its owner writes are signed, and `judge` misses the signature where one is not.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from contextlib import AbstractContextManager, contextmanager
from typing import Protocol

from fieldbook.model.canonical import Tree
from fieldbook.model.entry import Entry

from .signer import Signer


class SignableBook(Protocol):
    """What signing needs of a book."""

    def entries(self, after_seq: int = 0) -> Iterable[Entry]:
        """The entries in order."""
        ...

    def append(self, kind: str, body: Tree, observer: str) -> Entry:
        """Write one entry."""
        ...

    def transaction(self) -> AbstractContextManager[None]:
        """All entries appended inside are written, or none."""
        ...


@contextmanager
def signed_by(book: SignableBook, signer: Signer | None) -> Iterator[None]:
    """What is appended inside is signed, and written with its signature or not at all. Without a signer nothing happens.

    The block must be short: it holds the book's write transaction.
    """
    if signer is None:
        yield
        return
    announced, last = _looked_through(book, signer)
    with book.transaction():
        before = _seq(book, last)
        yield
        if _seq(book, before) != before:
            _sign(book, signer, announced=announced, after_seq=last)


def sign_head(book: SignableBook, signer: Signer) -> Entry | None:
    """Sign the last entry, and with it the whole book so far; None where that is signed by this key already."""
    announced, last = _looked_through(book, signer)
    with book.transaction():
        return _sign(book, signer, announced=announced, after_seq=last)


def announced_names(entries: Iterable[Entry]) -> set[str]:
    """Names whose entries are to be signed, because a key of that name was announced."""
    return {str(entry.body.get("name")) for entry in entries if entry.kind == "key"}


def _looked_through(book: SignableBook, signer: Signer) -> tuple[bool, int]:
    """Whether the key is announced, and how far that was looked for: long before the transaction, which must be short."""
    announced, last = False, 0
    for entry in book.entries():
        announced = announced or _announces(entry, signer)
        last = entry.seq
    return announced, max(0, last - 1)  # the last one is read again: there is always a head


def _announces(entry: Entry, signer: Signer) -> bool:
    return entry.kind == "key" and entry.body == signer.announcement()


def _seq(book: SignableBook, after_seq: int) -> int:
    last = after_seq
    for entry in book.entries(after_seq):
        last = entry.seq
    return last


def _sign(book: SignableBook, signer: Signer, *, announced: bool, after_seq: int) -> Entry | None:
    news = list(book.entries(after_seq))
    if not (announced or any(_announces(entry, signer) for entry in news)):
        head = book.append("key", signer.announcement(), signer.name)
    else:
        head = news[-1]
    if head.kind == "signature" and head.body.get("fingerprint") == signer.fingerprint:
        return None
    return book.append("signature", signer.entry_signature(head.seq, head.hash), signer.name)
