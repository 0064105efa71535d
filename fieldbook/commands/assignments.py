"""`--set key=value`: keys and values typed on the command line, by the same table of keys as a session file.

A key is `name` in the command's own table, or dotted as in a session file: `antenna.serial`,
`antenna.arp_to_phase_centre_m.up`. A value is taken as typed; a list or an inline table is written as in TOML.
"""

from __future__ import annotations

from collections.abc import Iterable
from decimal import Decimal
from typing import Any

from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree, normalised
from fieldbook.settings.schema import REQUIRED, TABLES
from fieldbook.settings.toml_text import BadToml, toml_tree
from fieldbook.settings.values import nearest, value_from_text


def pairs(texts: Iterable[str]) -> list[tuple[str, str]]:
    """`key=value` texts, split.

    Raises:
        UsageError: no `=`, no key, or the same key twice.
    """
    found: dict[str, str] = {}
    for text in texts:
        key, sign, value = text.partition("=")
        key = key.strip()
        if not sign or not key:
            raise UsageError(f'--set "{text}" is no key=value.', "Write for example --set value=1.532.")
        if key in found:
            raise UsageError(f"--set {key} is given twice.", "Give each key once.")
        found[key] = value
    return list(found.items())


def in_table(table: str, texts: Iterable[str], base: Tree | None = None) -> Tree:
    """The keys of one table, checked, put into a copy of `base`.

    Raises:
        UsageError: an unknown key (the nearest is named), or a value that is not of its kind.
    """
    result: Tree = dict(base or {})
    for key, text in pairs(texts):
        put(result, table, key, text)
    return result


def require(table: str, tree: Tree) -> None:
    """Refuse a table in which a required key is missing.

    Raises:
        UsageError: naming the key.
    """
    for key in REQUIRED.get(table, ()):
        if key not in tree:
            kind = TABLES[table][key]
            takes = f" It takes {kind.removeprefix('words:').replace('|', ', ')}." if kind.startswith("words:") else ""
            raise UsageError(f"{key} is missing.{takes}", f"Add --set {key}=...")


def complete(table: str, tree: Tree) -> None:
    """Refuse inline tables of which a part is missing (a latitude without a longitude).

    Raises:
        UsageError: naming the part.
    """
    for key, kind in TABLES[table].items():
        inner = kind.removeprefix("inline:")
        if inner != kind and key in tree:
            for part in REQUIRED.get(inner, ()):
                if part not in tree[key]:
                    raise UsageError(f"{key}.{part} is missing.", f"Add --set {key}.{part}=...")


def put(tree: Tree, table: str, dotted: str, text: str) -> None:
    """Put one typed value into the tree of a table."""
    key, _, inner = dotted.partition(".")
    kinds = TABLES[table]
    if key not in kinds:
        raise UsageError(f'There is no key "{key}" in [{table}].{nearest(key, kinds)}', "Correct the key.")
    kind = kinds[key]
    if kind.startswith("inline:") and inner:
        changed = dict(tree.get(key, {}))
        put(changed, kind.removeprefix("inline:"), inner, text)
        tree[key] = changed
    elif inner:
        raise UsageError(f'"{key}" in [{table}] has no parts.', f"Write --set {key}=...")
    elif ":" in kind and not kind.startswith("words:"):
        tree[key] = _nested(kind, dotted, _toml(dotted, text))
    elif kind in ("qualities", "vector3"):
        tree[key] = normalised(_toml(dotted, text))
    elif kind == "integer":
        tree[key] = _integer(dotted, text)
    else:
        tree[key] = value_from_text(kind, text, dotted)


def _integer(where: str, text: str) -> Any:
    if not (text.isascii() and text.isdigit()):
        raise UsageError(f"{where} needs a whole number, not {text}.", "Correct the value.")
    return value_from_text("integer", text, where)


def _nested(kind: str, where: str, value: Any) -> Any:
    table = kind.partition(":")[2]
    if kind.startswith("list:"):
        if not isinstance(value, list):
            raise UsageError(f"{where} needs a list of tables.", f"Write --set {where}='[{{ ... }}]' as in TOML.")
        return [_nested("inline:" + table, where, item) for item in value]
    if not isinstance(value, dict):
        raise UsageError(f"{where} needs a table.", f"Write --set {where}='{{ ... }}' as in TOML.")
    tree: Tree = {}
    for key, item in value.items():
        put(tree, table, key, str(item) if isinstance(item, str | Decimal | int) else repr(item))
    require(table, tree)
    return tree


def _toml(where: str, text: str) -> Any:
    try:
        return toml_tree(f"value = {text}")["value"]
    except (BadToml, KeyError):
        raise UsageError(
            f"{where} is not written as in TOML: {text}.", "Write a list or table as in a session file."
        ) from None
