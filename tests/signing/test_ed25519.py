"""The primitive against RFC 8032's own vectors and against a second, slow implementation (`edwards.py`)."""

from __future__ import annotations

import random

import edwards
import pytest

from fieldbook.signing import ed25519

# RFC 8032, 7.1: TEST 1, TEST 2, TEST 3 (secret key, public key, message, signature)
RFC_8032 = (
    (
        "9d61b19deffd5a60ba844af492ec2cc44449c5697b326919703bac031cae7f60",
        "d75a980182b10ab7d54bfed3c964073a0ee172f3daa62325af021a68f707511a",
        "",
        "e5564300c360ac729086e2cc806e828a84877f1eb8e5d974d873e065224901555fb8821590a33bacc61e39701cf9b46bd25bf5f0595bbe24"
        "655141438e7a100b",
    ),
    (
        "4ccd089b28ff96da9db6c346ec114e0f5b8a319f35aba624da8cf6ed4fb8a6fb",
        "3d4017c3e843895a92b70aa74d1b7ebc9c982ccf2ec4968cc0cd55f12af4660c",
        "72",
        "92a009a9f0d4cab8720e820b5f642540a2b27b5416503f8fb3762223ebdb69da085ac1e43e15996e458f3613d0f11d8c387b2eaeb4302aee"
        "b00d291612bb0c00",
    ),
    (
        "c5aa8df43f9f837bedb7442f31dcb7b166d38535076f094b85ce3a2e0b4458f7",
        "fc51cd8e6218a1a38da47ed00230f0580816ed13ba3303ac5deb911548908025",
        "af82",
        "6291d657deec24024827e69c3abe01a30ce548a284743a445e3680d7db5ac3ac18ff9b538d16f290ae67f760984dc6594a7c15e9716ed28d"
        "c027beceea1ec40a",
    ),
)


@pytest.mark.parametrize("vector", RFC_8032)
def test_the_vectors_of_rfc_8032(vector: tuple[str, str, str, str]) -> None:
    secret, public, message, signature = (bytes.fromhex(text) for text in vector)
    assert ed25519.public_of(secret) == public == edwards.public_of(secret)
    assert ed25519.sign(secret, message) == signature == edwards.sign(secret, message)
    assert ed25519.fits(public, signature, message)
    assert not ed25519.fits(public, signature, message + b"\0")
    assert not ed25519.is_weak(public)


def test_a_second_implementation_signs_the_same() -> None:
    chance = random.Random(8032)
    for size in (0, 1, 63, 64, 65, 300):
        secret, message = chance.randbytes(32), chance.randbytes(size)
        assert ed25519.sign(secret, message) == edwards.sign(secret, message)


def test_any_flipped_bit_is_found() -> None:
    secret, public, message, signature = (bytes.fromhex(text) for text in RFC_8032[2])
    for place in range(512):
        flipped = bytearray(signature)
        flipped[place // 8] ^= 1 << place % 8
        assert not ed25519.fits(public, bytes(flipped), message)
    for place in range(256):
        other = bytearray(public)
        other[place // 8] ^= 1 << place % 8
        assert not ed25519.fits(bytes(other), signature, message)
    assert secret


def test_a_second_form_of_a_signature_is_refused() -> None:
    """RFC 8032, 5.1.7: S must be below the order of the group, else a signature could be changed and still fit."""
    _, public, message, signature = (bytes.fromhex(text) for text in RFC_8032[1])
    larger = int.from_bytes(signature[32:], "little") + edwards.L
    assert not ed25519.fits(public, signature[:32] + larger.to_bytes(32, "little"), message)


@pytest.mark.parametrize("size", [0, 31, 33, 64])
def test_keys_and_signatures_of_another_length_do_not_fit(size: int) -> None:
    assert not ed25519.fits(bytes(size), bytes(64), b"")
    assert not ed25519.fits(bytes.fromhex(RFC_8032[0][1]), bytes(size) if size != 64 else bytes(65), b"")


def test_keys_that_anybody_can_sign_for_are_known() -> None:
    encodings = edwards.small_encodings()
    assert len(encodings) >= 8
    assert all(ed25519.is_weak(public) for public in encodings)
    # Why it matters: a signature made without any secret fits them, for one message in `order`. Where the library does not
    # read an encoding at all, nothing fits it.
    forged = [
        any(ed25519.fits(public, bytes([1]) + bytes(63), bytes([9, number])) for number in range(64))
        for public in encodings
    ]
    assert sum(forged) >= 8


def test_a_new_key_is_another_one_each_time() -> None:
    secrets = {ed25519.new_secret() for _ in range(20)}
    assert len(secrets) == 20
    assert not any(ed25519.is_weak(ed25519.public_of(secret)) for secret in secrets)
