"""Leaves when the terminal is gone.

Whoever closes a terminal window expects its programs to end. Where no hang-up signal reaches us (no controlling terminal, a
signal that was ignored), Textual's writer fails once and its main loop waits for that writer for ever: measured, a
screen without a terminal spun at 69 % of a core for 40 minutes beside a recorder that must not be disturbed. So a
thread of its own asks the kernel every two seconds whether the terminal still has another side. The recorder is another
process and every entry is committed when it is written: leaving at once loses nothing.
"""

from __future__ import annotations

import os
import select
import sys
import threading
from collections.abc import Callable

EVERY_S = 2.0


def terminal_is_gone(descriptor: int) -> bool:
    """Has the other side of this terminal hung up?"""
    poll = select.poll()
    poll.register(descriptor, 0)  # hang-up and error are always reported
    return any(what & (select.POLLHUP | select.POLLERR | select.POLLNVAL) for _, what in poll.poll(0))


def leave_with_the_terminal(leave: Callable[[], None] = lambda: os._exit(0)) -> threading.Event:
    """Start watching standard input; returns an event that stops the watch.

    Nothing is done where the system has no `poll` (Windows ends a console's programs itself) or input is no terminal.
    """
    stop = threading.Event()
    if not hasattr(select, "poll") or not sys.stdin.isatty():
        return stop
    descriptor = sys.stdin.fileno()

    def watch() -> None:
        while not stop.wait(EVERY_S):
            if terminal_is_gone(descriptor):
                leave()
                return

    threading.Thread(target=watch, name="fieldbook-terminal", daemon=True).start()
    return stop
