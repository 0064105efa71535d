"""The signature of a certificate: a block beside the facts, over their digest, by a key.

The facts do not change with it: `signature` stands at the top of the JSON like `digest`, outside of what is digested, and
in the `certificate` entry beside the facts, so that the same bytes are rendered without the key. A sign-off is the
statement of a licensed person and is among the facts; a signature says that the holder of a key stood for these facts.
Drafts are not signed: a draft is nobody's statement. Names come from the file and are hostile.
"""

from __future__ import annotations

import re

from fieldbook.certificate.printable import printable
from fieldbook.model.canonical import Tree
from fieldbook.signing import ed25519
from fieldbook.signing.keyring import Trust
from fieldbook.signing.message import ALGORITHM, certificate_message, fingerprint, spoken

Line = tuple[bool, str]
KEY = "signature"
_HEX = re.compile(r"[0-9a-f]+")
_PARTS = {"name", "algorithm", "public_key", "fingerprint", "signature"}


def signature_row(facts: Tree) -> tuple[str, str]:
    """What the paper says of its signature."""
    block = facts.get(KEY)
    if block is None:
        return "Digital signature", "unsigned"
    return (
        "Digital signature",
        f"{block['algorithm']} over the digest, by the key that calls itself {block['name']}, fingerprint "
        f"{spoken(block['fingerprint'])}. It is no sign-off, and it states no time.",
    )


def cautions(facts: Tree) -> list[str]:
    """The cautions of the facts; of a signed file the last one is put as it is true of it."""
    found = list(facts["cautions"])
    if facts.get(KEY) is not None:
        found.append(
            "This file is signed: for whoever knows that the key is the signer's, the file alone shows that it is unchanged "
            "since it was signed."
        )
    return found


def signature_lines(facts: Tree, trust: Trust) -> list[Line]:
    """What the signature of a file shows; none for an unsigned one."""
    if KEY not in facts:
        return []
    block = facts[KEY]
    if not isinstance(block, dict) or set(block) != _PARTS or not all(isinstance(item, str) for item in block.values()):
        return [(False, "Its signature is damaged.")]
    if block["algorithm"] != ALGORITHM:
        return [(False, f"Its signature is of a kind this version does not know ({printable(block['algorithm'])}).")]
    public, signature = _bytes(block["public_key"]), _bytes(block["signature"])
    who = f"the key that calls itself {printable(block['name'])}, fingerprint {spoken(fingerprint(public))}"
    if block["fingerprint"] != fingerprint(public) or ed25519.is_weak(public):
        return [(False, "Its signature is of a key that is none.")]
    if not ed25519.fits(public, signature, certificate_message(block["name"], str(facts.get("digest")))):
        return [(False, f"Its signature was not made over these facts by {who}.")]
    standing = trust.standing(block["name"], public)
    if standing.trusted:
        return [(True, f"Unchanged since it was signed by {who}; {standing.value}. A signature states no time.")]
    if standing.suspicious:
        return [
            (False, f"Signed by {who}; {standing.value}. Ask that person for the fingerprint before you rely on it.")
        ]
    return [
        (
            True,
            f"Signed by {who}; {standing.value}: it is unchanged since whoever holds that key signed it. "
            "Ask for the fingerprint, then `fieldbook key trust FILE`.",
        )
    ]


def _bytes(text: str) -> bytes:
    return bytes.fromhex(text) if len(text) in (64, 128) and _HEX.fullmatch(text) else b""
