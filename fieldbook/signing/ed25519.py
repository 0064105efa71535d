"""Ed25519 (RFC 8032) through the package `cryptography`, which is loaded at the first call and not before."""

from __future__ import annotations

SECRET_BYTES = 32
PUBLIC_BYTES = 32
SIGNATURE_BYTES = 64
# A signature that takes no secret: R is the neutral point, S is zero. RFC 8032, 5.1.7 accepts it for a message whose hash
# is a multiple of the order of the public point, so for one message in eight (or more) where that order is 8 or less.
_MADE_BY_NOBODY = bytes([1]) + bytes(63)
_TRIES = 128


def new_secret() -> bytes:
    """A new secret key (seed, 32 bytes) from the system's generator."""
    from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey

    return Ed25519PrivateKey.generate().private_bytes_raw()


def public_of(secret: bytes) -> bytes:
    """The public key (32 bytes) of a secret key (32 bytes)."""
    from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey

    return Ed25519PrivateKey.from_private_bytes(secret).public_key().public_bytes_raw()


def sign(secret: bytes, message: bytes) -> bytes:
    """The signature (64 bytes) of a message; the same key and message always give the same one (RFC 8032, 5.1.6)."""
    from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PrivateKey

    return Ed25519PrivateKey.from_private_bytes(secret).sign(message)


def fits(public: bytes, signature: bytes, message: bytes) -> bool:
    """Whether a signature was made over this message by the holder of the key; False for anything that is no signature."""
    from cryptography.exceptions import InvalidSignature
    from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey

    if len(public) != PUBLIC_BYTES or len(signature) != SIGNATURE_BYTES:
        return False
    try:
        Ed25519PublicKey.from_public_bytes(public).verify(signature, message)
    except (InvalidSignature, ValueError):
        return False
    return True


def is_weak(public: bytes) -> bool:
    """Whether anybody can sign for this key: its point has an order of 8 or less, so that no secret stands behind it.

    Tried rather than compared with a list: the signature that takes no secret is put to 128 messages. A point of order 8
    passes all of them with probability (7/8)^128 = 4e-8; the messages are fixed, and tests hold all such encodings.
    """
    return any(fits(public, _MADE_BY_NOBODY, bytes([number])) for number in range(_TRIES))
