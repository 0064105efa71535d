"""A screen on top that goes away once: a key that bounces, or a glove on two keys, must not take the book away with it."""

from __future__ import annotations

from typing import TypeVar

from textual.await_complete import AwaitComplete
from textual.screen import ModalScreen

Result = TypeVar("Result")


class Once(ModalScreen[Result]):
    """The first answer counts. Keys that were pressed before it was gone reach it still, and do nothing."""

    _answered = False

    def dismiss(self, result: Result | None = None) -> AwaitComplete:
        """Go away with the result, the first time."""
        if self._answered:
            return AwaitComplete()  # nothing to wait for
        self._answered = True
        return super().dismiss(result)
