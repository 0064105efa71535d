"""The one table of what a person can do: bindings, foot line, palette and help are made from it.

A letter means one thing everywhere; on a page where it does not apply it does nothing and is not shown. No control
combinations; function keys only as doubles. An action that writes or ends something asks first or takes a typed
form, so two adjacent slips of the hand destroy nothing.
"""

from __future__ import annotations

from dataclasses import dataclass

PAGES = ("cover", "marks", "setup", "occupation", "leave", "reduction", "certificate", "diary", "links")
PAGE_TITLES = {
    "cover": "cover", "marks": "marks", "setup": "set-up", "occupation": "occupation", "leave": "leave check",
    "reduction": "reduction", "certificate": "certificate", "diary": "diary", "links": "links",
}  # fmt: skip
PAGE_TABS = {
    "cover": "cover", "marks": "marks", "setup": "set-up", "occupation": "occup.", "leave": "leave",
    "reduction": "reduct.", "certificate": "certif.", "diary": "diary", "links": "links",
}  # fmt: skip


@dataclass(frozen=True)
class Action:
    """One thing a person can do."""

    name: str  # the method action_<name of this> of the book screen
    key: str  # Textual's name of the key
    shown: str  # what stands on the key
    label: str  # two words at most, for the foot line
    help: str
    command: str  # the command that does the same, "" where there is nothing to do but look
    pages: tuple[str, ...] = PAGES
    foot: int = 0  # 0 = not in the foot line; 1 comes first
    double: str = ""  # a function key as a double

    @property
    def keys(self) -> str:
        """Keys for a Textual binding: both cases of a letter, and the double."""
        both = [self.key, self.key.upper()] if len(self.key) == 1 and self.key.isalpha() else [self.key]
        return ",".join([*both, *([self.double] if self.double else [])])


FACING = ("setup", "occupation", "reduction")
LISTS = ("marks", "diary", "reduction", "certificate", "links", "leave", "cover", "setup", "occupation")

