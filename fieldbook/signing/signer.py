"""A key that is ready to sign, and the rule by which one is taken without asking."""

from __future__ import annotations

from dataclasses import dataclass, field

from fieldbook.errors import FieldbookError
from fieldbook.model.canonical import Tree

from . import ed25519
from .key_file import KeyFile
from .keyring import key_of
from .message import ALGORITHM, certificate_message, entry_message, fingerprint


@dataclass(frozen=True)
class Signer:
    """A name, its public key (32 bytes) and the secret behind it (32 bytes)."""

    name: str
    public: bytes
    secret: bytes = field(repr=False)

    @property
    def fingerprint(self) -> str:
        """32 hex digits."""
        return fingerprint(self.public)

    def announcement(self) -> Tree:
        """Body of a `key` entry."""
        return {
            "name": self.name,
            "algorithm": ALGORITHM,
            "public_key": self.public.hex(),
            "fingerprint": self.fingerprint,
        }

    def entry_signature(self, seq: int, entry_hash: str) -> Tree:
        """Body of a `signature` entry over the entry `seq` and all before it."""
        made = ed25519.sign(self.secret, entry_message(self.name, seq, entry_hash))
        return {"seq": seq, "hash": entry_hash, "fingerprint": self.fingerprint, "signature": made.hex()}

    def certificate_signature(self, digest: str) -> Tree:
        """The block `signature` of a certificate, over the digest of its facts."""
        made = ed25519.sign(self.secret, certificate_message(self.name, digest))
        return {**self.announcement(), "signature": made.hex()}


def signer_of(file: KeyFile, passphrase: str | None = None) -> Signer:
    """A key opened.

    Raises:
        UsageError: as `KeyFile.secret`.
    """
    return Signer(file.key.name, file.key.public, file.secret(passphrase))


def signer_without_asking(name: str) -> tuple[Signer | None, str]:
    """The user's key of exactly this name if it needs no passphrase; else None and why not, in a few words."""
    try:
        file = key_of(name)
        if file is None:
            return None, f"no key of {name} on this computer"
        if file.encrypted:
            return None, f"the key of {name} asks for a passphrase"
        return signer_of(file), ""
    except FieldbookError as error:
        return None, error.text
    except OSError as error:
        return None, f"the keys cannot be read: {error.strerror or error}"
