"""How long to wait before a lost link is tried again: 0.1 s, doubled each time up to 5 s, with jitter.

Jitter keeps several recorders that lost the same server from knocking in step.
"""

from __future__ import annotations

import random
import threading
from collections.abc import Callable

from fieldbook.errors import LinkError
from fieldbook.links.base import Link

FIRST_DELAY_S = 0.1
LONGEST_DELAY_S = 5.0
FACTOR = 2.0
JITTER = 0.2  # of the delay, either way


class BackOff:
    """Delays between attempts to reopen a link.

    Args:
        seed: fixes the jitter, for tests; None = different in each process.
    """

    def __init__(self, *, seed: int | None = None) -> None:
        self._random = random.Random(seed)  # noqa: S311 - jitter, not a secret
        self._delay_s = FIRST_DELAY_S
        self.attempts = 0

    def next_delay_s(self) -> float:
        """Seconds to wait before the next attempt; never more than LONGEST_DELAY_S."""
        delay_s = self._delay_s * (1.0 + JITTER * (2.0 * self._random.random() - 1.0))
        self._delay_s = min(self._delay_s * FACTOR, LONGEST_DELAY_S)
        self.attempts += 1
        return min(delay_s, LONGEST_DELAY_S)

    def reset(self) -> None:
        """Begin again at the first delay: the link has delivered."""
        self._delay_s = FIRST_DELAY_S
        self.attempts = 0


def reopen(
    link: Link,
    stop: threading.Event,
    back_off: BackOff | None = None,
    on_failure: Callable[[LinkError], None] | None = None,
) -> bool:
    """Close a lost link and try to open it until it is open or `stop` is set.

    Args:
        link: the lost link; closed here, in the thread that read it.
        stop: set by another thread to give up; waiting ends at once.
        back_off: delays; pass one kept by the reader, so that a link which opens and dies at once is not
            tried ten times a second.
        on_failure: called with each failed attempt's error.

    Returns:
        True when the link is open again, False when `stop` was set.
    """
    waits = back_off or BackOff()
    link.close()
    while not stop.wait(waits.next_delay_s()):
        try:
            link.open()
        except LinkError as error:
            if on_failure is not None:
                on_failure(error)
        else:
            return True
    return False
