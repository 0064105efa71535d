"""The facts as a JSON file: keys sorted, two spaces, UTF-8. Equal facts give equal bytes."""

from __future__ import annotations

import json

from fieldbook.model.canonical import Tree, normalised


def render(facts: Tree) -> bytes:
    """The sealed facts, readable by people and programs."""
    text = json.dumps(normalised(facts), ensure_ascii=False, sort_keys=True, indent=2, allow_nan=False)
    return (text + "\n").encode("utf-8")
