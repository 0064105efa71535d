"""A call of `fieldbook` in this process, and what it said."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import pytest

from fieldbook import commands


@dataclass
class Said:
    """What a command said."""

    code: int
    out: str
    err: str

    @property
    def json(self) -> Any:
        """stdout as JSON."""
        return json.loads(self.out)


Call = Callable[..., Said]


def caller(capsys: pytest.CaptureFixture[str]) -> Call:
    """Calls a command and takes what it writes."""

    def call(*arguments: object) -> Said:
        capsys.readouterr()
        code = commands.run([str(argument) for argument in arguments])
        captured = capsys.readouterr()
        return Said(code, captured.out, captured.err)

    return call
