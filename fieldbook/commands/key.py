"""`fieldbook key`: the user's own signing key, and the keys of other people the user trusts."""

from __future__ import annotations

from pathlib import Path

import click

from fieldbook.commands.output import line, note, plain, write_json
from fieldbook.commands.signing import line_of_stdin, opened, signed_tree, terminal
from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree
from fieldbook.signing import keyring
from fieldbook.signing.key_file import KeyFile, read_key_file
from fieldbook.signing.message import ALGORITHM, spoken
from fieldbook.signing.public_key import PublicKey, read_public, to_toml
from fieldbook.signing.small_file import write_new

SCHEMA = "fieldbook.key/1"
_json = click.option("--json", "as_json", is_flag=True, help="The result as JSON on stdout.")
_stdin = click.option("--passphrase-stdin", is_flag=True, help="Read the passphrase from the first line of stdin.")


@click.group(
    "key",
    help="Keys that sign entries and certificates (Ed25519). Optional: without a key everything works and says 'unsigned'.",
)
def command() -> None:
    """Sub-commands follow."""


@command.command("new", help="Make a key. Its name must be exactly the name that your entries bear.")
@click.option("--name", required=True, help="Whose key it is, as the observer is written in the session file.")
@click.option("--out", type=click.Path(path_type=Path), help="Another file than the one in your configuration folder.")
@_stdin
@click.option("--no-passphrase", is_flag=True, help="Leave the file unencrypted, so that commands sign without asking.")
@_json
def new(name: str, out: Path | None, *, passphrase_stdin: bool, no_passphrase: bool, as_json: bool) -> None:
    """Ask for the passphrase, make the key, write the file."""
    made = keyring.new_key(name, _new_passphrase(from_stdin=passphrase_stdin, none=no_passphrase), out)
    if as_json:
        write_json({"schema": SCHEMA, "key": _file_tree(made)})
        return
    line(f"{plain(made.path)}: key of {made.key.name}")
    line(f"fingerprint {spoken(made.key.fingerprint)}")
    note(
        "Keep a copy of the file in a safe place: nobody can make it again. Give away what `fieldbook key export` writes."
    )
    if made.encrypted:
        note(
            "It asks for its passphrase, so entries are signed by `fieldbook key sign BOOK`, or by --key FILE in a terminal."
        )


@command.command("list", help="Your own keys, and those of other people that you trust.")
@_json
def list_keys(*, as_json: bool) -> None:
    """One line per key."""
    own, wrong = keyring.own_keys()
    trusted, unreadable = keyring.trusted_keys()
    if as_json:
        trees = {"own": [_file_tree(item) for item in own], "trusted": [_tree(item) for item in trusted]}
        write_json({"schema": SCHEMA, **trees, "problems": wrong + unreadable})
        return
    for file in own:
        line(f"own      {file.key.words()}{', with passphrase' if file.encrypted else ''}  {file.path}")
        _warn_of_rights(file)
    for key in trusted:
        line(f"trusted  {key.words()}")
    for text in wrong + unreadable:
        note(f"not usable: {text}")
    if not own and not trusted:
        note('No keys: entries and certificates are unsigned. `fieldbook key new --name "..."` makes one.')


@command.command("show", help="Fingerprint of a key, to be read aloud: of NAME, of FILE, or of your only key.")
@click.argument("name", required=False)
@_json
def show(name: str | None, *, as_json: bool) -> None:
    """The key's name and fingerprint."""
    key = _named(name)
    if as_json:
        write_json({"schema": SCHEMA, "key": _tree(key)})
        return
    groups = spoken(key.fingerprint).split(" ")
    line(key.name)
    line(f"  {'  '.join(groups[:4])}")
    line(f"  {'  '.join(groups[4:])}")


@command.command("export", help="Write the public key of NAME, for whoever checks your books. It holds no secret.")
@click.argument("name")
@click.option("--out", required=True, type=click.Path(path_type=Path), help="File to write.")
@_json
def export(name: str, out: Path, *, as_json: bool) -> None:
    """The public half alone."""
    key = _named(name)
    write_new(out, to_toml(key))
    if as_json:
        write_json({"schema": SCHEMA, "key": _tree(key), "path": str(out)})
    else:
        line(f"{plain(out)}: public key of {key.words()}")


