"""The whole job by keys on a real pseudo-terminal of 80x24, read through pyte."""

from __future__ import annotations

import os
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import pytest

from fieldbook.book.lock import held
from fieldbook.book.store import Book
from fieldbook.clock import SystemClock
from fieldbook.occupy.ending import request_end

from .fakes import SESSION_TREE
from .terminal import Terminal, python

pytestmark = pytest.mark.system
ROOT = Path(__file__).resolve().parents[2]
FAKE = """
import sys
from tests.screens.fakes import NOW_MS, FakeBridge
from fieldbook.clock import FakeClock
from fieldbook.screens.app import FieldbookApp
sys.exit(FieldbookApp(FakeBridge(), clock=FakeClock(0, NOW_MS), theme="noon").run(mouse=False) or 0)
"""


def start(env: dict[str, str]) -> Terminal:
    """The app on the invented job, on its own pseudo-terminal."""
    paths = os.pathsep.join([str(ROOT), os.environ.get("PYTHONPATH", "")])
    return Terminal([python(), "-c", FAKE], env={"PYTHONPATH": paths, **env})


@pytest.fixture
def terminal() -> Iterator[Terminal]:
    if sys.platform == "win32":
        pytest.skip("not run: pseudo-terminals missing")
    made = start({})
    try:
        yield made
    finally:
        made.close()


def test_whole_job_by_keys_on_an_invented_book(terminal: Terminal) -> None:
    """Cover, mark, height, start, remark, leave check, distance view, end, reduction, draft, strike, quit."""
    terminal.see("FIELD BOOK", "Kestrel Ridge control")
    terminal.press("enter")
    terminal.see("MARKS", "brass plate in rock")
    terminal.press("enter")
    terminal.see("SET-UP", "PHASE CENTRE")
    terminal.press("h")
    terminal.see("which distance are you reading", "rim notch")
    terminal.press(*"1.533")
    terminal.see("readings agree: 1.0 mm apart")
    terminal.press(*["enter"] * 6)
    terminal.see("written: slant 1.533 m before", "2 readings")
    terminal.press("s")
    terminal.see("READ THE MARK")
    terminal.press(*"KR 07 1998", "enter")
    terminal.see("START RECORDING?")
    terminal.press("y")
    terminal.see("FIGURES", "recording", "RTK fixed", "NOT YET")
    terminal.press("tab")
    terminal.see("SKETCH", "×", "20 mm")
    terminal.press("tab", "r")
    terminal.see("REMARK to occupation 1")
    terminal.press(*"lorry 8 m N", "enter")
    terminal.see("remark written")
    terminal.see("lorry 8 m N")
    terminal.press("l")
    terminal.see("MAY THE TRIPOD COME DOWN?", "Come back from 13:40 UTC")
    terminal.press("b")
    terminal.see("████", "B or Esc: back")
    terminal.press("b")
    terminal.see("MAY THE TRIPOD COME DOWN?")
    terminal.press("e")
    terminal.see("END THE OCCUPATION?", "keep recording")
    terminal.press("y")
    terminal.see("WHY IS IT LEFT OPEN?")
    terminal.press(*"dark", "enter", "enter")
    terminal.see("occupation 1 is ended")
    terminal.press("6")
    terminal.see("REDUCTION", "as observed", "E 692244.123")
    terminal.press("7")
    terminal.see("CERTIFICATE", "Nothing is missing.")
    terminal.press("d")
    terminal.see("DRAFT of KR-07")
    terminal.press("enter", "enter")
    terminal.see("draft is in")
    terminal.press("8")
    terminal.see("DIARY", "lorry 8 m N")
    terminal.press("q")
    terminal.see("LEAVE THE SCREEN?")
    terminal.press("l")
    assert terminal.wait() == 0


def test_no_color_leaves_words_and_shapes() -> None:
    made = start({"NO_COLOR": "1"})
    try:
        made.see("FIELD BOOK", "Kestrel Ridge control")
        colours = {
            colour
            for line in made.screen.buffer.values()
            for cell in line.values()
            for colour in (cell.fg, cell.bg)
            if len(colour) == 6 and colour != "default"
        }
        assert all(colour[0:2] == colour[2:4] == colour[4:6] for colour in colours), colours
    finally:
        made.close()


def test_ctrl_c_asks_and_staying_is_the_safe_answer(terminal: Terminal) -> None:
    terminal.see("FIELD BOOK", "Kestrel Ridge control")
    terminal.press("\x03")
    terminal.see("LEAVE THE SCREEN?")
    terminal.press("enter")
    terminal.see("FIELD BOOK")
    assert terminal.child.poll() is None


