"""The user's own keys and the keys the user trusts, in the configuration folder.

    keys/NAME-FINGERPRINT.key         private keys, one of a name
    trusted/NAME-FINGERPRINT.toml     public keys of other people, put there by `fieldbook key trust`

To trust a key is the user's own word that it belongs to the person of that name. Nothing but these folders is asked.
"""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum
from pathlib import Path

from fieldbook.errors import FieldbookError, UsageError
from fieldbook.settings.user import user_file

from . import ed25519
from .key_file import KeyFile, file_name, read_key_file, write_key_file
from .public_key import PublicKey, checked_name, read_public, to_toml
from .small_file import write_new

MOST_FILES = 1000


class Standing(Enum):
    """What the user has said of a key."""

    OWN = "it is your own"
    TRUSTED = "you trust it"
    UNKNOWN = "you have not said that you trust it"
    OTHER_KEY = "you know another key of that name, not this one"
    OTHER_NAME = "you know this key under another name"

    @property
    def trusted(self) -> bool:
        """The key is the user's, or one the user trusts, under this very name."""
        return self in (Standing.OWN, Standing.TRUSTED)

    @property
    def suspicious(self) -> bool:
        """It contradicts what the user has said."""
        return self in (Standing.OTHER_KEY, Standing.OTHER_NAME)


@dataclass(frozen=True)
class Trust:
    """The keys the user knows: (key, whether it is the user's own)."""

    known: tuple[tuple[PublicKey, bool], ...] = ()

    def standing(self, name: str, public: bytes) -> Standing:
        """What the user has said of this key under this name. Whole keys are compared, not fingerprints."""
        same_name = [(key, own) for key, own in self.known if key.name == name]
        for key, own in same_name:
            if key.public == public:
                return Standing.OWN if own else Standing.TRUSTED
        if any(key.public == public for key, _ in self.known):
            return Standing.OTHER_NAME
        return Standing.OTHER_KEY if same_name else Standing.UNKNOWN


def keys_folder() -> Path:
    """Where private keys are kept, whether it exists or not."""
    return user_file().parent / "keys"


def trusted_folder() -> Path:
    """Where trusted public keys are kept, whether it exists or not."""
    return user_file().parent / "trusted"


def own_keys() -> tuple[list[KeyFile], list[str]]:
    """The user's private key files, and what is wrong with those that cannot be used."""
    found: list[KeyFile] = []
    wrong: list[str] = []
    for path in _files(keys_folder(), "*.key"):
        try:
            found.append(read_key_file(path))
        except FieldbookError as error:
            wrong.append(error.text)
    return found, wrong


def trusted_keys() -> tuple[list[PublicKey], list[str]]:
    """The public keys the user trusts, and what is wrong with those that cannot be read."""
    found: list[PublicKey] = []
    wrong: list[str] = []
    for path in _files(trusted_folder(), "*.toml"):
        try:
            found.append(read_public(path))
        except FieldbookError as error:
            wrong.append(error.text)
    return found, wrong


def trust() -> Trust:
    """Own and trusted keys; a file that cannot be read trusts nobody."""
    own, others = own_keys()[0], trusted_keys()[0]
    return Trust((*((item.key, True) for item in own), *((key, False) for key in others)))


def key_of(name: str) -> KeyFile | None:
    """The user's key of exactly this name; None if there is none.

    Raises:
        UsageError: several, so that it is not clear which.
    """
    found = [item for item in own_keys()[0] if item.key.name == name]
    if len(found) > 1:
        files = ", ".join(item.path.name for item in found)
        raise UsageError(f"Several keys are named {name}: {files}.", "Name one with --key FILE.", code="several_keys")
    return found[0] if found else None


def new_key(name: str, passphrase: str | None, out: Path | None) -> KeyFile:
    """Make a key: in the user's folder, or (`out`) in another file, of which the user then has to say --key FILE.

    Raises:
        UsageError: there is a key of that name already, or the file cannot be made.
    """
    name = checked_name(name)
    secret = ed25519.new_secret()
    if out is not None:
        return write_key_file(out, secret, name, passphrase)
    there = [item for item in own_keys()[0] if item.key.name == name]
    if there:
        raise UsageError(
            f"There is a key of {name} already: {there[0].path}.",
            "Use it, or move that file to another folder first; what it signed stays signed.",
            code="exists",
        )
    return write_key_file(
        _made(keys_folder()) / f"{file_name(name, ed25519.public_of(secret))}.key", secret, name, passphrase
    )


def add_trusted(key: PublicKey) -> Path:
    """Put a public key into the user's list.

    Raises:
        UsageError: it stands there already, or cannot be written.
    """
    standing = trust().standing(key.name, key.public)
    if standing.trusted:
        raise UsageError(
            f"The key of {key.words()}: {standing.value} already.", "Nothing is to be done.", code="exists"
        )
    path = _made(trusted_folder()) / f"{file_name(key.name, key.public)}.toml"
    write_new(path, to_toml(key))
    return path


def _files(folder: Path, pattern: str) -> list[Path]:
    try:
        return sorted(folder.glob(pattern))[:MOST_FILES]
    except OSError:
        return []


def _made(folder: Path) -> Path:
    try:
        folder.mkdir(mode=0o700, parents=True, exist_ok=True)
    except OSError as error:
        raise UsageError(
            f"The folder {folder} cannot be made: {error.strerror or error}.", "Check the rights of the one above it."
        ) from error
    return folder
