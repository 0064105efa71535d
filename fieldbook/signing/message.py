"""The exact bytes that are signed, and the short form of a key that people read to each other.

    message = items, each as UTF-8 preceded by its length as 8 bytes big-endian (as the entry hash, contract section 4)

    an entry           "fieldbook.signature/1", "entry", name of the key, seq, hash of that entry
    a certificate      "fieldbook.signature/1", "certificate", name of the key, digest of the facts
    a key's own name   "fieldbook.signature/1", "key", name of the key, public key (64 hex digits)

The first two items keep a signature made for one purpose from serving another. The name is inside, because the same key
under another name would be another statement. The hash of an entry covers every entry before it, back to the first one
with the id of the book. Test vectors: tests/signing/signature_vectors.json.
"""

from __future__ import annotations

import hashlib

SCHEMA = "fieldbook.signature/1"
ALGORITHM = "Ed25519"
_FINGERPRINT = b"fieldbook.fingerprint/1"
FINGERPRINT_DIGITS = 32


def entry_message(name: str, seq: int, entry_hash: str) -> bytes:
    """What is signed of a book: its entry `seq`, and with it all entries before."""
    return _message("entry", name, str(seq), entry_hash)


def certificate_message(name: str, digest: str) -> bytes:
    """What is signed of a certificate: the digest of its facts."""
    return _message("certificate", name, digest)


def name_message(name: str, public: bytes) -> bytes:
    """What a key signs of itself: that it goes by this name."""
    return _message("key", name, public.hex())


def _message(*items: str) -> bytes:
    parts = [text.encode("utf-8") for text in (SCHEMA, *items)]
    return b"".join(len(part).to_bytes(8, "big") + part for part in parts)


def fingerprint(public: bytes) -> str:
    """32 hex digits: the first 128 bits of SHA-256 over a label and the public key.

    For people only; the program compares whole keys. To make a second key with the fingerprint of a given one takes 2^128
    trials.
    """
    return hashlib.sha256(_FINGERPRINT + public).hexdigest()[:FINGERPRINT_DIGITS]


def spoken(digits: str) -> str:
    """A fingerprint in groups of four, to be read over the telephone."""
    return " ".join(digits[start : start + 4] for start in range(0, len(digits), 4))
