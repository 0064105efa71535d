"""The published test vector of chain and canonical bytes (contract, section 4), and that it is what a book writes.

`chain_vector.json` was computed by `hashlib` and `struct` alone (see `_independent_hash`), without the product's code.
"""

from __future__ import annotations

import hashlib
import json
import struct
from pathlib import Path

import small_books as small

from fieldbook.model.canonical import canonical_json
from fieldbook.model.entry import Entry, entry_hash
from fieldbook.model.item import Item, ItemKind, canonical_items, parse_items

VECTOR = json.loads((Path(__file__).parent / "chain_vector.json").read_text(encoding="utf-8"))


def _independent_hash(texts: list[str]) -> str:
    total = hashlib.sha256()
    for text in texts:
        data = text.encode("utf-8")
        total.update(struct.pack(">Q", len(data)) + data)
    return total.hexdigest()


def test_canonical_bodies() -> None:
    for entry in VECTOR["entries"]:
        assert canonical_json(entry["body"]) == entry["body_text"]
        assert canonical_json(json.loads(entry["body_text"])) == entry["body_text"]


def test_hashes_of_entries() -> None:
    previous = "0" * 64
    for entry in VECTOR["entries"]:
        fields = [entry[key] for key in ("utc", "kind", "body_text", "observer", "previous_hash")]
        assert entry["previous_hash"] == previous
        assert entry_hash(entry["seq"], *fields) == entry["hash"]
        assert _independent_hash([str(entry["seq"]), *fields]) == entry["hash"]
        previous = entry["hash"]


def test_raw_chunk() -> None:
    chunk = VECTOR["raw_chunk"]
    items = [
        Item(ItemKind(item["kind"]), bytes.fromhex(item["data_hex"]), item["monotonic_ms"], item["utc_ms"])
        for item in chunk["items"]
    ]
    plain = canonical_items(items)
    assert plain.hex() == chunk["canonical_hex"]
    assert hashlib.sha256(plain).hexdigest() == chunk["sha256"]
    assert list(parse_items(plain)) == items


def test_a_book_writes_this_chain(tmp_path: Path) -> None:
    with small.begun(tmp_path / "a.book") as book:
        book.append("remark", {"occupation": 1, "text": "Wind aus Südwest, 鳥 \u2028 ok"}, "J. Ørsted")
        for entry in book.entries():
            assert entry.expected_hash() == entry.hash
            text = canonical_json(entry.body)
            assert (
                _independent_hash([str(entry.seq), entry.utc, entry.kind, text, entry.observer, entry.previous_hash])
                == entry.hash
            )
            assert isinstance(entry, Entry)
