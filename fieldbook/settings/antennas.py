"""The user's own antennas: a folder `antennas/` of the configuration folder, one small TOML file each.

    [antenna]
    model = "DEMO-A1 NONE"             # type and radome
    serial = "0001"                    # absent: any of the type
    slant_radius_m = 0.1500            # dimensions as in a session file
    slant_mark_above_arp_m = 0.0300
    source = "maker's drawing, sheet 2"
    arp_to_phase_centre_m = { ... }    # typed in, with offset_frequency; or
    [antenna.calibration]              # frozen from an ANTEX file: file, sha256, block (a list of lines)

A session takes one with `antenna.listed = "NAME"`; its values go into the session tree then, and the list is never read
at reduction. `fieldbook antenna add` writes these files; they may be edited by hand.
"""

from __future__ import annotations

import json
import re
from pathlib import Path
from typing import Any

from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree
from fieldbook.settings.antenna_source import LISTED_KEYS
from fieldbook.settings.toml_text import BadToml, toml_tree
from fieldbook.settings.user_folder import user_folder
from fieldbook.settings.values import nearest

MAX_BYTES = 2 << 20
_NAME = re.compile(r"[A-Za-z0-9][A-Za-z0-9._+-]{0,63}")


def antennas_folder() -> Path:
    """Where the list is kept, whether it exists or not."""
    return user_folder() / "antennas"


def antenna_path(name: str) -> Path:
    """The file of a name.

    Raises:
        UsageError: a name that is no plain word.
    """
    if not _NAME.fullmatch(name) or name.endswith("."):
        raise UsageError(
            f'"{name[:70]}" is no name for the antenna list.',
            "Use letters, digits, point, hyphen; begin with a letter.",
        )
    return antennas_folder() / f"{name}.toml"


def listed_names() -> list[str]:
    """Names of the list, sorted."""
    folder = antennas_folder()
    return sorted(path.stem for path in folder.glob("*.toml")) if folder.is_dir() else []


def listed_antenna(name: str) -> Tree:
    """Keys of `[antenna]` as listed under a name, the block of a calibration as one text.

    Raises:
        UsageError: no such name, or a file that is not as it must be.
    """
    path = antenna_path(name)
    try:
        if path.stat().st_size > MAX_BYTES:
            raise UsageError(f"{path} is larger than 2 MB and no antenna.", "Add the antenna again.")
        raw = toml_tree(path.read_bytes().decode("utf-8-sig"))
    except FileNotFoundError:
        raise UsageError(
            f'There is no antenna "{name}" in your list.{nearest(name, listed_names())}',
            "`fieldbook antenna list` shows it; `fieldbook antenna add` adds one.",
            code="antenna_not_listed",
        ) from None
    except OSError as problem:
        raise UsageError(f"{path} cannot be read: {problem.strerror or problem}.", "Correct its permissions.") from None
    except (BadToml, UnicodeDecodeError) as problem:
        raise UsageError(f"{path} is no valid TOML: {problem}.", "Correct it, or add the antenna again.") from None
    antenna = raw.get("antenna")
    if set(raw) != {"antenna"} or not isinstance(antenna, dict):
        raise UsageError(f"{path} must hold one table [antenna].", "Correct it, or add the antenna again.")
    for key in antenna:
        if key not in LISTED_KEYS:
            raise UsageError(f'{path}: there is no key "{key}" in [antenna].{nearest(key, LISTED_KEYS)}', "Correct it.")
    if not isinstance(antenna.get("model"), str):
        raise UsageError(f"{path}: model is missing.", "Write type and radome.")
    return {**antenna, **_joined(antenna, path)}


def _joined(antenna: Tree, path: Path) -> Tree:
    calibration = antenna.get("calibration")
    if calibration is None:
        return {}
    lines = calibration.get("block") if isinstance(calibration, dict) else None
    if not isinstance(lines, list) or not all(isinstance(line, str) for line in lines):
        raise UsageError(f"{path}: calibration.block is no list of lines.", "Add the antenna again from its file.")
    return {"calibration": {**calibration, "block": "\n".join(lines)}}


def listed_text(antenna: Tree) -> str:
    """The TOML text of one file; numbers as typed (Decimal or decimal text)."""
    rows = ["[antenna]"]
    for key in LISTED_KEYS:
        value = antenna.get(key)
        if value is None or key == "calibration":
            continue
        rows.append(f"{key} = {_toml(key, value)}")
    calibration = antenna.get("calibration")
    if calibration:
        rows += ["", "[antenna.calibration]"]
        rows += [f"{key} = {json.dumps(calibration[key])}" for key in ("file", "sha256")]
        rows.append("block = [")
        rows += [f"    {json.dumps(line)}," for line in calibration["block"].split("\n")]
        rows.append("]")
    return "\n".join(rows) + "\n"


def _toml(key: str, value: Any) -> str:
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{name} = {item}" for name, item in value.items()) + " }"
    # a JSON text of ASCII is a basic string of TOML
    return json.dumps(value) if key in ("model", "serial", "source", "offset_frequency") else str(value)
