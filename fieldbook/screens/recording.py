"""Starting, resuming and ending the occupation; leaving the screen. The recorder itself is another process."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

from fieldbook.check.identity import same_inscription, was_read
from fieldbook.model.canonical import Tree
from fieldbook.model.reduction import LeaveLine
from fieldbook.model.session import Session
from fieldbook.screens.ask import Question
from fieldbook.screens.fields import Field
from fieldbook.screens.forms import Form, Values
from fieldbook.screens.heights import disagree
from fieldbook.screens.page import Desk, next_tree, open_occupation
from fieldbook.screens.setup import current_readings, current_session
from fieldbook.screens.words import leave_word, stopwatch


def start(desk: Desk) -> None:
    """Begin the occupation and its recorder, or start the recorder of the open one again."""
    view = desk.view
    if view is None:
        desk.tell("The book is still being opened: press again in a moment.", "bad")
        return
    opened = open_occupation(view)
    bridge = desk.bridge
    if opened is not None:
        if view.recorder_alive:
            desk.tell(f"Occupation {opened.number} of {opened.mark} is being recorded already.")
            desk.go("occupation")
            return
        number = opened.number
        desk.tell("starting the recorder …", "soft")
        desk.write(lambda: bridge.start_recorder(number), lambda _: _started(desk, number, resumed=True))
        return
    session, problem = current_session(view, bridge)
    tree = next_tree(view)
    if session is None or tree is None:
        desk.tell(problem, "bad")
        return
    expected = view.state.marks.get(session.mark.name, {}).get("inscription") or session.mark.inscription
    if session.setup.inscription_read is None and expected:
        _read_the_metal(desk, tree, session, str(expected))
        return
    _ask_start(desk, tree, session)


def _read_the_metal(desk: Desk, tree: Tree, session: Session, expected: str) -> None:
    """The inscription is typed before the expected one is shown: who has seen it reads what he expects."""

    def typed(values: Values | None) -> None:
        if values is None:
            return
        read = values["inscription_read"].strip()
        setup = {**tree["setup"], "inscription_read": read}
        if not was_read(read):
            said = f"The inscription was {read}."
        elif same_inscription(read, expected):
            said = f'The metal says "{read}", as it should.'
        else:
            said = f'■ The metal says "{read}", the description "{expected}". Is it the right mark?'
        _ask_start(desk, {**tree, "setup": setup}, session, said)

    field = Field("inscription_read", "The metal says", required=True, hint="or: not readable because ...")
    note = (
        "Type it as it stands there, before you look at the description. What cannot be read: not readable because ..."
    )
    desk.ask(Form(f"READ THE MARK: {session.mark.name}", [field], note=note), typed)


def _ask_start(desk: Desk, tree: Tree, session: Session, inscription: str = "") -> None:
    """The question that begins the occupation, with what it will be."""
    view, bridge = desk.view, desk.bridge
    if view is None:
        return
    text = [
        f"{session.mark.name}, antenna {session.antenna.model}, on {session.receiver.link}.",
        f"The receiver reports the {session.setup.reported_point}.",
    ]
    text.append(f"Its coordinates are taken to be in {session.frame.receiver}.")
    text += [inscription] if inscription else []
    readings = current_readings(view)
    judged = bridge.heights(session, readings)
    height = judged.height
    if height is not None and height.height_arp_m is not None:
        count = f"{len(readings)} reading{'s' if len(readings) > 1 else ''}"
        text.append(f"ARP {height.height_arp_m:.4f} m above the mark, from {count}.")
        text += [f"■ {wrong}"] if (wrong := disagree(judged.findings)) else []
    else:
        text.append("No height of antenna was read yet. It may be read later, but before the tripod moves.")

    def answered(word: str) -> None:
        if word == "start":
            desk.tell("starting the recorder …", "soft")
            desk.write(lambda: bridge.begin(tree), lambda made: _started(desk, made[0], resumed=made[1]))

    desk.ask(
        Question("START RECORDING?", text, "go back, nothing is begun", [("y", "start", "yes, begin the occupation")]),
        answered,
    )


def _started(desk: Desk, number: int, *, resumed: bool) -> None:
    desk.tell(f"occupation {number} is {'recorded again' if resumed else 'begun'}; the recorder runs on its own")
    desk.go("occupation")


def end(desk: Desk, then: Callable[[], None] | None = None) -> None:
    """End the occupation, after asking."""
    view = desk.view
    opened = open_occupation(view)
    if view is None or opened is None:
        desk.tell("No occupation is open.", "bad")
        return
    text = [
        f"Occupation {opened.number} of {opened.mark}, {stopwatch(view.elapsed_s)} recorded. It cannot be opened again."
    ]
    leave = view.reduction.leave if view.reduction else None
    missing = [item for item in leave.lines if item.scope == "set-up" and not item.met] if leave else []
    if leave is None:
        text.append("Nothing is reduced yet: the leave check says NOT YET.")
    elif missing:
        text.append(f"The leave check says {leave.verdict.upper()}: {len(missing)} lines of this set-up are open.")
        text += [f"○ {leave_word(item.line)}: {item.text}" for item in missing if item.text][:4]
    bridge, number = desk.bridge, opened.number

    def go(reasons: Sequence[tuple[str, str]] = ()) -> None:
        desk.tell("ending the occupation …", "soft")
        desk.write(lambda: bridge.end(number, reasons), ended)

    def ended(_: Any) -> None:
        desk.tell(f"occupation {number} is ended")
        if then:
            then()

    def answered(word: str) -> None:
        if word == "end" and missing:
            _reasons(desk, missing, go)
        elif word == "end":
            go()

    desk.ask(Question("END THE OCCUPATION?", text, "keep recording", [("y", "end", "yes, end it")]), answered)


def _reasons(desk: Desk, missing: Sequence[LeaveLine], then: Callable[[Sequence[tuple[str, str]]], None]) -> None:
    """Ask why each open line is left open; Esc keeps recording."""
    fields = [Field(item.line, leave_word(item.line), required=number == 0) for number, item in enumerate(missing)]

    def written(values: Values | None) -> None:
        if values is None:
            return
        reasons: list[tuple[str, str]] = []
        for item in missing:
            above = reasons[-1][1] if reasons else ""
            reasons.append((item.line, values[item.line] or above))
        then(reasons)

    note = "What is left open prints on the certificate with its reason. An empty line takes the reason above it."
    desk.ask(Form("WHY IS IT LEFT OPEN?", fields, note=f"{note} Esc: the recording goes on."), written)


def leave_screen(desk: Desk, exit_now: Callable[[], None]) -> None:
    """Ask what becomes of the recorder; staying is the safe answer."""
    view = desk.view
    opened = open_occupation(view)
    if view is None or opened is None:
        text = ["No occupation is open. Everything written is in the book."]
        answers = [("l", "leave", "leave the screen")]
    elif view.recorder_alive:
        text = [f"Occupation {opened.number} of {opened.mark} is being recorded."]
        answers = [
            ("l", "leave", "leave the screen, the recorder runs on"),
            ("e", "end", "end the occupation first (asks again)"),
        ]
    else:
        text = [f"Occupation {opened.number} of {opened.mark} is open, and NO recorder runs."]
        answers = [
            ("l", "leave", "leave the screen, the occupation stays open"),
            ("e", "end", "end the occupation first (asks again)"),
        ]

    def answered(word: str) -> None:
        if word == "leave":
            exit_now()
        elif word == "end":
            end(desk, exit_now)

    desk.ask(Question("LEAVE THE SCREEN?", text, "stay", answers), answered)