ACTIONS: tuple[Action, ...] = (
    Action("load_session", "f", "F", "session file", "Load frames, requirement and antenna from a session file.",
           "fieldbook new BOOK --from FILE", ("cover",), 1),
    Action("profile", "c", "C", "criteria", "Take the requirement of a published document for the next occupation.",
           "fieldbook profiles show NAME", ("cover",), 3),
    Action("observer", "o", "O", "observer", "Say who signs the entries from now on.", "--by NAME", ("cover",), 2),
    Action("new_mark", "n", "N", "new mark", "Describe a mark and choose it.", "fieldbook entry BOOK mark",
           ("marks",), 2),
    Action("height", "h", "H", "height", "Write a height reading.", "fieldbook entry BOOK height", PAGES, 3),
    Action("antenna", "a", "A", "antenna", "Change the antenna's data.", "fieldbook entry BOOK setup", ("setup",), 4),
    Action("point", "p", "P", "point", "Say what point the receiver reports, and how the antenna is centred.",
           "fieldbook entry BOOK setup", ("setup",), 4),
    Action("link", "k", "K", "link", "Type the link to the receiver.", "fieldbook observe --link URL",
           ("setup", "links"), 5),
    Action("start", "s", "S", "start", "Begin the occupation and its recorder, or start the recorder of the open one.",
           "fieldbook observe BOOK", ("cover", "marks", "setup", "occupation"), 2),
    Action("remark", "r", "R", "remark", "Write a remark.", "fieldbook entry BOOK remark", PAGES, 4),
    Action("graph", "g", "G", "graph", "Turn the lower figure: height of the epochs, or the running mean with its 95 %.",
           "fieldbook reduce BOOK --json", ("occupation",), 9),
    Action("frames", "m", "M", "frames", "Show which operation leads to the client's frame here, and what it does.",
           "fieldbook frames show --book BOOK", ("cover", "setup", "reduction"), 9),
    Action("leave", "l", "L", "leave check", "Show every line of the leave check.", "fieldbook status BOOK", PAGES, 5),
    Action("big", "b", "B", "big", "One word and one number, to be read from three metres.",
           "fieldbook watch BOOK", PAGES, 6),
    Action("end", "e", "E", "end", "End the occupation. Asks first.", "fieldbook entry BOOK end",
           ("setup", "occupation", "leave", "cover"), 7),
    Action("copy", "y", "Y", "copy", "Copy the coordinate in sight, with frame, epoch and 95 %: to the clipboard or a file.",
           "fieldbook marks coordinates BOOK MARK", ("reduction",), 3),
    Action("update", "u", "U", "update", "Reduce again, or list again.", "fieldbook reduce BOOK",
           ("reduction", "certificate", "links"), 2),
    Action("issue", "i", "I", "issue", "Issue the certificate, signed off.", "fieldbook certify BOOK MARK --sign-off",
           ("certificate",), 1),
    Action("draft", "d", "D", "draft", "Write a draft: no number, DRAFT across the page.",
           "fieldbook certify BOOK MARK", ("certificate",), 1),
    Action("strike", "x", "X", "strike", "Strike out, with a reason: an entry, or the last reading. It stays legible.",
           "fieldbook strike BOOK SEQ", ("diary", "setup"), 3),
    Action("explain", "v", "V", "explain", "Say why height readings differ and still stand: a decision, printed with them.",
           "fieldbook entry BOOK decision", ("setup", "occupation", "leave"), 8),
    Action("whole", "w", "W", "whole diary", "Show or hide the recorder's own entries.", "", ("diary",), 2),
    Action("choose", "enter", "Enter", "choose", "Choose the line, or go to the next page of the work.", "",
           ("cover", "marks", "links"), 1),
    Action("turn", "tab", "Tab", "turn page", "Turn to the facing page.", "", FACING, 1),
    Action("up", "up", "↑", "up", "Up one line.", "", LISTS),
    Action("down", "down", "↓", "down", "Down one line.", "", LISTS),
    Action("page_up", "pageup", "PgUp", "page up", "Up ten lines.", "", LISTS),
    Action("page_down", "pagedown", "PgDn", "page down", "Down ten lines.", "", LISTS),
    Action("previous", "left", "←", "previous", "The occupation before.", "", ("reduction", "certificate")),
    Action("next", "right", "→", "next", "The next occupation.", "", ("reduction", "certificate")),
    Action("theme", "t", "T", "light", "Next theme: noon, dusk, lamp, console.", ""),
    Action("seen", "space", "Space", "seen", "Say that the alarms have been seen; they stand in the diary.", "", PAGES, 1),
    Action("keys", "question_mark", "?", "keys", "Show every key.", "fieldbook --help", PAGES, 8, "f1"),
    Action("palette", "colon", ":", "find", "Find an action by its name.", ""),
    Action("quit", "q", "Q", "quit", "Leave the screen. Asks what becomes of the recorder.", "", PAGES, 9),
)  # fmt: skip
BY_NAME = {action.name: action for action in ACTIONS}


def for_page(page: str) -> list[Action]:
    """The actions that apply on a page."""
    return [action for action in ACTIONS if page in action.pages]


def foot_text(page: str, width: int, *, hide: frozenset[str] = frozenset()) -> list[tuple[str, str]]:
    """(key, label) pairs of the foot line, the most wanted first, as many as fit; `? keys` always does."""
    wanted = sorted((item for item in for_page(page) if item.foot and item.name not in hide), key=lambda a: a.foot)
    last = BY_NAME["keys"]
    room = width - len(f"{last.shown} {last.label}") - 2
    shown: list[tuple[str, str]] = []
    for item in wanted:
        size = len(item.shown) + len(item.label) + 3
        if item is last or size > room:
            continue
        room -= size
        shown.append((item.shown, item.label))
    return [*shown, (last.shown, last.label)]
