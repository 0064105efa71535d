"""Pages that show the reductions of a book one sheet at a time; left and right arrows turn to the others.

A sheet is an occupation, or the occupations of a mark together.
"""

from __future__ import annotations

from fieldbook.screens.page import Page
from fieldbook.screens.sheets import Sheet


class OccupationByOccupation(Page):
    """The latest occupation first; the choice stays while the page is open."""

    index = -1

    def opened(self) -> None:
        """Reduce when the page comes into sight."""
        self.desk.reduce()

    def chosen(self) -> Sheet | None:
        """The sheet in sight."""
        reduced = self.desk.reduced
        if reduced is None or not reduced.sheets:
            return None
        if not 0 <= self.index < len(reduced.sheets):
            self.index = len(reduced.sheets) - 1
        return reduced.sheets[self.index]

    def side(self, step: int) -> None:
        """The sheet before or after."""
        reduced = self.desk.reduced
        if reduced is not None and reduced.sheets:
            self.index = (self.index + step) % len(reduced.sheets)
            self.redraw()
