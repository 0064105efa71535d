"""How the commands open a register: for reading, or for writing, always closed again."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING

from fieldbook.clock import SystemClock

if TYPE_CHECKING:
    from fieldbook.register.store import Register


@contextmanager
def reading(path: Path) -> Iterator[Register]:
    """A register for reading.

    Raises:
        BookError: no register, or newer than this program.
    """
    from fieldbook.register.store import Register

    with Register.open(path, clock=SystemClock()) as register:
        yield register


@contextmanager
def writing(path: Path, *, begin_by: str | None = None) -> Iterator[Register]:
    """A register for writing; with `begin_by` it is begun, in that name, where there is no file yet.

    Raises:
        BookError: no register, newer than this program, or it cannot be written.
    """
    from fieldbook.register.store import Register

    if begin_by is not None and not path.exists():
        with Register.create(path, clock=SystemClock(), by=begin_by) as register:
            yield register
        return
    with Register.open(path, clock=SystemClock(), write=True) as register:
        yield register
