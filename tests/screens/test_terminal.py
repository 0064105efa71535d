"""The whole job by keys on a real pseudo-terminal of 80x24, read through pyte."""

from __future__ import annotations

import os
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

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


@pytest.fixture
def terminal() -> Iterator[Terminal]:
    if sys.platform == "win32":
        pytest.skip("not run: pseudo-terminals missing")
    made = Terminal(
        [python(), "-c", FAKE], env={"PYTHONPATH": os.pathsep.join([str(ROOT), os.environ.get("PYTHONPATH", "")])}
    )
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
    terminal.press(*["enter"] * 5)
    terminal.see("written: slant 1.533 m before", "2 readings")
    terminal.press("s")
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


def test_ctrl_c_asks_and_staying_is_the_safe_answer(terminal: Terminal) -> None:
    terminal.see("FIELD BOOK", "Kestrel Ridge control")
    terminal.press("\x03")
    terminal.see("LEAVE THE SCREEN?")
    terminal.press("enter")
    terminal.see("FIELD BOOK")
    assert terminal.child.poll() is None
