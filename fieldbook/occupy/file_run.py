"""Recording a file: as fast as it can be read, decoded and committed; items carry no arrival times.

A file that is taken up again goes on at the byte where the recording stopped, after its first bytes have proved to be
the recorded ones. No event is recorded for that: the bytes are the same as without the interruption, and so are the
epochs.
"""

from __future__ import annotations

import gc
import hashlib
from collections.abc import Iterator
from contextlib import contextmanager

from fieldbook.errors import LinkError, UsageError
from fieldbook.links.base import EndOfLink, LinkLost
from fieldbook.model.item import Item, ItemKind
from fieldbook.occupy.run import WAIT_S, Run

FILE_ITEM_BYTES = 64 * 1024
FILE_BATCH_BYTES = 1024 * 1024
YOUNG_OBJECTS = 50_000  # between two looks of the garbage collector; the default of 700 costs a tenth of the time


class FileRun(Run):
    """A file: as fast as it can be read, decoded and committed."""

    _held = b""

    def go(self) -> str | None:
        self._begin()
        self._skip_recorded()
        self._wishes.on_start()
        if not self.resumed:
            self._writer.write([Item(ItemKind.OPENED, self._address.text.encode("utf-8"))])
        with _calm_collector():
            wanted = self._loop()
        if wanted == "leave":
            self._leave()
            return None
        self._end(wanted)
        return wanted

    def _loop(self) -> str:
        while True:
            batch, ended = self._batch()
            if batch:
                self._writer.state.last_byte_utc_ms = self._clock.utc_ms()
                self._writer.write(batch)
            self._show()
            wanted = "end of file" if ended else self._wanted()
            if wanted is not None:
                return wanted

    def _batch(self) -> tuple[list[Item], bool]:
        """Up to 1 MiB of the file as items of 64 KiB; True when the file is at its end."""
        items: list[Item] = []
        held = bytearray(self._held)
        total, ended = 0, False
        while total < FILE_BATCH_BYTES and not ended:
            try:
                data = self._read()
            except EndOfLink:
                ended = True
                data = b""
            held += data
            total += len(data)
            while len(held) >= FILE_ITEM_BYTES or (ended and held):
                items.append(Item(ItemKind.BYTES, bytes(held[:FILE_ITEM_BYTES])))
                del held[:FILE_ITEM_BYTES]
        self._held = bytes(held)
        return items, ended

    def _read(self) -> bytes:
        try:
            return self._link.read(WAIT_S)
        except LinkLost as problem:
            raise LinkError(
                f"{self._address.text} cannot be read further: {problem.reason}.",
                "Copy the file again and run the same command: the occupation is open and goes on.",
                code="lost",
            ) from problem

    def _skip_recorded(self) -> None:
        """Read past what is recorded already, making sure that it is the same file."""
        left = self._writer.heard.received_bytes
        seen = hashlib.sha256()
        while left:
            try:
                data = self._read()
            except EndOfLink:
                break
            seen.update(data[:left])
            self._held = data[left:]
            left -= min(left, len(data))
        if left or seen.hexdigest() != self._writer.received_sha256:
            raise UsageError(
                f"{self._address.text} is not the file that occupation {self._occupation.number} began with.",
                "Name the same file, or begin another occupation with --new.",
                code="file_changed",
            )


@contextmanager
def _calm_collector() -> Iterator[None]:
    """Epochs and rows are made by the hundred thousand and hold no cycles: look for cycles less often."""
    before = gc.get_threshold()
    gc.set_threshold(YOUNG_OBJECTS, *before[1:])
    try:
        yield
    finally:
        gc.set_threshold(*before)
