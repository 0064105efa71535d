"""Ed25519 (RFC 8032) through the package `cryptography`, which is loaded at the first call and not before."""

from __future__ import annotations

SECRET_BYTES = 32
PUBLIC_BYTES = 32
SIGNATURE_BYTES = 64
# RFC 8032, 5.1: the field and the curve -x^2 + y^2 = 1 + d x^2 y^2
_P = 2**255 - 19
_D = -121665 * pow(121666, -1, _P) % _P


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
    from cryptography.exceptions import InternalError, InvalidSignature
    from cryptography.hazmat.primitives.asymmetric.ed25519 import Ed25519PublicKey

    if len(public) != PUBLIC_BYTES or len(signature) != SIGNATURE_BYTES:
        return False
    try:
        Ed25519PublicKey.from_public_bytes(public).verify(signature, message)
    except (InvalidSignature, ValueError, InternalError):
        return False
    return True


def is_weak(public: bytes) -> bool:
    """Whether anybody can sign for this key: its point has an order that divides 8, so that no secret stands behind it.

    RFC 8032, 5.1.7 lets such keys pass, and so does the library. By the curve's equation and its doubling: the neutral point
    and that of order 2 have y^2 = 1, those of order 4 (double: y = -1) have y = 0, those of order 8 (double: y = 0) have
    x^2 = -y^2 and so d y^4 + 2 y^2 = 1.
    """
    y = int.from_bytes(public, "little") & (2**255 - 1)
    square = y * y % _P
    return square in (0, 1) or (_D * square * square + 2 * square - 1) % _P == 0
