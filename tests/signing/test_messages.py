"""The signed bytes and the fingerprint are published: `signature_vectors.json`, made with `struct`, `hashlib` and `edwards`."""

from __future__ import annotations

import hashlib
import json
import struct
from pathlib import Path

import edwards
import pytest

from fieldbook.signing import ed25519
from fieldbook.signing.message import certificate_message, entry_message, fingerprint, name_message, spoken
from fieldbook.signing.signer import Signer

VECTORS = json.loads((Path(__file__).parent / "signature_vectors.json").read_text(encoding="utf-8"))


def independent(items: list[str]) -> bytes:
    return b"".join(struct.pack(">Q", len(item.encode())) + item.encode() for item in items)


def product(vector: dict) -> bytes:
    name, values = vector["items"][2], vector["items"][3:]
    if vector["what"] == "entry":
        return entry_message(name, int(values[0]), values[1])
    if vector["what"] == "certificate":
        return certificate_message(name, values[0])
    return name_message(name, bytes.fromhex(values[0]))


@pytest.mark.parametrize("vector", VECTORS["signatures"], ids=lambda vector: vector["what"])
def test_the_published_bytes(vector: dict) -> None:
    secret = bytes.fromhex(VECTORS["secret_key"])
    message = bytes.fromhex(vector["message"])
    assert product(vector) == message == independent(vector["items"])
    assert ed25519.sign(secret, message).hex() == vector["signature"] == edwards.sign(secret, message).hex()


def test_the_published_fingerprint() -> None:
    public = bytes.fromhex(VECTORS["public_key"])
    assert ed25519.public_of(bytes.fromhex(VECTORS["secret_key"])) == public
    assert fingerprint(public) == VECTORS["fingerprint"]
    assert hashlib.sha256(b"fieldbook.fingerprint/1" + public).hexdigest()[:32] == VECTORS["fingerprint"]
    assert spoken(VECTORS["fingerprint"]).replace(" ", "") == VECTORS["fingerprint"]
    assert len(spoken(VECTORS["fingerprint"]).split(" ")) == 8


def test_bodies_are_what_is_published() -> None:
    secret = bytes.fromhex(VECTORS["secret_key"])
    made = Signer(VECTORS["name"], ed25519.public_of(secret), secret)
    entry, certificate = VECTORS["signatures"][0], VECTORS["signatures"][1]
    assert made.entry_signature(int(entry["items"][3]), entry["items"][4])["signature"] == entry["signature"]
    assert made.certificate_signature(certificate["items"][3])["signature"] == certificate["signature"]


def test_the_secret_is_not_in_what_is_printed_of_a_signer() -> None:
    secret = bytes.fromhex(VECTORS["secret_key"])
    text = repr(Signer("R. Kell", ed25519.public_of(secret), secret))
    assert "secret" not in text
    assert str(secret) not in text
