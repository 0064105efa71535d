"""A hand that does one job after the other in its own thread, and reports each result to the screen.

Writing waits for a disk, so it never happens in the drawing. Two hands exist: one writes entries, one reduces and
prints; a long reduction never keeps a remark waiting. On leaving, the writing hand is waited for.
"""

from __future__ import annotations

import queue
import threading
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

from fieldbook.errors import FieldbookError

Job = Callable[[], Any]
Then = Callable[[Any], None]


@dataclass
class Outcome:
    """What came of a job: a result, or what went wrong with its remedy."""

    then: Then | None
    result: Any = None
    problem: tuple[str, str] | None = None


class Hand:
    """One thread with a queue of jobs."""

    def __init__(self, name: str, report: Callable[[Outcome], object]) -> None:
        self._jobs: queue.Queue[tuple[Job, Then | None] | None] = queue.Queue()
        self._report = report
        self._thread = threading.Thread(target=self._run, name=f"fieldbook-{name}", daemon=True)
        self._thread.start()
        self.waiting = 0

    def give(self, job: Job, then: Then | None = None) -> None:
        """Do the job when those before it are done; `then` is called in the screen's thread with its result."""
        self.waiting += 1
        self._jobs.put((job, then))

    def close(self, wait_s: float) -> None:
        """No more jobs; wait for those given."""
        self._jobs.put(None)
        self._thread.join(wait_s)

    def _run(self) -> None:
        while (given := self._jobs.get()) is not None:
            job, then = given
            try:
                outcome = Outcome(then, job())
            except FieldbookError as problem:
                outcome = Outcome(None, problem=(problem.text, problem.remedy))
            except Exception as problem:  # noqa: BLE001 - said on the screen; recording is another process
                outcome = Outcome(None, problem=(f"{type(problem).__name__}: {problem}", "Nothing was written."))
            self.waiting -= 1
            self._report(outcome)
