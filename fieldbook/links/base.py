"""What every byte source is: opened, read with a time limit, closed; and the two ways it ends.

A link hands over bytes exactly as they came and knows nothing of sentences. It is used by one thread at a
time: the thread that reads is the thread that closes. Opening an open link does nothing, so a reader may
call `open()` without asking who made the link.
"""

from __future__ import annotations

from typing import Protocol

from fieldbook.errors import LinkError
from fieldbook.links.address import LinkAddress

PIECE_BYTES = 65536  # largest piece handed over by one read: also the recorder's largest burst


class LinkLost(LinkError):
    """A link that was open and is gone: unplugged, closed by the other side, reset. Reopen it after a pause."""

    default_code = "lost"

    def __init__(self, reason: str) -> None:
        super().__init__(f"The link is lost: {reason}.", "Check the cable, the power and the network.")
        self.reason = reason

    def __str__(self) -> str:
        """The reason alone: it stands in gap entries and beside the state of the link."""
        return self.reason


class EndOfLink(Exception):
    """The clean end of a source that has one: the last byte of a file was handed over."""


class Link(Protocol):
    """A source of received bytes."""

    address: LinkAddress

    def open(self) -> None:
        """Open the source; nothing happens when it is open already.

        Raises:
            LinkError: it cannot be opened; `code` is missing, busy, permission, not_a_tty, refused,
                unknown_host, unreachable, empty, damaged, too_large or other.
        """
        ...

    def read(self, timeout_s: float) -> bytes:
        """The bytes that have come, b"" when none came within `timeout_s` seconds.

        Raises:
            LinkLost: the source is gone; all bytes that came before have been handed over.
            EndOfLink: the last byte of a file was handed over.
            LinkError: the file cannot be read on (damaged, larger than the limit).
        """
        ...

    def close(self) -> None:
        """Close the source; nothing happens when it is closed already. Never raises."""
        ...
