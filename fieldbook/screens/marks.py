"""The marks of the book: choose one for the next set-up, or describe a new one."""

from __future__ import annotations

from typing import ClassVar

from fieldbook.model.canonical import Tree
from fieldbook.model.live import LiveView
from fieldbook.screens.page import Page, next_tree, open_occupation, scrolled_to
from fieldbook.screens.plain import fit, pad
from fieldbook.screens.rows import BLANK, Row, heading, labelled, row


def marks_of(view: LiveView | None) -> list[Tree]:
    """Marks of the book by name, the session's own among them."""
    if view is None:
        return []
    marks = dict(view.state.marks)
    tree = next_tree(view)
    if tree and tree["mark"]["name"] not in marks:
        marks[tree["mark"]["name"]] = tree["mark"]
    return [marks[name] for name in sorted(marks)]


class MarksPage(Page):
    """A list with a cursor, and the chosen mark in full below."""

    name_of_page: ClassVar[str] = "marks"
    cursor = -1
    top = 0

    def opened(self) -> None:
        """The cursor stands on the mark of the next set-up."""
        names = [tree["name"] for tree in marks_of(self.view)]
        tree = next_tree(self.view) if self.view else None
        if self.cursor < 0 and tree and tree["mark"]["name"] in names:
            self.cursor = names.index(tree["mark"]["name"])

    def left(self, width: int, height: int) -> list[Row]:
        """List and description."""
        if self.cursor < 0:
            self.opened()
        marks = marks_of(self.view)
        if not marks:
            return [heading("MARKS", width), BLANK, row(" No mark yet.  ", ("N", "strong"), " describes one.")]
        self.cursor = max(0, min(self.cursor, len(marks) - 1))
        tree = next_tree(self.view) if self.view else None
        chosen = tree["mark"]["name"] if tree else ""
        room = max(2, height - 9)
        self.top = scrolled_to(self.cursor, min(self.top, max(0, len(marks) - room)), room)
        rows = [heading("MARKS", width, f"{len(marks)} in the book; next set-up: {fit(chosen, 24) or 'none'}")]
        for index in range(self.top, min(len(marks), self.top + room)):
            rows.append(self._line(marks[index], index, chosen, width))
        rows += [BLANK] * (room + 1 - len(rows))
        return [*rows, BLANK, *mark_rows(marks[self.cursor], width)]

    def _line(self, tree: Tree, index: int, chosen: str, width: int) -> Row:
        count = len(self.view.state.of_mark(tree["name"])) if self.view else 0
        here = index == self.cursor
        sign = "▶ " if here else "  "
        flag = "● next " if tree["name"] == chosen else "       "
        name = pad(tree["name"], 22)
        times = f"{count} occupation{'s' if count != 1 else ''}" if count else "not occupied yet"
        return row(
            (f" {sign}", "accent"),
            (name, "chosen" if here else "strong"),
            " ",
            (flag, "good"),
            (pad(times, 18), "text"),
            (fit(tree.get("description", ""), max(0, width - 54)), "soft"),
        )

    def move(self, lines: int) -> None:
        """The cursor."""
        self.cursor = max(0, min(self.cursor + lines, len(marks_of(self.view)) - 1))
        self.redraw()

    def choose(self) -> None:
        """This mark for the next set-up."""
        marks = marks_of(self.view)
        if not marks or self.cursor < 0:
            return
        choose_mark(self, marks[self.cursor])


def choose_mark(page: Page, mark: Tree) -> None:
    """Write the choice and go on to the set-up."""
    desk, view = page.desk, page.view
    tree = next_tree(view) if view else None
    if tree is None or view is None:
        desk.tell("The book has no session yet: press 1, then F, and load a session file.", "bad")
        return
    opened = open_occupation(view)
    if opened is not None:
        desk.tell(f"Occupation {opened.number} of {opened.mark} is open: end it first (4, then E).", "bad")
        return
    if tree["mark"] == mark:
        desk.go("setup")
        return
    bridge = desk.bridge
    desk.write(lambda: bridge.save_session({**tree, "mark": mark}), lambda _: desk.go("setup"))
    desk.tell(f"Next set-up: {mark['name']}")


def mark_rows(tree: Tree, width: int) -> list[Row]:
    """A mark as described; what is not stated says so."""

    def stated(key: str) -> tuple[str, str]:
        return (str(tree[key]), "text") if tree.get(key) else ("not stated", "soft")

    rows = [labelled("Mark", tree["name"], width, style="strong")]
    for label, key in (
        ("Description", "description"),
        ("Access", "access"),
        ("Condition", "condition"),
    ):
        text, style = stated(key)
        rows.append(labelled(label, text, width, style=style))
    known = "known; asked for from the metal before a recording starts" if tree.get("inscription") else "not stated"
    rows.insert(2, labelled("Inscription", known, width, style="soft"))  # who has seen it reads what he expects
    witnesses = tree.get("witness_marks") or []
    if witnesses:
        rows.append(labelled("Witnesses", "; ".join(str(item.get("text", "")) for item in witnesses), width))
    return rows