@pytest.fixture
def book(tmp_path: Path) -> Iterator[Path]:
    """A real book whose receiver is the simulated one, sixty times as fast as life."""
    tree = {**SESSION_TREE, "receiver": {"link": "sim:rtk?seed=7&speed=60"}}
    path = tmp_path / "real.book"
    Book.create(path, clock=SystemClock(), observer="R. Kell", session_tree=tree).close_clean()
    yield path
    deadline = time.monotonic() + 20.0
    while held(path) and time.monotonic() < deadline:
        with Book.open(path, clock=SystemClock()) as opened:
            left = opened.state().open_occupation
        if left is not None:
            request_end(path, left.number, "R. Kell")
    assert not held(path)


def on_real_book(book: Path) -> Terminal:
    """`fieldbook open BOOK` in a terminal of its own."""
    if sys.platform == "win32":
        pytest.skip("not run: pseudo-terminals missing")
    paths = os.pathsep.join([str(ROOT), os.environ.get("PYTHONPATH", "")])
    return Terminal([python(), "-m", "fieldbook", "open", str(book)], env={"PYTHONPATH": paths})


def test_whole_job_on_a_real_book_and_a_simulated_receiver(book: Path) -> None:
    """Set-up, occupation, second reading, end, reduction and a draft on paper, by keys; the book holds what was done."""
    terminal = on_real_book(book)
    try:
        terminal.see("FIELD BOOK", "Kestrel Ridge control")
        terminal.press("3")
        terminal.see("SET-UP", "PHASE CENTRE", "1.4946 m")
        terminal.press("s")
        terminal.see("READ THE MARK")
        terminal.press(*"KR 07 1998", "enter")
        terminal.see("START RECORDING?", "EPSG:7912")
        terminal.press("y")
        terminal.see("FIGURES", "RTK fixed", "kept of", "wanted 20 mm")
        terminal.press("tab")
        terminal.see("SKETCH", "├", "dB-Hz")
        terminal.press("tab", "h")
        terminal.see("which distance are you reading")
        terminal.press(*"1.5330", *["enter"] * 6)
        terminal.see("written: slant 1.5330 m after")
        terminal.press("l")
        terminal.see("MAY THE TRIPOD COME DOWN?", "initialisations that agree")
        terminal.press("e")
        terminal.see("END THE OCCUPATION?")
        terminal.press("y")
        terminal.see("WHY IS IT LEFT OPEN?")
        terminal.press(*"practice", *["enter"] * 6)  # each open line takes the reason above it
        terminal.see("occupation 1 is ended")
        terminal.press("6")
        terminal.see("REDUCTION", "GDA2020", "as observed")
        terminal.press("7")
        terminal.see("the occupation is simulated")
        terminal.press("d")
        terminal.see("DRAFT of KR-07")
        terminal.press("right", "right", "enter", "enter")  # txt
        terminal.see("draft is in", within_s=60.0)
        terminal.press("q")
        terminal.see("LEAVE THE SCREEN?")
        terminal.press("l")
        assert terminal.wait() == 0
    finally:
        terminal.close()
    assert "KR-07" in (book.parent / "KR-07-1-draft.txt").read_text(encoding="utf-8")
    with Book.open(book, clock=SystemClock()) as opened:
        kinds = [entry.kind for entry in opened.entries()]
    assert {"occupation", "height", "end", "draft", "rendered"} <= set(kinds)


def test_killed_screen_leaves_the_recorder_and_another_screen_attaches(book: Path) -> None:
    first = on_real_book(book)
    try:
        first.see("FIELD BOOK", "Kestrel Ridge control")
        first.press("3")
        first.see("SET-UP", "PHASE CENTRE")
        first.press("s")
        first.see("READ THE MARK")
        first.press(*"KR 07 1998", "enter")
        first.see("START RECORDING?")
        first.press("y")
        first.see("FIGURES", "RTK fixed")
        first.child.kill()
        first.child.wait()
    finally:
        first.close()  # the terminal is gone as well
    assert held(book)
    with Book.open(book, clock=SystemClock()) as opened:
        heard = len(opened.epochs(1))
        deadline = time.monotonic() + 20.0
        while len(opened.epochs(1)) <= heard + 60:
            assert time.monotonic() < deadline, "the recorder went on"
            time.sleep(0.05)  # another process is waited for
    second = on_real_book(book)
    try:
        second.see("FIGURES", "occupation 1  recording", "RTK fixed", "kept of")
        second.press("q")
        second.see("the recorder runs on")
        second.press("l")
        assert second.wait() == 0
    finally:
        second.close()
    assert held(book)


def test_a_closed_terminal_ends_the_screen(book: Path) -> None:
    """No hang-up signal reaches this child: it has no controlling terminal. It must leave all the same."""
    made = Terminal([python(), "-m", "fieldbook", "open", str(book)])
    try:
        made.see("FIELD BOOK")
        made.vanish()
        assert made.child.wait(timeout=30) == 0
    finally:
        made.close()
