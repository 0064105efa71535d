"""Who may import whom: the contracts of pyproject.toml, and what a cold start may load."""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
HEAVY = ("cryptography", "numpy", "scipy", "pyproj", "textual", "sqlite_utils", "pynmea2", "typst", "serial", "rich")


def test_import_contracts_hold() -> None:
    done = subprocess.run(
        [
            sys.executable,
            "-c",
            "from importlinter.cli import lint_imports_command; lint_imports_command()",
            "--no-cache",
        ],
        cwd=ROOT,
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stdout + done.stderr
    assert "0 broken" in done.stdout


def loaded_by(code: str) -> set[str]:
    """Heavy modules in sys.modules after running a line of code in a fresh interpreter."""
    program = f"{code}\nimport json, sys\nprint('\\n' + json.dumps(sorted(set(sys.modules) & set({HEAVY!r}))))"
    done = subprocess.run([sys.executable, "-c", program], cwd=ROOT, capture_output=True, text=True, check=True)
    return set(json.loads(done.stdout.splitlines()[-1]))


def test_help_loads_nothing_heavy() -> None:
    code = "from click.testing import CliRunner\nfrom fieldbook.commands import group\nprint(CliRunner().invoke(group, ['--help']).output)"
    assert loaded_by(code) == set()


def test_recorder_loads_neither_numbers_nor_screens() -> None:
    assert (
        loaded_by("import fieldbook.occupy.recorder") & {"cryptography", "numpy", "scipy", "pyproj", "textual", "rich"}
        == set()
    )


def test_signing_is_loaded_only_where_there_is_a_key() -> None:
    code = "import fieldbook.occupy.foreground, fieldbook.commands.observe, fieldbook.commands.entry\n"
    code += (
        "from fieldbook.signing.signer import signer_without_asking\nassert signer_without_asking('R. Kell')[0] is None"
    )
    assert "cryptography" not in loaded_by(code)


@pytest.mark.parametrize("module", ["fieldbook.nmea.decoder", "fieldbook.book", "fieldbook.links"])
def test_the_way_of_a_byte_is_light(module: str) -> None:
    assert loaded_by(f"import {module}") & {"cryptography", "numpy", "scipy", "pyproj", "textual", "rich"} == set()


def test_nothing_reads_outside_the_repository() -> None:
    """The repository stands alone: no file of it names the folder it was drawn up beside, or a path of one machine."""
    forbidden = ["../" + "shared", "/" + "work/", "/" + "root/"]
    for folder in ("fieldbook", "tests", "sample_sessions", ".ci"):
        for path in (ROOT / folder).rglob("*"):
            if path.suffix in {".py", ".toml", ".md", ".typ", ".html", ".tcss", ""} and path.is_file():
                text = path.read_text(encoding="utf-8", errors="replace")
                for word in forbidden:
                    assert word not in text, f"{path} names {word}"
