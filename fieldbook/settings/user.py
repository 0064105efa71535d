"""The user's own settings: figures of the kind of fix, from field tests of one's own receivers; where copies go.

An optional file `fieldbook.toml` in the user's configuration folder (`user_file()`), one table per receiver:

    [class."0001"]                     # the receiver's serial; or "MAKER MODEL", or "MAKER MODEL SERIAL"
    horizontal_m = 0.006               # standard deviation of one epoch, east and north each
    vertical_m = 0.012
    correlation_s = 180                # correlation time of the errors
    accept_quality = [4]               # the fix qualities that were tested
    source = "own field test, 12 occupations of 2 h, May 2026"

    [backup]
    path = "/media/stick"              # file, or folder for copies under the book's name, made while recording

All keys are required, unknown ones are refused. The figures are taken only where the session states no class itself and
accepts no other quality than those tested: a test of fixed RTK says nothing of a float. They are written into the
session tree of the `occupation` entry when recording begins (`with_user_class`) and NEVER read when reducing: another
computer must make the same of the same book.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree, normalised
from fieldbook.settings.toml_lines import line_of
from fieldbook.settings.toml_text import BadToml, toml_tree
from fieldbook.settings.user_folder import user_folder
from fieldbook.settings.values import BadValue, checked, nearest

FILE_NAME = "fieldbook.toml"
MAX_BYTES = 1 << 20
TABLES = ("class", "backup")
CLASS_KEYS = {
    "horizontal_m": "positive",
    "vertical_m": "positive",
    "correlation_s": "positive",
    "accept_quality": "qualities",
    "source": "text",
}


def user_file() -> Path:
    """Where the user's settings are looked for, whether they exist or not."""
    return user_folder() / FILE_NAME


def user_classes(path: Path | None = None) -> dict[str, Tree]:
    """Name of the receiver -> its figures (numbers as typed). Empty when there is no file.

    Args:
        path: the file, `user_file()` if None.

    Raises:
        UsageError: it cannot be read, is no TOML, or holds anything that is not as it must be.
    """
    path = path or user_file()
    raw, text = _read(path)
    classes = raw.get("class", {})
    if not isinstance(classes, dict):
        raise UsageError(f"{_where(path, text, 'class')}: class must be a table.", 'Write [class."SERIAL"].')
    return _classes(classes, path, text)


def user_backup(path: Path | None = None) -> Path | None:
    """Where copies of a book go while it is recorded; None where the settings name no place.

    Raises:
        UsageError: as `user_classes`; the path is not absolute.
    """
    path = path or user_file()
    raw, text = _read(path)
    table = raw.get("backup")
    if table is None:
        return None
    where, remedy = _where(path, text, "backup"), 'Write path = "..." below [backup], with the whole path.'
    if not isinstance(table, dict) or set(table) != {"path"} or not isinstance(table["path"], str):
        unknown = [key for key in table if key != "path"] if isinstance(table, dict) else []
        raise UsageError(f"{where}: [backup] holds {unknown[0] if unknown else 'no path'}.", remedy)
    place = Path(table["path"]).expanduser()
    if not place.is_absolute():
        raise UsageError(f"{where}: {table['path']} is no whole path.", remedy)
    return place


def _read(path: Path) -> tuple[Tree, str]:
    """The tables of the file and its text; empty when there is no file.

    Raises:
        UsageError: it cannot be read, is no TOML, or has other tables.
    """
    try:
        if not path.exists():
            return {}, ""
        if path.stat().st_size > MAX_BYTES:
            raise UsageError(f"{path} is larger than 1 MB and no settings file.", "Look at it, or move it away.")
        text = path.read_bytes().decode("utf-8-sig")
        raw = toml_tree(text)
    except OSError as problem:
        raise UsageError(
            f"The user's settings {path} cannot be read: {problem.strerror or problem}.",
            "Correct its permissions, or move it away.",
        ) from None
    except UnicodeDecodeError:
        raise UsageError(f"{path} is no text file.", "Write it anew, or move it away.") from None
    except BadToml as problem:
        raise UsageError(f"{path} is no valid TOML: {problem}.", "Correct that line.") from None
    for name, value in raw.items():
        if name not in TABLES:
            inner = next((f"{name}.{key}" for key in value), name) if isinstance(value, dict) else name
            raise UsageError(
                f'{_where(path, text, inner)}: there is no table or key "{name}" in the user\'s settings.'
                f"{nearest(name, ['class'])}",
                "Rename or remove it.",
            )
    return raw, text


