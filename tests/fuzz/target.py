"""What a fuzz target is, and a working folder for those that need files."""

from __future__ import annotations

import atexit
import os
import shutil
import tempfile
from collections.abc import Callable
from dataclasses import dataclass
from functools import cache
from pathlib import Path

CORPUS = Path(__file__).parent / "corpus"


@dataclass(frozen=True)
class Target:
    """One door.

    `run` raises whatever it should not have let out, or an AssertionError when its property does not hold.
    `smoke` is the number of executions of the smoke test: about 2,000, fewer where one costs milliseconds.
    `words` are pieces a mutation puts in, because chance alone would hardly find them.
    """

    name: str
    says: str
    run: Callable[[bytes], None]
    seeds: Callable[[], list[bytes]]
    smoke: int = 2000
    words: tuple[bytes, ...] = ()
    most_bytes: int = 4096


def kept(name: str) -> list[bytes]:
    """The inputs kept in the corpus for a target."""
    folder = CORPUS / name
    return [path.read_bytes() for path in sorted(folder.iterdir())] if folder.is_dir() else []


@cache
def workshop() -> Path:
    """A folder in memory where there is one; removed when this process ends."""
    shm = Path("/dev/shm")  # noqa: S108 - only its being there is used
    base = shm if shm.is_dir() and os.access(shm, os.W_OK) else None
    folder = Path(tempfile.mkdtemp(prefix="fieldbook-fuzz-", dir=base))
    atexit.register(shutil.rmtree, folder, ignore_errors=True)
    return folder
