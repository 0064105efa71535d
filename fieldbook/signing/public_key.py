"""A name and a public key, as people hand them to each other.

    schema = "fieldbook.public-key/1"
    name = "R. Kell"
    algorithm = "Ed25519"
    fingerprint = "3f2a 91c0 ..."          # for reading aloud; checked against the key
    public_key = '''...'''                 # PEM (RFC 8410)
    name_signature = "..."                 # of the key over its own name: nobody else can put another name to it

The file is hostile input. What it proves is that the holder of the key goes by this name, not who that is.
"""

from __future__ import annotations

import json
import unicodedata
from dataclasses import dataclass
from pathlib import Path

from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree
from fieldbook.settings.toml_text import BadToml, toml_tree

from . import ed25519
from .message import ALGORITHM, fingerprint, name_message, spoken
from .small_file import read_small

SCHEMA = "fieldbook.public-key/1"
MAX_BYTES = 16_384
MAX_NAME = 120
_KEYS = ("schema", "name", "algorithm", "fingerprint", "public_key", "name_signature")


@dataclass(frozen=True)
class PublicKey:
    """Who a key says it is. `name_signature` is the key's own signature over `name_message`."""

    name: str
    public: bytes
    name_signature: bytes

    @property
    def fingerprint(self) -> str:
        """32 hex digits."""
        return fingerprint(self.public)

    def words(self) -> str:
        """Name and fingerprint in one line."""
        return f"{self.name}, fingerprint {spoken(self.fingerprint)}"


def checked_name(name: str) -> str:
    """A name a key may bear: NFC, one line of visible characters.

    Raises:
        UsageError: empty, too long, or with characters that are not seen.
    """
    text = unicodedata.normalize("NFC", name)
    remedy = "Write the name as the session file's observer has it."
    if not text.strip() or text != text.strip():
        raise UsageError("The name of a key is empty, or begins or ends with a space.", remedy, code="name")
    if len(text) > MAX_NAME:
        raise UsageError(f"The name of a key is longer than {MAX_NAME} characters.", remedy, code="name")
    if any(unicodedata.category(letter)[0] in "CZ" and letter != " " for letter in text):
        raise UsageError("The name of a key holds characters that are not seen.", remedy, code="name")
    return text


def public_of(secret: bytes, name: str) -> PublicKey:
    """The public key of a secret one (32 bytes), under a checked name."""
    public = ed25519.public_of(secret)
    return PublicKey(name, public, ed25519.sign(secret, name_message(name, public)))


def checked(key: PublicKey, where: object) -> PublicKey:
    """The key, if its name is sound and its own.

    Raises:
        UsageError: the name is not one, another name than the holder's, or a key anybody can sign for.
    """
    checked_name(key.name)
    if ed25519.is_weak(key.public):
        raise UsageError(f"{where}: anybody can sign for this key.", "Do not use it.", code="key")
    if not ed25519.fits(key.public, key.name_signature, name_message(key.name, key.public)):
        raise UsageError(
            f"{where}: the key has not signed the name {json.dumps(key.name)}; name or key was changed.",
            "Ask for the file again, over another way.",
            code="key",
        )
    return key


def to_toml(key: PublicKey) -> str:
    """The text of the file."""
    return (
        "# A public key of Fieldbook. It holds no secret: give it to whoever checks your books and certificates,\n"
        "# and read them the fingerprint over the telephone.\n"
        f'schema = "{SCHEMA}"\n'
        f"name = {json.dumps(key.name, ensure_ascii=False)}\n"
        f'algorithm = "{ALGORITHM}"\n'
        f'fingerprint = "{spoken(key.fingerprint)}"\n'
        f"public_key = '''\n{_pem(key.public)}'''\n"
        f'name_signature = "{key.name_signature.hex()}"\n'
    )


def read_public(path: Path) -> PublicKey:
    """A public key file.

    Raises:
        UsageError: not there, no such file, or anything in it is not as it must be.
    """
    return from_toml(read_small(path, MAX_BYTES, "public key"), path)


def from_toml(text: str, where: object) -> PublicKey:
    """The key in the text of a public key file.

    Raises:
        UsageError: anything in it is not as it must be.
    """
    remedy = "Ask for the file that `fieldbook key export` writes."
    try:
        tree = toml_tree(text)
    except BadToml as problem:
        raise UsageError(f"{where} is no public key of Fieldbook: {problem}.", remedy, code="key") from None
    if tree.get("schema") != SCHEMA or set(tree) != set(_KEYS) or not all(isinstance(tree[key], str) for key in _KEYS):
        raise UsageError(f"{where} is no public key of Fieldbook ({SCHEMA}).", remedy, code="key")
    if tree["algorithm"] != ALGORITHM:
        raise UsageError(f"{where} is a key of another kind than {ALGORITHM}.", remedy, code="key")
    key = PublicKey(tree["name"], _public_of_pem(tree["public_key"], where, remedy), _signature(tree))
    if tree["fingerprint"] != spoken(key.fingerprint):
        raise UsageError(f"{where}: its fingerprint is not that of its key.", remedy, code="key")
    return checked(key, where)


def _signature(tree: Tree) -> bytes:
    try:
        return bytes.fromhex(tree["name_signature"])
    except ValueError:
        return b""


def _pem(public: bytes) -> str:
    from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey
    from cryptography.hazmat.primitives.serialization import Encoding, PublicFormat

    key = Ed25519PublicKey.from_public_bytes(public)
    return key.public_bytes(Encoding.PEM, PublicFormat.SubjectPublicKeyInfo).decode("ascii")


def _public_of_pem(text: str, where: object, remedy: str) -> bytes:
    from cryptography.exceptions import InternalError, UnsupportedAlgorithm
    from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey
    from cryptography.hazmat.primitives.serialization import load_pem_public_key

    try:
        key = load_pem_public_key(text.encode("utf-8"))
    except (ValueError, TypeError, UnsupportedAlgorithm, InternalError) as error:
        raise UsageError(f"{where} holds no readable public key.", remedy, code="key") from error
    if not isinstance(key, Ed25519PublicKey):
        raise UsageError(f"{where} holds another kind of key, not {ALGORITHM}.", remedy, code="key")
    return key.public_bytes_raw()