def _classes(classes: Tree, path: Path, text: str) -> dict[str, Tree]:
    result: dict[str, Tree] = {}
    known: dict[str, str] = {}
    for name, keys in classes.items():
        where = _where(path, text, f"class.{name}")
        if not isinstance(keys, dict):
            raise UsageError(
                f'{where}: class."{name}" must be a table.', 'Write [class."SERIAL"] and its keys below it.'
            )
        if _plain(name) in known or not _plain(name):
            other = known.get(_plain(name), "an empty name")
            raise UsageError(f'{where}: "{name}" and "{other}" are the same receiver.', "Keep one of them.")
        known[_plain(name)] = name
        result[name] = _figures(name, keys, path, text)
    return result


def _figures(name: str, keys: Tree, path: Path, text: str) -> Tree:
    table = f"class.{name}"
    found: Tree = {}
    for key, value in keys.items():
        if key not in CLASS_KEYS:
            raise UsageError(
                f'{_where(path, text, table, key)}: there is no key "{key}" in [class."{name}"].'
                f"{nearest(key, CLASS_KEYS)}",
                "Rename or remove it.",
            )
        try:
            found[key] = checked(CLASS_KEYS[key], value, stored=False)
        except BadValue as problem:
            where = _where(path, text, table, key)
            raise UsageError(
                f'{where}: {key} of [class."{name}"] {problem}.'.replace("..", "."), "Correct the value."
            ) from None
    for key in CLASS_KEYS:
        if key not in found:
            raise UsageError(
                f'{_where(path, text, table)}: {key} is missing in [class."{name}"].',
                "Write it; it has no default.",
            )
    return found


def _where(path: Path, text: str, table: str, key: str | None = None) -> str:
    # the scan knows headers without quotes and spaces
    line = line_of(text, table.replace('"', "").replace(" ", ""), key)
    return f"{path}, line {line}" if line else str(path)


def _plain(name: str) -> str:
    return " ".join(name.split()).casefold()


def with_user_class(session_tree: Tree, path: Path | None = None) -> Tree:
    """The session tree with the user's figures for its receiver put in as `receiver.class`, or unchanged.

    Unchanged when the session states a class, when no table names its receiver (the most specific name wins: maker,
    model and serial; serial; maker and model), or when the session accepts a quality that was not tested.

    Args:
        session_tree: canonical tree of a session (`Session.tree`).
        path: the settings file, `user_file()` if None.

    Raises:
        UsageError: as `user_classes`.
    """
    receiver: dict[str, Any] = session_tree.get("receiver", {})
    if "class" in receiver:
        return session_tree
    found = _matching(receiver, user_classes(path))
    if found is None:
        return session_tree
    name, figures = found
    if not set(session_tree["requirement"]["accept_quality"]) <= set(figures["accept_quality"]):
        return session_tree
    stated = {key: figures[key] for key in ("horizontal_m", "vertical_m", "correlation_s")}
    stated["source"] = f'{figures["source"]} (user settings, "{name}")'
    with_class: Tree = normalised({**session_tree, "receiver": {**receiver, "class": stated}})
    return with_class


def _matching(receiver: Tree, classes: dict[str, Tree]) -> tuple[str, Tree] | None:
    maker, model, serial = (str(receiver.get(key, "")) for key in ("maker", "model", "serial"))
    names = []
    if maker and model and serial:
        names.append(f"{maker} {model} {serial}")
    if serial:
        names.append(serial)
    if maker and model:
        names.append(f"{maker} {model}")
    by_name = {_plain(name): (name, figures) for name, figures in classes.items()}
    return next((by_name[_plain(name)] for name in names if _plain(name) in by_name), None)
