"""The one thread that looks into the book for the screen.

The screen asks (`request`) when it is ready for a new picture and looks at `latest` later; nothing is pushed, so a
slow terminal means fewer pictures and never a growing queue. The thread never touches a widget.
"""

from __future__ import annotations

import threading
from collections.abc import Callable

from fieldbook.errors import FieldbookError
from fieldbook.model.live import LiveView


class Feed:
    """Runs `snapshot` in its own thread, once per request at most."""

    def __init__(self, snapshot: Callable[[], LiveView], close: Callable[[], None]) -> None:
        self._snapshot = snapshot
        self._close = close  # called in the feed's own thread: a connection belongs to its thread
        self._wanted = threading.Event()
        self._stop = threading.Event()
        self._thread = threading.Thread(target=self._run, name="fieldbook-feed", daemon=True)
        self.latest: LiveView | None = None
        self.problem: tuple[str, str] | None = None  # text, remedy
        self.taken = 0  # pictures taken so far

    def start(self) -> None:
        """Start the thread and ask for the first picture."""
        self._wanted.set()
        self._thread.start()

    def request(self) -> None:
        """Ask for a new picture."""
        self._wanted.set()

    def stop(self, wait_s: float = 2.0) -> None:
        """End the thread; a picture under way is let go."""
        self._stop.set()
        self._wanted.set()
        if self._thread.is_alive():
            self._thread.join(wait_s)

    def _run(self) -> None:
        while True:
            self._wanted.wait()
            self._wanted.clear()
            if self._stop.is_set():
                self._close()
                return
            try:
                self.latest = self._snapshot()
                self.problem = None
            except FieldbookError as problem:
                self.problem = (problem.text, problem.remedy)
            except Exception as problem:  # noqa: BLE001 - the screen must say so and go on; recording is elsewhere
                self.problem = (f"The book cannot be read: {type(problem).__name__}: {problem}", "Try again.")
            self.taken += 1
