"""The thread that owns the link: it reads, stamps and hands over, and never waits for disk, decoder or screen.

    open --bytes--> open --5 s nothing--> stale --bytes--> open
      |                                     |  15 s nothing, TCP: a peer that is gone says nothing, so connect again
      +--------- lost <---------------------+
                  | close here, wait 0.1 s, 0.2 s, ... 5 s (doubling, with jitter), open again
                  +--> open (event REOPENED)          end of a finite source: ended

A port must be closed by the thread that reads it: closing it under a blocked read gives a TypeError in that read, and
some Windows drivers hang. So stopping is a flag, and a reader that does not come back is given up (it is a daemon).
"""

from __future__ import annotations

import threading
from typing import Protocol

from fieldbook.clock import Clock
from fieldbook.errors import LinkError
from fieldbook.links.backoff import BackOff
from fieldbook.links.base import EndOfLink, Link, LinkLost
from fieldbook.model.item import ItemKind
from fieldbook.occupy.arrivals import Arrivals

POLL_S = 0.25
STALE_S = 5.0
TCP_SILENCE_S = 15.0
JOIN_S = 2.0


class LinkAddressLike(Protocol):
    """What the reader needs to know of an address."""

    @property
    def kind(self) -> str: ...

    @property
    def text(self) -> str: ...


class ReaderThread(threading.Thread):
    """Reads an already opened link into `arrivals` until stopped or until the source ends."""

    def __init__(self, link: Link, address: LinkAddressLike, arrivals: Arrivals, clock: Clock) -> None:
        super().__init__(name="fieldbook-reader", daemon=True)
        self._link, self._address = link, address
        self._arrivals, self._clock = arrivals, clock
        self._halt = threading.Event()
        self._back_off = BackOff()
        self._open = True
        self._heard_ms = clock.monotonic_ms()
        self.link_state = "open"
        self.link_reason = ""

    def stop(self) -> None:
        """Ask the thread to close its link and end, and wait a little for it."""
        self._halt.set()
        if self.is_alive():
            self.join(JOIN_S)

    def run(self) -> None:
        """Read until told to stop."""
        try:
            while not self._halt.is_set():
                if self._open:
                    self._read_once()
                else:
                    self._open_again()
        except EndOfLink:
            self._become("ended", "end of the source")
        finally:
            self._link.close()
            self._arrivals.end()

    def _become(self, state: str, reason: str = "") -> None:
        self.link_state, self.link_reason = state, reason

    def _read_once(self) -> None:
        try:
            data = self._link.read(POLL_S)
        except EndOfLink:
            raise
        except LinkLost as problem:
            self._lose(problem.reason)
            return
        except (LinkError, OSError, TypeError, ValueError) as problem:
            # TypeError and ValueError: what serial drivers raise when a port vanishes inside a call
            self._lose(str(problem) or type(problem).__name__)
            return
        now = self._clock.monotonic_ms()
        if data:
            self._arrivals.add_bytes(data)
            self._heard_ms = now
            self._back_off.reset()
            if self.link_state != "open":
                self._become("open")
            return
        silence_s = (now - self._heard_ms) / 1000
        if self._address.kind == "tcp" and silence_s >= TCP_SILENCE_S:
            self._lose(f"no byte for {TCP_SILENCE_S:.0f} s")
        elif silence_s >= STALE_S and self.link_state == "open":
            self._become("stale", f"no byte for {STALE_S:.0f} s")

    def _lose(self, reason: str) -> None:
        self._link.close()
        self._open = False
        self._arrivals.add_event(ItemKind.LOST, reason)
        self._become("lost", reason)

    def _open_again(self) -> None:
        while not self._halt.wait(self._back_off.next_delay_s()):
            try:
                self._link.open()
            except (LinkError, OSError) as problem:
                self._become("lost", str(problem))
                continue
            self._open = True
            self._heard_ms = self._clock.monotonic_ms()
            self._arrivals.add_event(ItemKind.REOPENED, self._address.text)
            self._become("open")
            return
