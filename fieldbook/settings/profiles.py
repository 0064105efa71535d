"""Requirement profiles: what a published document demands, as a [requirement] table with its document and edition.

A profile is a TOML file, the package's own in `fieldbook/data/profiles`, the office's in the folder `profiles` beside the
user's settings (`user_folder()`); of two with one name the office's counts.

    title = "Single-base real time, class RT1"
    document = "..."                     # as it is to be cited
    edition = "2.1, 2011"
    standing = "read"                    # or "read in a summary", "from memory"
    also = ["..."]                       # what it demands that no line of the leave check can judge

    [requirement]                        # keys of a session's [requirement] without source; any of them may be absent
    minimum_time_s = 180

What the document leaves open stays open: the accuracy lines, the fix and the number of occupations must then be typed.
A profile from memory says 'check before use' wherever its source is printed.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from importlib import resources
from pathlib import Path

from fieldbook.errors import UsageError
from fieldbook.model.canonical import Tree, normalised
from fieldbook.settings.schema import REQUIRED, TABLES
from fieldbook.settings.toml_lines import line_of
from fieldbook.settings.toml_text import BadToml, toml_tree
from fieldbook.settings.user import user_file
from fieldbook.settings.values import BadValue, checked, nearest

STANDINGS = ("read", "read in a summary", "from memory")
MAX_BYTES = 1 << 16
_TEXTS = ("title", "document", "edition", "standing")
_KEYS = (*_TEXTS, "also", "requirement")


@dataclass(frozen=True)
class Profile:
    """One profile. `requirement`: its keys in canonical form (numbers as texts)."""

    name: str
    title: str
    document: str
    edition: str
    standing: str
    also: tuple[str, ...]
    requirement: Tree
    path: str

    @property
    def source(self) -> str:
        """What `requirement.source` says: document, edition, and how far it was checked."""
        caution = "" if self.standing == "read" else f"; {self.standing}: check before use"
        return f"{self.document}, {self.edition}{caution}"

    @property
    def open_keys(self) -> tuple[str, ...]:
        """Required keys of a [requirement] that this profile leaves open."""
        return tuple(key for key in REQUIRED["requirement"] if key not in self.requirement)

    def toml(self) -> str:
        """The [requirement] table for a session file; what the document leaves open stands as a comment."""
        lines = ["[requirement]"]
        for key, value in self.requirement.items():
            text = f'"{value}"' if TABLES["requirement"][key].startswith(("words", "text")) else str(value)
            lines.append(f"{key} = {text}")
        lines += [f"# {key} = ...  the document leaves it open: write it" for key in self.open_keys]
        quoted = self.source.replace("\\", "\\\\").replace('"', '\\"')
        return "\n".join([*lines, f'source = "{quoted}"', ""])


def user_folder() -> Path:
    """Where the office's own profiles are looked for, whether the folder exists or not."""
    return user_file().parent / "profiles"


def profiles(folder: Path | None = None) -> dict[str, Profile]:
    """Name -> profile, the office's own included, in order of name.

    Args:
        folder: the office's folder, `user_folder()` if None.

    Raises:
        UsageError: a profile of the office is not as it must be; the file and line are named.
    """
    own = folder or user_folder()
    try:
        files = sorted(own.glob("*.toml")) if own.is_dir() else []
    except OSError as problem:
        raise UsageError(
            f"The profiles in {own} cannot be listed: {problem.strerror or problem}.", "Correct its permissions."
        ) from None
    shipped = resources.files("fieldbook") / "data" / "profiles"
    ours = [Path(str(entry)) for entry in shipped.iterdir() if entry.name.endswith(".toml")]
    found = {item.name: item for item in _read(ours)}
    found.update({item.name: item for item in _read(files)})
    return dict(sorted(found.items()))


def profile(name: str, folder: Path | None = None) -> Profile:
    """One profile by its name.

    Raises:
        UsageError: none of that name, or as `profiles`.
    """
    known = profiles(folder)
    if name not in known:
        raise UsageError(
            f'There is no profile "{name}".{nearest(name, known)}', "`fieldbook profiles list` shows all of them."
        )
    return known[name]


def requirement_by(chosen: Profile, current: Tree) -> Tree:
    """A session's [requirement] by a profile: what the document leaves open is kept from the current one.

    Only required keys and the frame that is judged are kept: a limit of another document must not stand under this one's
    name.
    """
    kept = {key: current[key] for key in (*REQUIRED["requirement"], "in") if key in current}
    return {**kept, **chosen.requirement, "source": chosen.source}


def _read(files: Iterable[Path]) -> list[Profile]:
    return [_File.read(path).profile() for path in files]


@dataclass(frozen=True)
class _File:
    """A profile file: its text for line numbers, its tree for values."""

    path: Path
    text: str
    tree: Tree

    @classmethod
    def read(cls, path: Path) -> _File:
        try:
            if path.stat().st_size > MAX_BYTES:
                raise UsageError(f"{path} is larger than 64 kB and no profile.", "Look at it, or move it away.")
            text = path.read_bytes().decode("utf-8-sig")
            return cls(path, text, toml_tree(text))
        except OSError as problem:
            raise UsageError(
                f"The profile {path} cannot be read: {problem.strerror or problem}.", "Correct its permissions."
            ) from None
        except UnicodeDecodeError:
            raise UsageError(f"{path} is no text file.", "Write it anew, or move it away.") from None
        except BadToml as problem:
            raise UsageError(f"{path} is no valid TOML: {problem}.", "Correct that line.") from None

    def profile(self) -> Profile:
        for key in self.tree:
            if key not in _KEYS:
                raise self.slip(
                    key, f'there is no key "{key}" in a profile.{nearest(key, _KEYS)}', "Rename or remove it."
                )
        standing = self.said("standing")
        if standing not in STANDINGS:
            raise self.slip("standing", "standing is none of its words.", f"Write one of: {', '.join(STANDINGS)}.")
        also = self.tree.get("also", [])
        if not isinstance(also, list) or not all(isinstance(item, str) and item.strip() for item in also):
            raise self.slip("also", "also must be a list of sentences.", 'Write also = ["..."].')
        return Profile(
            self.path.stem,
            self.said("title"),
            self.said("document"),
            self.said("edition"),
            standing,
            tuple(also),
            self.requirement(),
            str(self.path),
        )

    def requirement(self) -> Tree:
        table = self.tree.get("requirement")
        if not isinstance(table, dict) or not table:
            raise self.slip("requirement", "a profile needs a table [requirement].", "Write it, with at least one key.")
        kinds = {key: kind for key, kind in TABLES["requirement"].items() if key != "source"}
        wanted: Tree = {}
        for key, value in table.items():
            if key not in kinds:
                remedy = "The source is made of document and edition." if key == "source" else "Rename or remove it."
                what = f'there is no key "{key}" in its [requirement].{nearest(key, kinds)}'
                raise self.slip("requirement", what, remedy, key)
            try:
                wanted[key] = checked(kinds[key], value, stored=False)
            except BadValue as problem:
                what = f"{key} {problem}.".replace("..", ".")
                raise self.slip("requirement", what, "Correct the value.", key) from None
        return dict(normalised(wanted))

    def said(self, key: str) -> str:
        """A text that must be there."""
        value = self.tree.get(key)
        if not isinstance(value, str) or not value.strip():
            raise self.slip(key, f"{key} is missing or no text.", f'Write {key} = "...".')
        return value.strip()

    def slip(self, table: str, what: str, remedy: str, key: str | None = None) -> UsageError:
        line = line_of(self.text, table, key)
        return UsageError(f"{self.path}{f', line {line}' if line else ''}: {what}", remedy)
