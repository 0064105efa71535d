"""README and DEVELOPERS.md say what the program does: every command, option, key, kind and exit code is in them."""

from __future__ import annotations

import re
import subprocess
import sys
from pathlib import Path

import pytest

from fieldbook.book.kinds import KINDS
from fieldbook.commands import COMMANDS
from fieldbook.errors import ExitCode
from fieldbook.screens.actions import ACTIONS
from fieldbook.settings.schema import TABLES

ROOT = Path(__file__).parents[2]
README = (ROOT / "README.md").read_text(encoding="utf-8")
DEVELOPERS = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")


@pytest.mark.parametrize("name", COMMANDS)
def test_every_command_is_in_the_readme_with_its_options(name: str) -> None:
    rows = [row for row in README.splitlines() if row.startswith(f"| `fieldbook {name}")]
    assert rows, f"README has no row for {name}"
    done = subprocess.run(
        [sys.executable, "-m", "fieldbook", name, "--help"], cwd=ROOT, capture_output=True, text=True, check=True
    )
    # `--json` is promised once for all; short details of marks import and export are in their own help
    for option in set(re.findall(r"(?<![\w-])--[a-z][a-z-]+", done.stdout)) - {"--help", "--json"}:
        assert any(option in row for row in rows), f"README's row of {name} lacks {option}"


def test_every_entry_kind_is_in_the_developers_page() -> None:
    for kind in KINDS:
        assert f"`{kind}`" in DEVELOPERS, kind


def test_every_exit_code_is_in_the_readme() -> None:
    sentence = README.split("Exit codes:")[1].split("\n\n")[0]
    for code in ExitCode:
        assert re.search(rf"\b{int(code)}\b", sentence), code


def test_every_folder_of_the_package_is_on_the_map() -> None:
    for folder in (ROOT / "fieldbook").iterdir():
        if folder.is_dir() and folder.name not in {"__pycache__", "data"}:
            assert f"{folder.name}/" in DEVELOPERS, folder.name


def test_the_readme_has_two_commands_and_ci_runs_the_second() -> None:
    for number in (1, 2):
        assert f"<!-- command {number} -->" in README
    assert "command 2" in (ROOT / ".ci" / "run").read_text(encoding="utf-8")


@pytest.mark.parametrize("table", TABLES)
def test_every_session_key_is_in_the_readme(table: str) -> None:
    section = README.split("## The session file")[1].split("\n## ")[0]
    for key in TABLES[table]:
        assert re.search(rf"\b{key}\b", section), f"{table}.{key}"


def test_every_key_of_the_screen_is_in_the_readme() -> None:
    section = README.split("## Keys of the screen")[1].split("\n## ")[0]
    for action in ACTIONS:
        if action.name not in {"up", "down", "page_up", "page_down", "previous", "next"}:
            assert action.help in section, action.name
