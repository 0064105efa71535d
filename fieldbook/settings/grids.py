"""Where grid files are looked for, and which file a session means: found by name, named by its SHA-256.

    beside the book (or the session file)   `grids/` beside it   `grids/` of the user's configuration folder   the package

A session that names a geoid gets the hash of the file it meant when the session file is read (`frame.geoid_sha256`);
reductions then refuse another file of that name.
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterable
from functools import lru_cache
from importlib import resources
from pathlib import Path

from fieldbook.model.canonical import Tree
from fieldbook.settings.user_folder import user_folder

FOLDER_NAME = "grids"
MAX_HASHED_BYTES = 2 << 30


def user_grids_folder() -> Path:
    """The user's own grids, whether the folder exists or not."""
    return user_folder() / FOLDER_NAME


def grid_folders(beside: Path) -> list[Path]:
    """Folders in the order they are searched, without the package's own: those of a book or session file in `beside`."""
    return [beside, beside / FOLDER_NAME, user_grids_folder()]


def package_folder() -> Path:
    """The grids that come with the program."""
    return Path(str(resources.files("fieldbook") / "data"))


def files_named(name: str, folders: Iterable[Path]) -> list[Path]:
    """Every file of that name, in order of search; the package's own last. Empty for what is no plain file name."""
    try:
        if not name or Path(name).name != name:
            return []
        return [path.resolve() for folder in (*folders, package_folder()) if (path := Path(folder) / name).is_file()]
    except (OSError, ValueError):  # names that no file has
        return []


def file_sha256(path: Path) -> str:
    """SHA-256 of a file, kept as long as size and time of change stay.

    Raises:
        OSError: it cannot be read.
    """
    state = path.stat()
    return _sha256(path, state.st_size, state.st_mtime_ns)


@lru_cache(maxsize=32)
def _sha256(path: Path, size: int, changed_ns: int) -> str:
    del size, changed_ns  # only the key of the cache
    with path.open("rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()


def with_geoid_hash(raw: Tree, base_dir: Path) -> Tree:
    """The tree of a session with the hash of the geoid file it means; unchanged where there is none to be found."""
    frame = raw.get("frame")
    if not isinstance(frame, dict) or not isinstance(frame.get("geoid"), str) or "geoid_sha256" in frame:
        return raw
    for path in files_named(frame["geoid"], grid_folders(base_dir))[:1]:
        try:
            if path.stat().st_size <= MAX_HASHED_BYTES:
                return {**raw, "frame": {**frame, "geoid_sha256": file_sha256(path)}}
        except OSError:
            continue
    return raw
