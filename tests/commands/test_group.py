"""The group: help without loading anything heavy, one form of error, exit codes."""

from __future__ import annotations

import json
import subprocess
import sys

import click
import pytest

from fieldbook import commands
from fieldbook.commands import COMMANDS, group
from fieldbook.errors import BookError, LinkError, ReductionError, UsageError

HEAVY = ("numpy", "pyproj", "scipy", "textual", "sqlite_utils", "pynmea2", "serial", "typst", "pypdf")


def run(*arguments: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run([sys.executable, "-m", "fieldbook", *arguments], capture_output=True, text=True, check=False)


def test_help_lists_every_command_and_loads_nothing_heavy() -> None:
    code = (
        "import sys; from fieldbook import commands; code = commands.run(['--help']); "
        f"loaded = [name for name in {HEAVY!r} if name in sys.modules]; assert not loaded, loaded; sys.exit(code)"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    for name in COMMANDS:
        assert f"\n  {name} " in done.stdout


@pytest.mark.parametrize(
    "name", ["new", "observe", "status", "watch", "links", "entry", "strike", "marks", "export", "open"]
)
def test_every_command_has_help_and_is_light_to_load(name: str, fieldbook) -> None:
    said = fieldbook(name, "--help")
    assert said.code == 0
    assert "Usage: fieldbook" in said.out
    command = group.get_command(click.Context(group), name)
    assert command is not None
    assert command.name == name


def test_an_unknown_command_names_the_nearest() -> None:
    done = run("obsrve")
    assert done.returncode == 2
    assert '"observe"' in done.stderr
    assert "Traceback" not in done.stderr


@pytest.mark.parametrize("arguments", [("status",), ("status", "--jsn", "x"), ("entry", "b", "poem", "--by", "x")])
def test_slips_of_the_command_line_are_exit_2_with_a_remedy(arguments: tuple[str, ...], fieldbook) -> None:
    said = fieldbook(*arguments)
    assert said.code == 2
    assert said.err.startswith("error: ")
    assert "--help" in said.err


@pytest.mark.parametrize(
    ("error", "code"),
    [(UsageError("t", "r"), 2), (LinkError("t", "r"), 3), (BookError("t", "r"), 4), (ReductionError("t", "r"), 5)],
)
def test_errors_become_text_or_json_and_the_exit_code(error, code, monkeypatch, fieldbook) -> None:
    def fail(**_: object) -> None:
        raise error

    broken = click.Command("status", callback=fail, params=[click.Option(["--json", "as_json"], is_flag=True)])
    monkeypatch.setattr("fieldbook.commands.LazyGroup.get_command", lambda *_: broken)
    said = fieldbook("status")
    assert (said.code, said.out, said.err) == (code, "", "error: t r\n")
    said = fieldbook("status", "--json")
    assert said.code == code
    assert said.json == {"schema": "fieldbook.error/1", "error": {"code": error.code, "text": "t", "remedy": "r"}}


@pytest.mark.skipif(sys.platform == "win32", reason="not run: no pipes of this kind")
def test_a_reader_that_goes_away_is_no_failure(book) -> None:
    listed = subprocess.Popen(
        [sys.executable, "-m", "fieldbook", "marks", "list", str(book)], stdout=subprocess.PIPE, stderr=subprocess.PIPE
    )
    assert listed.stdout is not None
    listed.stdout.close()
    _, err = listed.communicate(timeout=60)
    assert (listed.returncode, err) == (0, b"")


@pytest.mark.parametrize(("raised", "code"), [(KeyboardInterrupt(), 130), (BrokenPipeError(), 0)])
def test_interrupt_and_a_closed_pipe(raised, code) -> None:
    script = (
        "import sys, click; from fieldbook import commands\n"
        f"def fail(): raise {type(raised).__name__}()\n"
        "commands.LazyGroup.get_command = lambda *_: click.Command('status', callback=fail)\n"
        "sys.exit(commands.run(['status']))"
    )
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=False)
    assert done.returncode == code
    assert "Traceback" not in done.stderr


def test_an_error_text_cannot_steer_the_terminal(fieldbook) -> None:
    said = fieldbook("status", "no\x1b[2Jbook")
    assert said.code == 2
    assert "\x1b" not in said.err
    assert "\\x1b[2J" in said.err


def test_version_and_no_arguments() -> None:
    assert run("--version").stdout.startswith("fieldbook, version ")
    done = run()
    assert done.returncode == 0
    assert "Commands:" in done.stdout


def test_main_is_the_console_script(monkeypatch) -> None:
    monkeypatch.setattr(sys, "argv", ["fieldbook", "--version"])
    with pytest.raises(SystemExit) as stop:
        commands.main()
    assert stop.value.code == 0


def test_json_errors_are_one_object() -> None:
    done = run("status", "missing.book", "--json")
    assert done.returncode == 2
    assert json.loads(done.stdout)["error"]["code"] == "no_such_book"
    assert done.stderr == ""
