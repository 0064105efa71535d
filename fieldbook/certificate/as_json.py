"""The facts as a JSON file: keys sorted, two spaces, UTF-8. Equal facts give equal bytes.

What cannot be seen is written as JSON escapes: the same text to a program, and nothing that turns a line on a terminal.
"""

from __future__ import annotations

import json

from fieldbook.model.canonical import Tree, normalised
from fieldbook.model.visible import is_hidden


def render(facts: Tree) -> bytes:
    """The sealed facts, readable by people and programs."""
    text = json.dumps(normalised(facts), ensure_ascii=False, sort_keys=True, indent=2, allow_nan=False)
    return ("".join(_escaped(char) if char != "\n" and is_hidden(char) else char for char in text) + "\n").encode(
        "utf-8"
    )


def _escaped(char: str) -> str:
    """As JSON writes it: by its UTF-16 units."""
    return json.dumps(char)[1:-1]
