"""Decode again from the recorded bytes: the epoch table is a cache, and this is the proof of it.

In: the recorded items of an occupation and the options folded from its entries (accept without checksum, talker,
approximate position). Out: the epochs they give, in order. The recorder uses the same options and the same order, so
whatever is stored must be equal to the last bit; `compare` says in words where it is not. An open occupation may lag:
its last epochs may not be stored yet, which is no difference.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Iterator

from fieldbook.book.store import Book
from fieldbook.errors import UsageError
from fieldbook.model.epoch import Epoch
from fieldbook.model.session import Session
from fieldbook.model.state import Occupation
from fieldbook.nmea.decoder import Decoder, DecoderOptions

_COLUMNS = tuple(field.name for field in dataclasses.fields(Epoch))
MOST_DIFFERENCES = 20


def session_decoder_options(session: Session, talker: str | None) -> DecoderOptions:
    """What a session, and the talker it or a decision names, tell the decoder."""
    mark = session.mark
    place = None
    if mark.approximate_lat_deg is not None and mark.approximate_lon_deg is not None:
        place = (mark.approximate_lat_deg, mark.approximate_lon_deg)
    return DecoderOptions(
        accept_without_checksum=session.receiver.accept_without_checksum, talker=talker, approximate=place
    )


def decoder_options(occupation: Occupation) -> DecoderOptions:
    """What the entries of an occupation tell the decoder."""
    return session_decoder_options(occupation.session, occupation.talker)


def occupation_of(book: Book, number: int) -> Occupation:
    """An occupation by its number.

    Raises:
        UsageError: the book has no such occupation.
    """
    occupations = book.state().occupations
    if number not in occupations:
        have = ", ".join(str(item) for item in occupations) or "none"
        raise UsageError(
            f"There is no occupation {number} in this book.", f"It has: {have}.", code="unknown_occupation"
        )
    return occupations[number]


def decoded(book: Book, occupation: Occupation, decoder: Decoder) -> Iterator[Epoch]:
    """The epochs of an occupation through a fresh decoder, one after the other."""
    for item in book.items(occupation.number):
        yield from decoder.feed(item)
    if not occupation.open:
        yield from decoder.finish()


def rebuild(book: Book, occupation: int) -> tuple[list[Epoch], Decoder]:
    """All epochs of an occupation decoded again, and the decoder with its date and counters.

    Raises:
        UsageError: no such occupation.
        BookError: the raw rows cannot be read.
    """
    found = occupation_of(book, occupation)
    decoder = Decoder(decoder_options(found))
    return list(decoded(book, found, decoder)), decoder


def compare(book: Book, occupation: int) -> list[str]:
    """Differences between the stored epochs and the ones decoded again, in words; empty when identical."""
    found = occupation_of(book, occupation)
    decoder = Decoder(decoder_options(found))
    stored = book.epochs(occupation)
    said: list[str] = []
    count = 0
    for epoch in decoded(book, found, decoder):
        count += 1
        if len(said) < MOST_DIFFERENCES and count <= len(stored):
            said.extend(_differences(occupation, stored[count - 1], epoch))
    if count < len(stored) or (count > len(stored) and not found.open):
        said.append(f"occupation {occupation}: {len(stored)} epochs stored, {count} decoded from the raw rows")
    if found.day0_source != "decision" and None not in (found.day0, decoder.day0) and found.day0 != decoder.day0:
        said.append(f"occupation {occupation}: date {found.day0} stored, {decoder.day0} decoded")
    return said[:MOST_DIFFERENCES]


def _differences(occupation: int, stored: Epoch, again: Epoch) -> list[str]:
    return [
        f"occupation {occupation}, epoch {again.number}: {name} is {getattr(stored, name)!r} in the book,"
        f" {getattr(again, name)!r} decoded from the raw rows"
        for name in _COLUMNS
        if getattr(stored, name) != getattr(again, name)
    ]


def decode_again(book: Book, occupation: int) -> int:
    """Put the epoch table right after an entry changed the decoder's options; returns the number of epochs.

    The caller holds the recorder's lock. A date that comes out otherwise is entered.
    """
    found = occupation_of(book, occupation)
    epochs, decoder = rebuild(book, occupation)
    book.replace_epochs(occupation, epochs)
    if decoder.day0 is not None and decoder.day0 != found.day0 and found.day0_source != "decision":
        body = {"occupation": occupation, "date": decoder.day0.isoformat(), "source": decoder.day0_source}
        book.append("date", body, found.observer)
    return len(epochs)
