"""Compression of large chunks beside the recording, so that a commit need not wait for it.

Recording a file at full speed leaves a second core idle. The compressor lets go of the interpreter while it works, so a
thread compresses each large chunk while its sentences are decoded, reads its result back and compares. Only bytes cross: the thread never sees the book. What it did not get to is compressed
when it is committed. Small chunks (a minute of a live link) are not sent here: they compress better
together.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from . import lines

if TYPE_CHECKING:
    from concurrent.futures import Future, ThreadPoolExecutor

LARGE_BYTES = 256 * 1024
MOST_WAITING = 8  # chunks held in memory


def press(plain: bytes, method: int = lines.SMALL) -> bytes:
    """Pieces of `lines`.

    Raises:
        ValueError: reading it back gives something else (failing memory).
    """
    data = lines.pressed(plain, method)
    if lines.unpressed(data, len(plain)) != plain:
        raise ValueError("compressed data did not read back as it was; nothing was let go")
    return data


class Presser:
    """Streams of large chunks, made in a thread. `close` waits for the chunks at hand and drops the rest."""

    def __init__(self) -> None:
        self._pool: ThreadPoolExecutor | None = None
        self._streams: dict[str, Future[bytes]] = {}

    def offer(self, sha256: str, plain: bytes) -> None:
        """Begin with a chunk, named by its SHA-256, unless it is small or too many are waiting."""
        waiting = sum(not stream.done() for stream in self._streams.values())
        if len(plain) < LARGE_BYTES or waiting >= MOST_WAITING:
            return
        if self._pool is None:
            from concurrent.futures import ThreadPoolExecutor

            self._pool = ThreadPoolExecutor(max_workers=1, thread_name_prefix="press")
        self._streams[sha256] = self._pool.submit(press, plain, lines.QUICK)

    def take(self, sha256: str) -> bytes | None:
        """The stream of a chunk, waiting for it if it is being made; None if it was never begun."""
        stream = self._streams.pop(sha256, None)
        return None if stream is None else stream.result()

    def close(self) -> None:
        """Stop."""
        self._streams.clear()
        if self._pool is not None:
            self._pool.shutdown(wait=True, cancel_futures=True)
            self._pool = None
