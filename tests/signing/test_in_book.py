"""Signing in a real book: one transaction, beside other writers, and what it costs a long book."""

from __future__ import annotations

import os
import subprocess
import sys
import time
from pathlib import Path

import pytest
from list_book import signer

from fieldbook.book.store import Book
from fieldbook.clock import FakeClock, SystemClock
from fieldbook.signing import in_book
from fieldbook.signing.in_book import sign_head, signed_by
from fieldbook.signing.judge import judge
from fieldbook.signing.keyring import Trust
from fieldbook.signing.signer import Signer

KELL = signer("R. Kell", 1)


@pytest.fixture
def path(tmp_path: Path) -> Path:
    """A book with nothing but its beginning."""
    place = tmp_path / "a.book"
    Book.create(place, clock=FakeClock(0, 1_804_122_600_000), observer="R. Kell").close()
    return place


def opened(path: Path) -> Book:
    return Book.open(path, clock=SystemClock(), write=True)


def remark(book: Book, text: str) -> None:
    book.append("remark", {"occupation": None, "text": text}, "R. Kell")


def test_entry_key_and_signature_are_one_commit(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def killed(*_: object) -> None:
        raise KeyboardInterrupt

    with opened(path) as book:
        with monkeypatch.context() as patch:
            patch.setattr(Signer, "entry_signature", killed)
            with pytest.raises(KeyboardInterrupt), signed_by(book, KELL):
                remark(book, "one")
        with Book.open(path, clock=SystemClock()) as other:
            assert [entry.kind for entry in other.entries()] == ["book"]
        with signed_by(book, KELL):
            remark(book, "two")
        assert [entry.kind for entry in book.entries()] == ["book", "remark", "key", "signature"]


def test_what_another_process_wrote_meanwhile_is_covered_too(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    looked = in_book._looked_through

    def slow(book: Book, who: Signer) -> tuple[bool, int]:
        found = looked(book, who)
        with opened(path) as other:  # a recorder, or the same person at another terminal
            remark(other, "meanwhile")
            sign_head(other, KELL)
        return found

    with opened(path) as book:
        with monkeypatch.context() as patch:
            patch.setattr(
                in_book, "_looked_through", lambda found, who: slow(found, who) if found is book else looked(found, who)
            )
            with signed_by(book, KELL):
                remark(book, "mine")
        kinds = [entry.kind for entry in book.entries()]
        assert kinds == ["book", "remark", "key", "signature", "remark", "signature"]  # announced once
        lines = judge(book.entries(), Trust())
        assert all(line.holds for line in lines)
        assert "entries 1 to 5 of 6 are covered by 2 signatures" in lines[0].text


def test_a_signer_inside_a_larger_transaction_is_part_of_it(path: Path) -> None:
    with opened(path) as book:

        def fails() -> None:
            with book.transaction():
                with signed_by(book, KELL):
                    remark(book, "one")
                raise RuntimeError

        with pytest.raises(RuntimeError):
            fails()
        assert len(book.entries()) == 1


@pytest.mark.skipif(sys.platform == "win32", reason="a pseudo-terminal")
def test_a_passphrase_is_asked_for_in_a_terminal_and_not_shown(path: Path, tmp_path: Path) -> None:
    """A real terminal: the key made with a typed passphrase, the book signed with it, the words typed never echoed."""
    import pty

    environment = {**os.environ, "XDG_CONFIG_HOME": str(tmp_path / "config")}
    program = "from fieldbook.signing import pkcs8\npkcs8.ROUNDS = 1000\nfrom fieldbook.commands import main\nmain()"

    def at_terminal(*arguments: str, typed: list[str]) -> tuple[int, str]:
        master, slave = pty.openpty()
        child = subprocess.Popen(
            [sys.executable, "-c", program, *arguments],
            cwd=Path(__file__).parents[2],
            env=environment,
            stdin=slave,
            stdout=slave,
            stderr=slave,
            start_new_session=True,
        )
        os.close(slave)
        shown, asked, deadline = "", 0, time.monotonic() + 60
        while time.monotonic() < deadline:
            try:
                shown += os.read(master, 4096).decode("utf-8", "replace")
            except OSError:  # the other side has closed
                break
            if shown.rstrip(" ").endswith(":") and shown.count(": ") > asked and typed:
                asked = shown.count(": ")
                os.write(master, typed.pop(0).encode() + b"\n")
        os.close(master)
        return child.wait(30), shown

    code, shown = at_terminal("key", "new", "--name", "R. Kell", typed=["open sesame", "open sesame"])
    assert code == 0, shown
    code, more = at_terminal("key", "sign", str(path), typed=["open sesame"])
    assert code == 0, more
    assert "signed by R. Kell" in more
    code, wrong = at_terminal("key", "sign", str(path), typed=["sesame"])
    assert code == 2
    assert "does not open" in wrong
    assert "sesame" not in shown + more + wrong.replace("does not open", "")
