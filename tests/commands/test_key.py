"""`fieldbook key`: made, listed, shown, handed over, trusted; JSON of each; nothing asked where nobody answers."""

from __future__ import annotations

import io
import sys
from pathlib import Path

import pytest

from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.signing import pkcs8
from fieldbook.signing.public_key import read_public


@pytest.fixture(autouse=True)
def own_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A configuration folder of this test's own, and cheap passphrases."""
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))
    monkeypatch.setattr(pkcs8, "ROUNDS", 1000)


@pytest.fixture
def typed(monkeypatch: pytest.MonkeyPatch):
    """Put text on stdin."""

    def put(text: str) -> None:
        monkeypatch.setattr(sys, "stdin", io.StringIO(text))

    return put


def test_made_listed_shown_and_handed_over(fieldbook, tmp_path) -> None:
    made = fieldbook("key", "new", "--name", "R. Kell", "--no-passphrase", "--json")
    assert made.code == 0, made.err
    key = made.json["key"]
    assert made.json["schema"] == "fieldbook.key/1"
    assert set(key) == {"name", "algorithm", "fingerprint", "public_key", "path", "encrypted", "readable_by_others"}
    listed = fieldbook("key", "list", "--json").json
    assert listed == {"schema": "fieldbook.key/1", "own": [key], "trusted": [], "problems": []}
    shown = fieldbook("key", "show")
    assert "".join(shown.out.split("\n", 1)[1].split()) == key["fingerprint"]
    assert max(len(line) for line in shown.out.splitlines()) < 30
    out = tmp_path / "kell.toml"
    assert fieldbook("key", "export", "R. Kell", "--out", out).code == 0
    assert read_public(out).public.hex() == key["public_key"]
    again = fieldbook("key", "export", "R. Kell", "--out", out, "--json")
    assert (again.code, again.json["error"]["code"]) == (2, "exists")


def test_another_persons_key_is_trusted_once(fieldbook, tmp_path, monkeypatch) -> None:
    fieldbook("key", "new", "--name", "R. Kell", "--no-passphrase")
    fieldbook("key", "export", "R. Kell", "--out", tmp_path / "kell.toml")
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "office"))
    said = fieldbook("key", "trust", tmp_path / "kell.toml")
    assert said.code == 0
    assert "by telephone" in said.err
    assert fieldbook("key", "list").out.startswith("trusted  R. Kell, fingerprint ")
    assert fieldbook("key", "show", "R. Kell", "--json").json["key"]["name"] == "R. Kell"
    assert fieldbook("key", "trust", tmp_path / "kell.toml").code == 2
    private = next((tmp_path / "config" / "fieldbook" / "keys").iterdir())
    assert fieldbook("key", "trust", private).code == 2


@pytest.mark.parametrize(
    ("arguments", "code"),
    [
        (("new", "--name", "R. Kell"), "passphrase"),  # no terminal, nothing said of a passphrase
        (("new", "--name", "", "--no-passphrase"), "name"),
        (("new", "--name", "R. Kell", "--no-passphrase", "--passphrase-stdin"), "usage"),
        (("show",), "no_key"),
        (("show", "R. Kell"), "no_key"),
        (("export", "R. Kell", "--out", "x.toml"), "no_key"),
        (("trust", "missing.toml"), "missing"),
    ],
)
def test_errors_have_a_remedy(fieldbook, typed, arguments, code) -> None:
    typed("")
    said = fieldbook("key", *arguments, "--json")
    assert (said.code, said.json["error"]["code"]) == (2, code)
    assert said.json["error"]["remedy"]


def test_without_keys_the_list_says_so(fieldbook) -> None:
    said = fieldbook("key", "list")
    assert (said.code, said.out) == (0, "")
    assert "unsigned" in said.err


