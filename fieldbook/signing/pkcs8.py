"""A secret key as PKCS#8 PEM (RFC 5208, RFC 8410), readable by other programs too.

With a passphrase: PBES2 (RFC 8018) of PBKDF2 with HMAC-SHA-256 and AES-256-CBC. `cryptography` would write the same with
2,048 rounds and has no setting for it, so the few bytes around the cipher text are put together here: every length in them
is fixed. 600,000 rounds: a working value, about 0.2 s on a laptop.
"""

from __future__ import annotations

import base64
import os
import re
import unicodedata

from fieldbook.errors import UsageError

from .ed25519 import SECRET_BYTES

ROUNDS = 600_000
MOST_ROUNDS = 10_000_000  # a hostile file could ask for hours
PLAIN, ENCRYPTED = "PRIVATE KEY", "ENCRYPTED PRIVATE KEY"
_BLOCK = re.compile(r"-----BEGIN ([A-Z0-9 ]+)-----\n[A-Za-z0-9+/=\n]*-----END \1-----\n?")
# RFC 8410, 7: SEQUENCE { INTEGER 0, SEQUENCE { OID 1.3.101.112 }, OCTET STRING { OCTET STRING (32) } }
_PLAIN_HEAD = bytes.fromhex("302e020100300506032b657004220420")
_PBKDF2 = bytes.fromhex("06092a864886f70d01050c")
_PBES2 = bytes.fromhex("06092a864886f70d01050d")
_HMAC_SHA256 = bytes.fromhex("300c06082a864886f70d02090500")
_AES_256_CBC = bytes.fromhex("060960864801650304012a")


class WrongPassphrase(UsageError):
    """The passphrase does not open the key."""

    default_code = "passphrase"


def block_of(text: str) -> str | None:
    """The one PEM block in a text; None if there is none, or more than one."""
    found = [match[0] for match in _BLOCK.finditer(text.replace("\r\n", "\n"))]
    return found[0] if len(found) == 1 else None


def is_encrypted(block: str) -> bool:
    """Whether a PEM block asks for a passphrase."""
    return f"BEGIN {ENCRYPTED}" in block


def written(secret: bytes, passphrase: str | None) -> str:
    """A secret key (32 bytes) as PEM text, encrypted if there is a passphrase."""
    plain = _PLAIN_HEAD + secret
    if passphrase is None:
        return _pem(PLAIN, plain)
    salt, start = os.urandom(16), os.urandom(16)
    cipher_text = _encrypted(plain, passphrase, salt, start)
    kdf = _sequence(_PBKDF2 + _sequence(_octets(salt) + _integer(ROUNDS) + _HMAC_SHA256))
    scheme = _sequence(_AES_256_CBC + _octets(start))
    return _pem(ENCRYPTED, _sequence(_sequence(_PBES2 + _sequence(kdf + scheme)) + _octets(cipher_text)))


def read(block: str, passphrase: str | None, where: object) -> bytes:
    """The secret key (32 bytes) of a PEM block.

    Raises:
        WrongPassphrase: it is encrypted, and the passphrase is missing or wrong.
        UsageError: another kind of key, damaged, or a cost no key of ours has.
    """
    from cryptography.exceptions import InternalError, UnsupportedAlgorithm
    from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey
    from cryptography.hazmat.primitives.serialization import load_pem_private_key

    encrypted = is_encrypted(block)
    if encrypted:
        if not passphrase:
            raise WrongPassphrase(f"The key {where} asks for its passphrase.", "Give the passphrase.")
        _check_rounds(block, where)
    try:
        key = load_pem_private_key(block.encode("ascii"), _bytes(passphrase) if encrypted and passphrase else None)
    except (ValueError, TypeError, UnsupportedAlgorithm, InternalError) as error:
        if encrypted:
            raise WrongPassphrase(
                f"The passphrase does not open {where}, or the file is damaged.", "Try again."
            ) from error
        raise UsageError(
            f"{where} is damaged: it holds no readable key.", "Use a copy of the key.", code="key"
        ) from error
    if not isinstance(key, Ed25519PrivateKey):
        raise UsageError(
            f"{where} holds another kind of key, not Ed25519.", "Make one with `fieldbook key new`.", code="key"
        )
    return key.private_bytes_raw()


def _bytes(passphrase: str) -> bytes:
    """NFC, because two keyboards may spell the same letter differently."""
    return unicodedata.normalize("NFC", passphrase).encode("utf-8")


def _check_rounds(block: str, where: object) -> None:
    data = _der(block)
    place = data.find(_PBKDF2)
    salt = data[place + len(_PBKDF2) + 2 : place + len(_PBKDF2) + 4]
    rounds = 0
    if place >= 0 and len(salt) == 2 and salt[0] == 4:
        number = place + len(_PBKDF2) + 4 + salt[1]
        if data[number : number + 1] == b"\x02":
            size = data[number + 1]
            rounds = int.from_bytes(data[number + 2 : number + 2 + size], "big")
    if not 0 < rounds <= MOST_ROUNDS:
        raise UsageError(
            f"{where} is encrypted in a way Fieldbook does not open.",
            f"Use PBKDF2 with at most {MOST_ROUNDS} rounds, or make a key with `fieldbook key new`.",
            code="key",
        )


def _der(block: str) -> bytes:
    try:
        return base64.b64decode("".join(block.splitlines()[1:-1]), validate=True)
    except ValueError:
        return b""


def _encrypted(plain: bytes, passphrase: str, salt: bytes, start: bytes) -> bytes:
    from cryptography.hazmat.primitives import hashes
    from cryptography.hazmat.primitives.ciphers import Cipher, algorithms, modes
    from cryptography.hazmat.primitives.kdf.pbkdf2 import PBKDF2HMAC
    from cryptography.hazmat.primitives.padding import PKCS7

    key = PBKDF2HMAC(hashes.SHA256(), SECRET_BYTES, salt, ROUNDS).derive(_bytes(passphrase))
    padder, encryptor = PKCS7(128).padder(), Cipher(algorithms.AES(key), modes.CBC(start)).encryptor()
    return encryptor.update(padder.update(plain) + padder.finalize()) + encryptor.finalize()


def _tagged(tag: int, content: bytes) -> bytes:
    size = len(content)
    length = bytes([size]) if size < 0x80 else bytes([0x81, size])
    return bytes([tag]) + length + content


def _sequence(content: bytes) -> bytes:
    return _tagged(0x30, content)


def _octets(content: bytes) -> bytes:
    return _tagged(0x04, content)


def _integer(value: int) -> bytes:
    return _tagged(0x02, value.to_bytes(value.bit_length() // 8 + 1, "big"))


def _pem(label: str, data: bytes) -> str:
    text = base64.b64encode(data).decode("ascii")
    lines = [text[start : start + 64] for start in range(0, len(text), 64)]
    return "\n".join([f"-----BEGIN {label}-----", *lines, f"-----END {label}-----", ""])
