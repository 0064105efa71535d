"""Which key a command signs with: the one that was named, else the acting person's own if it needs no asking."""

from __future__ import annotations

import sys
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import click

from fieldbook.book.store import Book
from fieldbook.commands.output import note
from fieldbook.errors import UsageError
from fieldbook.signing.key_file import KeyFile, read_key_file
from fieldbook.signing.signer import Signer, signer_of, signer_without_asking

key_option: Callable[[Any], Any] = click.option(
    "--key",
    "key_path",
    type=click.Path(path_type=Path),
    envvar="FIELDBOOK_KEY",
    show_envvar=True,
    help="Private key file to sign with; without it your key of exactly that name, if it asks for no passphrase.",
)


@dataclass(frozen=True)
class Choice:
    """The key that signs, or None and why there is none."""

    signer: Signer | None
    why: str = ""

    def say(self) -> None:
        """Say once on stderr that what was written is unsigned, if it is."""
        if self.signer is None:
            note(f"unsigned: {self.why}")


def chosen(name: str, key_path: Path | None, *, any_name: bool = False) -> Choice:
    """The key that signs for a person.

    Args:
        name: the acting person, as the entries will bear it.
        key_path: the key that was asked for; it is used or the command fails.
        any_name: the key may bear another name than the person (a certificate).

    Raises:
        UsageError: the key that was asked for cannot be used.
    """
    if key_path is None:
        return Choice(*signer_without_asking(name))
    file = read_key_file(key_path)
    if file.key.name != name and not any_name:
        raise UsageError(
            f"{key_path} is the key of {file.key.name}, the entry is by {name}.",
            "Sign your own entries with your own key.",
            code="other_name",
        )
    return Choice(opened(file))


def opened(file: KeyFile, *, from_stdin: bool = False) -> Signer:
    """A key opened; its passphrase is asked for where that can be.

    Raises:
        UsageError: wrong passphrase, or nobody can be asked.
    """
    if not file.encrypted:
        return signer_of(file)
    if from_stdin:
        return signer_of(file, line_of_stdin())
    if not terminal():
        raise UsageError(
            f"The key {file.path} asks for a passphrase, and there is no terminal to ask at.",
            "Run the command in a terminal, or use a key without one.",
            code="passphrase",
        )
    return signer_of(file, click.prompt(f"Passphrase of {file.key.name}", hide_input=True, err=True))


def terminal() -> bool:
    """Whether a person can be asked."""
    return sys.stdin.isatty() and sys.stderr.isatty()


def line_of_stdin() -> str:
    """The first line of stdin.

    Raises:
        UsageError: it is empty.
    """
    text = sys.stdin.readline(4096).rstrip("\r\n")
    if not text:
        raise UsageError("No passphrase came on stdin.", "Write it as the first line, or leave --passphrase-stdin out.")
    return text


def say_unsigned(book: Book, name: str, choice: Choice) -> None:
    """Say that an entry is unsigned, if it is, and that `verify` will miss its signature where the book promises it."""
    from fieldbook.signing.in_book import announced_names

    choice.say()
    if choice.signer is None and name in announced_names(book.entries()):
        note(
            f"This book says that entries of {name} are signed: `fieldbook verify` will miss the signature until "
            f'`fieldbook key sign BOOK --by "{name}"` is run with the key.'
        )


def signed_tree(signer: Signer | None) -> dict[str, str] | None:
    """The key that signed, for JSON output; None: unsigned."""
    return None if signer is None else {"name": signer.name, "fingerprint": signer.fingerprint}