@command.command("trust", help="Put another person's public key FILE into your list, after comparing the fingerprint.")
@click.argument("file", type=click.Path(path_type=Path))
@_json
def trust(file: Path, *, as_json: bool) -> None:
    """Check the file, keep it."""
    key = read_public(file)
    path = keyring.add_trusted(key)
    if as_json:
        write_json({"schema": SCHEMA, "key": _tree(key), "path": str(path)})
        return
    line(f"trusted: {key.words()}")
    note(f"Compare the fingerprint with {key.name} by telephone. If it differs, delete {path}.")


@command.command(
    "sign", help="Sign the last entry of BOOK, and with it everything before: at the end of a day, for example."
)
@click.argument("book", type=click.Path(path_type=Path))
@click.option("--by", "name", help="Whose key; without it your only one.")
@click.option("--key", "key_path", type=click.Path(path_type=Path), envvar="FIELDBOOK_KEY", help="Private key file.")
@_stdin
@_json
def sign(book: Path, name: str | None, key_path: Path | None, *, passphrase_stdin: bool, as_json: bool) -> None:
    """Open the key, sign the head."""
    from fieldbook.commands.open_book import writing
    from fieldbook.signing.in_book import sign_head

    file = read_key_file(key_path) if key_path is not None else _own(name)
    if name is not None and file.key.name != name:
        raise UsageError(f"{file.path} is the key of {file.key.name}, not of {name}.", "Name one of the two.")
    with writing(book) as open_book:
        signer = opened(file, from_stdin=passphrase_stdin)
        entry = sign_head(open_book, signer)
        head = open_book.entries()[-1]
    if as_json:
        tree = {"seq": head.seq, "hash": head.hash, "covers": head.body["seq"], "new": entry is not None}
        write_json({"schema": SCHEMA, "book": str(book), "signed": signed_tree(signer), "signature": tree})
    elif entry is None:
        line(f"{plain(book)}: signed already up to entry {head.body['seq']}; nothing was written")
    else:
        line(f"{plain(book)}: entries 1 to {entry.body['seq']} signed by {signer.name} (entry {entry.seq})")


def _new_passphrase(*, from_stdin: bool, none: bool) -> str | None:
    if from_stdin and none:
        raise UsageError("--no-passphrase goes without --passphrase-stdin.", "Give one of them.")
    if none:
        return None
    if from_stdin:
        return line_of_stdin()
    if not terminal():
        raise UsageError(
            "A passphrase cannot be asked for here.",
            "Say --no-passphrase, or give one with --passphrase-stdin.",
            code="passphrase",
        )
    text: str = click.prompt(
        "Passphrase (empty: none, and commands sign without asking)",
        default="", show_default=False, hide_input=True, confirmation_prompt=True, err=True,
    )  # fmt: skip
    return text or None


def _own(name: str | None) -> KeyFile:
    """The user's key of that name, or the only one."""
    if name is not None:
        found = keyring.key_of(name)
        if found is None:
            have = ", ".join(item.key.name for item in keyring.own_keys()[0])
            raise UsageError(
                f"You have no key of {name}.",
                f"You have {have}." if have else f'Make one: fieldbook key new --name "{name}".',
                code="no_key",
            )
        return found
    own = keyring.own_keys()[0]
    if len(own) != 1:
        remedy = "Name one." if own else 'Make one: fieldbook key new --name "...".'
        raise UsageError(f"You have {len(own) or 'no'} keys.", remedy, code="which_key" if own else "no_key")
    return own[0]


def _named(name: str | None) -> PublicKey:
    """A key by its name, own or trusted, or by its file."""
    if name is None:
        return _own(None).key
    known = [key for key, _ in keyring.trust().known if key.name == name]
    if len(known) > 1:
        raise UsageError(f"Several keys are named {name}.", "Name the file of one.", code="several_keys")
    if known:
        return known[0]
    path = Path(name)
    if path.suffix == ".key" and path.is_file():
        return read_key_file(path).key
    if path.suffix == ".toml" and path.is_file():
        return read_public(path)
    return _own(name).key


def _warn_of_rights(file: KeyFile) -> None:
    if file.readable_by_others:
        note(f"{file.path} can be read by other users of this computer: chmod 600 puts that right.")


def _tree(key: PublicKey) -> Tree:
    return {
        "name": key.name,
        "algorithm": ALGORITHM,
        "fingerprint": key.fingerprint,
        "public_key": key.public.hex(),
    }


def _file_tree(file: KeyFile) -> Tree:
    return {
        **_tree(file.key),
        "path": str(file.path),
        "encrypted": file.encrypted,
        "readable_by_others": file.readable_by_others,
    }
