"""Who records: an exclusive lock on the separate file BOOK.lock.

Liveness of a recorder is this lock, never a process number: the system drops it when the process ends, however
it ends. The lock must not be on the book itself, because closing any file handle on a path drops the POSIX locks
SQLite holds there. The lock file stays after release: deleting it would let two recorders lock two files of one
name. `held` asks by trying a shared lock for an instant, which is why `acquire` tries again for some seconds.
"""

from __future__ import annotations

import os
import sys
import time
from pathlib import Path
from types import TracebackType

from fieldbook.errors import BookError

RETRY_S = 0.05


def lock_path(book: Path) -> Path:
    """BOOK.lock beside the file that the path finally names, so that a symbolic link shares the lock."""
    real = Path(os.path.realpath(book))
    return real.with_name(real.name + ".lock")


if sys.platform == "win32":
    import msvcrt

    def _try_lock(handle: int, *, shared: bool) -> bool:  # noqa: ARG001 - Windows knows no shared one here
        try:
            os.lseek(handle, 0, os.SEEK_SET)
            msvcrt.locking(handle, msvcrt.LK_NBLCK, 1)
        except OSError:
            return False
        return True

    def _unlock(handle: int) -> None:
        os.lseek(handle, 0, os.SEEK_SET)
        msvcrt.locking(handle, msvcrt.LK_UNLCK, 1)

else:
    import fcntl

    def _try_lock(handle: int, *, shared: bool) -> bool:
        try:
            fcntl.flock(handle, (fcntl.LOCK_SH if shared else fcntl.LOCK_EX) | fcntl.LOCK_NB)
        except BlockingIOError:
            return False
        return True

    def _unlock(handle: int) -> None:
        fcntl.flock(handle, fcntl.LOCK_UN)


class RecorderLock:
    """The right to record into a book. One per process and book; released by `release` or by the process's end."""

    def __init__(self, book: Path) -> None:
        self.path = lock_path(book)
        self._handle: int | None = None

    def acquire(self, wait_s: float = 3.0) -> None:
        """Take the lock, trying for `wait_s` seconds.

        Raises:
            BookError: another recorder holds it (code "locked"), or the lock file cannot be made.
        """
        if self._handle is not None:
            return
        try:
            handle = os.open(self.path, os.O_RDWR | os.O_CREAT, 0o666)
        except OSError as error:
            raise BookError(
                f"The lock file {self.path} cannot be made: {error.strerror}.",
                "Record into a folder you may write to.",
                code="read_only",
            ) from error
        deadline = time.monotonic() + wait_s
        try:
            while not _try_lock(handle, shared=False):
                if time.monotonic() >= deadline:
                    raise BookError(
                        f"Another recorder is recording into this book ({self.path} is locked).",
                        "Attach with `fieldbook open` or `fieldbook status`, or end that recording first.",
                        code="locked",
                    )
                time.sleep(RETRY_S)
        except BaseException:
            os.close(handle)
            raise
        self._handle = handle

    def release(self) -> None:
        """Give the lock back; nothing happens when it is not held."""
        if self._handle is None:
            return
        handle, self._handle = self._handle, None
        try:
            _unlock(handle)
        finally:
            os.close(handle)

    def __enter__(self) -> RecorderLock:
        self.acquire()
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.release()


def held(book: Path) -> bool:
    """Whether some process records into the book now. Does not touch the book, and makes no file."""
    try:
        handle = os.open(lock_path(book), os.O_RDONLY)
    except FileNotFoundError:
        return False
    except PermissionError:
        return True  # somebody else's lock file: assume it is in use
    except OSError:
        return False
    try:
        if not _try_lock(handle, shared=True):
            return True
        _unlock(handle)
        return False
    finally:
        os.close(handle)
