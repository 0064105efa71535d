"""At which line of a TOML text a table or key stands, so that an error can point at it.

`tomllib` gives values without places. This scan reads only what our tables use: headers, and keys at the start of a
line or inside an inline table. It returns None rather than a wrong line when it is not sure.
"""

from __future__ import annotations

import re

_HEADER = re.compile(r"^\s*\[{1,2}\s*([A-Za-z0-9_.\-\s\"]+?)\s*\]{1,2}\s*(#.*)?$")


def line_of(text: str, table: str, key: str | None = None) -> int | None:
    """1-based line of a key within a table (the first such), or of the table itself.

    Args:
        text: the TOML text.
        table: dotted name as in `schema.TABLES`; a top-level key has itself as table.
        key: the key, or None for the table.
    """
    parent, _, inline_key = table.rpartition(".")
    here, first_of_table = "", None
    for number, line in enumerate(text.splitlines(), start=1):
        header = _HEADER.match(line)
        if header:
            here = header.group(1).replace('"', "").replace(" ", "")
            if here == table and first_of_table is None:
                first_of_table = number
            continue
        if key is not None and here == table and _has_key(line, key):
            return number
        if inline_key and here == parent and _has_key(line, inline_key):
            if key is None or re.search(rf"[{{,]\s*\"?{re.escape(key)}\"?\s*=", line):
                return number
            first_of_table = first_of_table or number
        if key is None and here == "" and _has_key(line, table):
            return number
    return first_of_table


def _has_key(line: str, key: str) -> bool:
    return re.match(rf"^\s*\"?{re.escape(key)}\"?\s*=", line) is not None