def test_an_encrypted_key_signs_a_book_in_the_evening(fieldbook, typed, book) -> None:
    typed("open sesame\n")
    made = fieldbook("key", "new", "--name", "R. Kell", "--passphrase-stdin", "--json")
    assert made.json["key"]["encrypted"] is True
    said = fieldbook("entry", book, "remark", "--set", "text=dry", "--by", "R. Kell", "--json")
    assert said.json["signed"] is None
    assert said.err == "unsigned: the key of R. Kell asks for a passphrase\n"
    typed("wrong\n")
    assert fieldbook("key", "sign", book, "--passphrase-stdin", "--json").json["error"]["code"] == "passphrase"
    typed("")
    assert fieldbook("key", "sign", book).code == 2  # nobody to ask
    typed("open sesame\n")
    signed = fieldbook("key", "sign", book, "--passphrase-stdin", "--json")
    assert signed.code == 0, signed.out
    head = signed.json["signature"]
    assert head["covers"] == head["seq"] - 1
    typed("open sesame\n")
    assert fieldbook("key", "sign", book, "--passphrase-stdin", "--json").json["signature"] == {**head, "new": False}
    assert "covered by 1 signature" in fieldbook("verify", book).out


def test_an_entry_without_the_key_is_said_and_missed_and_put_right(fieldbook, book, tmp_path, monkeypatch) -> None:
    fieldbook("key", "new", "--name", "R. Kell", "--no-passphrase")
    remark = ("entry", book, "remark", "--set", "text=dry", "--by", "R. Kell")
    said = fieldbook(*remark, "--json")
    assert (said.err, said.json["signed"]["name"]) == ("", "R. Kell")
    assert fieldbook("verify", book).code == 0
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "other computer"))
    said = fieldbook(*remark)
    assert "unsigned: no key of R. Kell on this computer" in said.err
    assert "will miss the signature" in said.err
    found = fieldbook("verify", book)
    assert found.code == 1
    assert "is not signed, though entry" in found.out
    monkeypatch.setenv("XDG_CONFIG_HOME", str(tmp_path / "config"))
    assert fieldbook("key", "sign", book, "--by", "R. Kell").code == 0
    assert fieldbook("verify", book).code == 0


def test_a_key_of_another_name_signs_no_entry(fieldbook, book, tmp_path) -> None:
    out = tmp_path / "marlow.key"
    assert fieldbook("key", "new", "--name", "A. Marlow", "--no-passphrase", "--out", out).code == 0
    before = len(entries(book))
    said = fieldbook("entry", book, "remark", "--set", "text=x", "--by", "R. Kell", "--key", out, "--json")
    assert (said.code, said.json["error"]["code"]) == (2, "other_name")
    assert len(entries(book)) == before
    said = fieldbook("entry", book, "remark", "--set", "text=x", "--by", "A. Marlow", "--key", out, "--json")
    assert said.json["signed"]["name"] == "A. Marlow"


def test_the_key_may_come_from_the_environment(fieldbook, book, tmp_path, monkeypatch) -> None:
    out = tmp_path / "kell.key"
    fieldbook("key", "new", "--name", "R. Kell", "--no-passphrase", "--out", out)
    assert fieldbook("key", "list", "--json").json["own"] == []  # not in the folder: never taken by itself
    monkeypatch.setenv("FIELDBOOK_KEY", str(out))
    seq = int(fieldbook("entry", book, "remark", "--set", "text=x", "--by", "R. Kell").out.split()[0])
    fieldbook("strike", book, seq, "--reason", "twice", "--by", "R. Kell")
    kinds = [entry.kind for entry in entries(book)]
    assert kinds[-5:] == ["remark", "key", "signature", "strike", "signature"]


def test_new_signs_the_beginning(fieldbook, session, tmp_path) -> None:
    fieldbook("key", "new", "--name", "R. Kell", "--no-passphrase")
    path = tmp_path / "signed.book"
    said = fieldbook("new", path, "--from", session, "--json")
    assert said.json["signed"]["name"] == "R. Kell"
    assert [entry.kind for entry in entries(path)] == ["book", "session", "key", "signature"]


def test_marks_are_signed_together(fieldbook, book, tmp_path) -> None:
    fieldbook("key", "new", "--name", "R. Kell", "--no-passphrase")
    table = tmp_path / "marks.csv"
    table.write_text("name,description\nA-1,pin\nA-2,bolt\n", encoding="utf-8")
    said = fieldbook("marks", "import", book, table, "--by", "R. Kell", "--json")
    assert said.json["signed"]["name"] == "R. Kell"
    assert [entry.kind for entry in entries(book)][-4:] == ["mark", "mark", "key", "signature"]


def entries(path: Path):
    with Book.open(path, clock=SystemClock()) as opened:
        return opened.entries()
