"""What signatures show: coverage, trust, replaced entries, signatures taken off; and what they cannot show."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import pytest
from list_book import ListBook, rehashed, signer

from fieldbook.model.canonical import canonical_json
from fieldbook.model.entry import Entry
from fieldbook.signing import ed25519
from fieldbook.signing.in_book import sign_head, signed_by
from fieldbook.signing.judge import Line, judge
from fieldbook.signing.keyring import Trust
from fieldbook.signing.message import fingerprint, name_message
from fieldbook.signing.public_key import PublicKey

KELL, MARLOW = signer("R. Kell", 1), signer("A. Marlow", 2)
NOBODY = Trust()


def known(item: Any, *, own: bool = False) -> Trust:
    """A trust list of one key."""
    key = PublicKey(item.name, item.public, ed25519.sign(item.secret, name_message(item.name, item.public)))
    return Trust(((key, own),))


def written() -> ListBook:
    """Remark, key, signature; what a recorder writes; remark and signature; the recorder again."""
    book = ListBook()
    with signed_by(book, KELL):
        book.append("remark", {"occupation": None, "text": "one"}, "R. Kell")
    book.append("raw", {"occupation": 1, "chunk": 1}, "R. Kell")
    with signed_by(book, KELL):
        book.append("remark", {"occupation": None, "text": "two"}, "R. Kell")
    book.append("raw", {"occupation": 1, "chunk": 2}, "R. Kell")
    return book


def wrong(entries: list[Entry], trust: Trust = NOBODY) -> list[Line]:
    return [line for line in judge(entries, trust) if not line.holds]


def test_what_is_covered_by_whom_and_what_by_none() -> None:
    book = written()
    assert [entry.kind for entry in book.log] == [
        "book",
        "remark",
        "key",
        "signature",
        "raw",
        "remark",
        "signature",
        "raw",
    ]
    first, second = judge(book.log, NOBODY)
    assert "entries 1 to 6 of 8 are covered by 2 signatures of the key that calls itself R. Kell" in first.text
    assert "you have not said that you trust it" in first.text
    assert second.text == "entry 8 (raw) is covered by no signature"
    assert judge(book.log, known(KELL))[0].text.endswith("you trust it")
    assert judge(book.log, known(KELL, own=True))[0].text.endswith("it is your own")


def test_a_book_without_signatures_says_unsigned() -> None:
    (line,) = judge(ListBook().log, NOBODY)
    assert line.holds
    assert line.text.startswith("unsigned")


def test_a_signature_is_written_with_what_it_signs_or_not_at_all() -> None:
    book = ListBook()

    def interrupted() -> None:
        with signed_by(book, KELL):
            book.append("remark", {"occupation": None, "text": "one"}, "R. Kell")
            raise RuntimeError

    with pytest.raises(RuntimeError):
        interrupted()
    assert len(book.log) == 1
    with signed_by(book, KELL):
        pass
    assert len(book.log) == 1  # nothing was written, so nothing is signed and no key announced


def test_the_head_is_signed_once() -> None:
    book = written()
    entry = sign_head(book, KELL)
    assert entry is not None
    assert (entry.seq, entry.body["seq"]) == (9, 8)
    assert sign_head(book, KELL) is None
    assert sign_head(book, MARLOW) is not None  # another person may stand for the same


def values(entries: list[Entry], kind: str) -> list[tuple[int, str]]:
    """(position, key of the body or column) of every value of a kind of entry."""
    return [
        (entry.seq - 1, name) for entry in entries if entry.kind == kind for name in (*entry.body, "kind", "observer")
    ]


def changed(value: Any) -> Any:
    if isinstance(value, int):
        return value - 1
    return ("0" if value[0] != "0" else "1") + value[1:]


@pytest.mark.parametrize("kind", ["key", "signature"])
def test_every_changed_value_is_found_though_the_chain_was_made_anew(kind: str) -> None:
    book = written()
    tried = values(book.log, kind)
    assert len(tried) == {"key": 6, "signature": 12}[kind]
    for place, name in tried:
        entries = list(book.log)
        item = entries[place]
        if name in ("kind", "observer"):
            entries[place] = replace(item, **{name: changed(getattr(item, name))})
        else:
            entries[place] = replace(item, body={**item.body, name: changed(item.body[name])})
        assert wrong(rehashed(entries)), f"{name} of entry {place + 1}"


@pytest.mark.parametrize("place", [0, 1, 4, 5])
@pytest.mark.parametrize("column", ["utc", "body", "observer"])
def test_a_replaced_entry_under_a_signature_is_found(place: int, column: str) -> None:
    entries = list(written().log)
    item = entries[place]
    new: Any = {**item.body, "more": 1} if column == "body" else changed(getattr(item, column))
    entries[place] = replace(item, **{column: new})
    found = wrong(rehashed(entries))
    assert found
    assert "hashes were computed anew" in found[0].text
    assert found[0].since_seq == (1 if place < 2 else 4)  # the first signature covers entries 1 to 3


def test_what_stands_before_a_broken_chain_is_still_shown() -> None:
    book = written()
    lines = judge(book.log[:5], NOBODY, total=8)
    assert "entries 1 to 3 of 8 are covered by 1 signature" in lines[0].text
    assert "the chain breaks at entry 6" in lines[-1].text


def test_signatures_taken_off_are_missed() -> None:
    book = written()
    last = [entry for entry in book.log if entry.seq != 7]
    found = wrong(rehashed(last))
    assert [line.since_seq for line in found] == [6]
    assert "entry 6 (remark) by R. Kell is not signed, though entry 3 says that R. Kell signs" in found[0].text
    all_of_them = [entry for entry in book.log if entry.kind != "signature"]
    assert wrong(rehashed(all_of_them))


def test_another_key_does_not_make_up_for_one_taken_off() -> None:
    book = written()
    book.log = rehashed([entry for entry in book.log if entry.seq != 7])
    sign_head(book, MARLOW)
    second = signer("R. Kell", 3)
    sign_head(book, second)
    assert [line.since_seq for line in wrong(book.log)] == [6]


def test_an_entry_written_without_the_key_is_put_right_by_its_holder() -> None:
    book = written()
    book.append("height", {"occupation": 1}, "R. Kell")
    book.append("remark", {"occupation": None, "text": "by somebody who has no key"}, "J. Doe")
    assert [line.since_seq for line in wrong(book.log)] == [9]
    sign_head(book, KELL)
    assert wrong(book.log) == []


def test_what_cannot_be_seen() -> None:
    """Stated in `judge` and by `verify`: so it must be true, and no more than that."""
    book = written()
    assert wrong(book.log[:6]) != []  # cut off between an entry and its signature
    assert wrong(book.log[:5]) == []  # cut off before it
    assert wrong(book.log[:1]) == []  # cut off before the key
    made_anew = rehashed([entry for entry in book.log if entry.kind not in ("key", "signature")])
    assert judge(made_anew, NOBODY)[0].text.startswith("unsigned")


def test_a_key_under_the_name_of_a_trusted_one_is_told() -> None:
    book = ListBook()
    with signed_by(book, signer("R. Kell", 7)):
        book.append("remark", {"occupation": None, "text": "one"}, "R. Kell")
    (found,) = wrong(book.log, known(KELL))
    assert "you know another key of that name, not this one" in found.text
    renamed = signer("R. Kelly", 1)
    book = ListBook()
    sign_head(book, renamed)
    (found,) = wrong(book.log, known(KELL))
    assert "you know this key under another name" in found.text


def test_a_second_key_of_a_name_is_told_unless_the_first_signed_it() -> None:
    book = written()
    second = signer("R. Kell", 9)
    with signed_by(book, second):
        book.append("remark", {"occupation": None, "text": "new computer"}, "R. Kell")
    assert any(
        "an earlier key of that name (entry 3) has not signed this one" in line.text for line in judge(book.log, NOBODY)
    )
    sign_head(book, KELL)
    assert not any("has not signed this one" in line.text for line in judge(book.log, NOBODY))


def test_a_signature_for_a_certificate_does_not_serve_for_an_entry() -> None:
    book = written()
    head = book.log[-1]
    body = KELL.entry_signature(head.seq, head.hash)
    body["signature"] = KELL.certificate_signature(head.hash)["signature"]
    book.append("signature", body, "R. Kell")
    assert len(wrong(book.log)) == 1


def test_a_key_that_anybody_can_sign_for_signs_nothing() -> None:
    book = ListBook()
    public = bytes([1]) + bytes(31)
    body = {"name": "R. Kell", "algorithm": "Ed25519", "public_key": public.hex(), "fingerprint": fingerprint(public)}
    book.append("key", body, "R. Kell")
    head = book.log[-1]
    forged = {"seq": head.seq, "hash": head.hash, "fingerprint": fingerprint(public), "signature": "01" + "00" * 63}
    book.append("signature", forged, "R. Kell")
    assert next(line.since_seq for line in wrong(book.log)) == 2
    assert not any("are covered by 1 signature" in line.text for line in judge(book.log, NOBODY))


@pytest.mark.parametrize(
    "body", [{}, {"seq": "7", "hash": 3}, {"seq": True, "hash": ""}, {"seq": 10**30, "hash": "x", "signature": "zz"}]
)
def test_hostile_bodies_are_lines_not_errors(body: dict[str, Any]) -> None:
    book = written()
    book.append("signature", {"fingerprint": KELL.fingerprint, **body}, "R. Kell")
    book.append("key", {**body, "name": 1, "algorithm": ["Ed25519"]}, "R. Kell")
    book.append("key", {**body, "name": None, "algorithm": "Ed25519", "public_key": 5}, "R. Kell")
    assert wrong(book.log)


def rescued_from(damaged: list[Entry], lost: set[int]) -> list[Entry]:
    """A rescued book made by hand in the form of its kind: old entries under their numbers, `withdrawn` for what is lost."""
    made = [replace(damaged[0], body={"id": "another", "format": 1})]
    runs: list[dict[str, Any]] = []
    for entry in damaged:
        if entry.seq in lost:
            if entry.seq == 1:
                continue
            made.append(
                replace(entry, kind="withdrawn", observer="fieldbook", body={"reason": "lost", "original": None})
            )
            continue
        if runs and runs[-1]["last"] == entry.seq - 1:
            runs[-1].update(last=entry.seq, hash=entry.hash)
        else:
            runs.append(
                {"first": entry.seq, "last": entry.seq, "previous_hash": entry.previous_hash, "hash": entry.hash}
            )
        if entry.kind in ("key", "signature"):
            original = {
                "utc": entry.utc,
                "kind": entry.kind,
                "body": canonical_json(entry.body),
                "observer": entry.observer,
            }
            body = {"reason": "signs the old chain", "original": original}
            made.append(replace(entry, kind="withdrawn", observer="fieldbook", body=body))
        elif entry.seq > 1:
            made.append(entry)
    first = damaged[0]
    book = {"utc": first.utc, "kind": first.kind, "body": canonical_json(first.body), "observer": first.observer}
    body = {"from": {"book": None if 1 in lost else book}, "carried": runs}
    return rehashed([*made, replace(first, kind="rescued", observer="fieldbook", body=body)])


@pytest.mark.parametrize(
    ("lost", "said"),
    [
        (set(), "entries of the damaged book up to 6, where they are carried, are those signed by the key"),
        ({1}, "entries of the damaged book up to 6, where they are carried"),
        ({4}, "entries of the damaged book up to 6, where they are carried"),
        ({6}, "what the signature of entry 7 was made over was lost with the damaged book"),
        ({7}, "entries of the damaged book up to 3, where they are carried"),
    ],
)
def test_a_rescued_book_keeps_what_its_signatures_showed(lost: set[int], said: str) -> None:
    book = rescued_from(written().log, lost)
    assert wrong(book) == []  # what is lost was not taken off
    assert any(said in line.text for line in judge(book, NOBODY)), [line.text for line in judge(book, NOBODY)]


def test_a_rescued_book_whose_key_entry_is_lost_judges_nothing() -> None:
    lines = judge(rescued_from(written().log, {3}), NOBODY)
    assert all(line.holds for line in lines)
    assert "is of a key that no entry before it announces (carried from a damaged book)" in lines[0].text


def test_a_rescued_book_with_another_remark_than_was_signed_is_found() -> None:
    damaged = list(written().log)
    damaged[5] = replace(damaged[5], body={"occupation": None, "text": "forged"})
    found = wrong(rescued_from(rehashed(damaged), set()))
    assert "signed another entry 6 of the damaged book than is carried" in found[0].text
    for run in ({"first": "1"}, {}, 5):
        book = ListBook()
        book.append("rescued", {"from": {}, "carried": [run]}, "fieldbook")
        sign_head(book, KELL)
        assert wrong(book.log) == []


def test_a_rescued_book_is_signed_anew() -> None:
    book = ListBook()
    book.log = rescued_from(written().log, {4})
    last = book.log[-1].seq
    with signed_by(book, KELL):
        book.append("remark", {"occupation": None, "text": "after the rescue"}, "R. Kell")
    assert [entry.kind for entry in book.log][last:] == ["remark", "key", "signature"]  # announced anew
    assert any(
        f"entries 1 to {last + 2} of {last + 3} are covered by 1 sig" in line.text for line in judge(book.log, NOBODY)
    )
    book.append("remark", {"occupation": None, "text": "without the key"}, "R. Kell")
    assert [line.since_seq for line in wrong(book.log)] == [last + 4]
