"""The simulated receiver as a link: bursts handed over when they are due, on the host's clock.

The first epoch is the host's current UTC second. With `speed` above 1 the simulated time runs that much faster, so
its fix times leave the host's behind: that is for tests and demonstrations.
"""

from __future__ import annotations

import time

from fieldbook.clock import Clock, SystemClock
from fieldbook.links.address import LinkAddress
from fieldbook.links.base import PIECE_BYTES, LinkLost
from fieldbook.links.sim_scenarios import SCENARIOS, Truth
from fieldbook.links.simulate import Receiver

SENT_AFTER_MS = 60  # a receiver needs that long to compute and send what belongs to a fix time


class SimLink:
    """A simulated receiver in this process.

    Args:
        address: a `sim` address.
        clock: when bursts are due; None = the host's.
    """

    def __init__(self, address: LinkAddress, *, clock: Clock | None = None) -> None:
        self.address = address
        self._clock: Clock = clock or SystemClock()
        self._receiver: Receiver | None = None
        self._first_utc_ms = 0
        self._started_ms = 0

    def open(self) -> None:
        """Switch the receiver on; its stages begin anew, its draws are those of the seed."""
        if self._receiver is not None:
            return
        now_ms = self._clock.utc_ms()
        self._first_utc_ms = now_ms // 1000 * 1000
        self._started_ms = self._clock.monotonic_ms() - (now_ms - self._first_utc_ms)
        self._receiver = Receiver(
            SCENARIOS[self.address.scenario],
            seed=self.address.seed,
            first_utc_ms=self._first_utc_ms,
            rate_hz=self.address.rate_hz,
        )

    @property
    def truth(self) -> Truth | None:
        """The truth so far, None while closed."""
        return None if self._receiver is None else self._receiver.truth

    def read(self, timeout_s: float) -> bytes:
        """What is due, waiting up to `timeout_s` for it.

        Raises:
            LinkLost: not open.
        """
        if self._receiver is None:
            raise LinkLost("the simulated receiver is off")
        wait_s = self._due_in_s(self._receiver)
        if wait_s > 0:
            time.sleep(min(wait_s, timeout_s))
            if wait_s > timeout_s:
                return b""
        parts = [self._receiver.next_burst().data]
        size = len(parts[0])
        while self._due_in_s(self._receiver) <= 0 and size < PIECE_BYTES // 2:
            parts.append(self._receiver.next_burst().data)
            size += len(parts[-1])
        return b"".join(parts)

    def _due_in_s(self, receiver: Receiver) -> float:
        since_ms = (receiver.next_utc_ms - self._first_utc_ms) / self.address.speed
        return (self._started_ms + since_ms + SENT_AFTER_MS - self._clock.monotonic_ms()) / 1000.0

    def close(self) -> None:
        """Switch it off."""
        self._receiver = None
