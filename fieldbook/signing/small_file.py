"""Small files of the user: read with a limit, written whole or not at all, never over another one."""

from __future__ import annotations

import os
import sys
import uuid
from contextlib import suppress
from pathlib import Path

from fieldbook.errors import UsageError


def read_small(path: Path, limit: int, what: str) -> str:
    """The text of a regular file of at most `limit` bytes.

    Raises:
        UsageError: not there, no file, too large, no text.
    """
    try:
        if not path.is_file():
            problem = "is no file" if path.exists() else "does not exist"
            raise UsageError(f"{path} {problem}.", f"Name the file of a {what}.", code="missing")
        with path.open("rb") as file:
            data = file.read(limit + 1)
    except OSError as error:
        raise UsageError(f"{path} cannot be read: {error.strerror or error}.", "Check its permissions.") from None
    if len(data) > limit:
        raise UsageError(f"{path} is larger than any {what}.", f"Name the file of a {what}.", code="key")
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError:
        raise UsageError(f"{path} is no {what}.", f"Name the file of a {what}.", code="key") from None


def write_new(path: Path, text: str, *, secret: bool = False) -> None:
    """Write a file that is not there yet; it has its name only when it is complete and on the disk.

    A process killed meanwhile leaves nothing, or a `.part` file that nobody reads.

    Args:
        secret: readable by its owner alone (0600), from the first byte on.

    Raises:
        UsageError: the name is taken, or it cannot be written.
    """
    taken = UsageError(f"{path} exists already.", "Choose another name; it is never overwritten.", code="exists")
    part = path.with_name(f".{path.name}.{uuid.uuid4().hex}.part")
    try:
        if os.path.lexists(path):
            raise taken
        file = os.open(part, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o600 if secret else 0o644)
        try:
            with os.fdopen(file, "wb") as stream:
                stream.write(text.encode("utf-8"))
                stream.flush()
                os.fsync(stream.fileno())
            _give_name(part, path, taken)
        finally:
            part.unlink(missing_ok=True)
    except OSError as error:
        raise UsageError(
            f"{path} cannot be written: {error.strerror or error}.", "Choose another folder, or check its rights."
        ) from error
    _remember(path.absolute().parent)


def _give_name(part: Path, path: Path, taken: UsageError) -> None:
    try:
        path.hardlink_to(part)
    except FileExistsError:
        raise taken from None
    except OSError:  # a file system without hard links
        if os.path.lexists(path):
            raise taken from None
        part.rename(path)


def _remember(folder: Path) -> None:
    """Make the folder's own entry durable, where the system can."""
    if sys.platform != "win32":
        with suppress(OSError):
            handle = os.open(folder, os.O_RDONLY)
            try:
                os.fsync(handle)
            finally:
                os.close(handle)
