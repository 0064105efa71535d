"""Pages that show the reductions of a book one occupation at a time; left and right arrows turn to the others."""

from __future__ import annotations

from fieldbook.model.reduction import Reduction
from fieldbook.screens.page import Page


class OccupationByOccupation(Page):
    """The latest occupation first; the choice stays while the page is open."""

    index = -1

    def opened(self) -> None:
        """Reduce when the page comes into sight."""
        self.desk.reduce()

    def chosen(self) -> Reduction | None:
        """The reduction in sight."""
        reduced = self.desk.reduced
        if reduced is None or not reduced.reductions:
            return None
        if not 0 <= self.index < len(reduced.reductions):
            self.index = len(reduced.reductions) - 1
        return reduced.reductions[self.index]

    def side(self, step: int) -> None:
        """The occupation before or after."""
        reduced = self.desk.reduced
        if reduced is not None and reduced.reductions:
            self.index = (self.index + step) % len(reduced.reductions)
            self.redraw()
