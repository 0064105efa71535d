"""The occupation: figures on the left page, the sketch on the right."""

from __future__ import annotations

from typing import ClassVar

from fieldbook.screens.figures import occupation_rows
from fieldbook.screens.page import Page
from fieldbook.screens.plots import Look, sketch_rows
from fieldbook.screens.rows import Row


class OccupationPage(Page):
    """What is being recorded, and how good it is."""

    name_of_page: ClassVar[str] = "occupation"
    facing: ClassVar[bool] = True
    running: bool = False  # the lower figure is the running mean, not the heights of the epochs

    def graph(self) -> None:
        """The other lower figure."""
        self.running = not self.running
        self.desk.bridge.wants_running = self.running
        self.redraw()

    def left(self, width: int, height: int) -> list[Row]:
        """Figures."""
        return occupation_rows(self.view, width, height)

    def right(self, width: int, height: int) -> list[Row]:
        """Sketch."""
        return sketch_rows(self.view, width, height, Look(self.desk.ascii_only, self.running))
