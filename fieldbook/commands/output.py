"""The only writer of the commands: data on stdout, everything else on stderr.

Texts of a book may come from anybody. A name such as `\\x1b[2J` must not clear the reader's terminal, and a direction
override must not make a coordinate read backwards: whatever is printed as text passes `plain`, JSON escapes by itself.
"""

from __future__ import annotations

import json
import sys
from typing import Any

import click

from fieldbook.errors import FieldbookError
from fieldbook.model.visible import visible

TYPED_SHOWN = 100  # characters before and behind the one that is wrong
LONGEST_ERROR = 3000  # what is repeated in an error may be a whole file


def plain(value: object) -> str:
    r"""The text with everything that could move a cursor, turn a line or hide written as `\x1b` or `\u202e`."""
    return visible(str(value))


def line(text: object = "") -> None:
    """One line of data on stdout, made harmless."""
    click.echo(plain(text))


def note(text: object) -> None:
    """One line on stderr: progress, advice, where a file went."""
    click.echo(plain(text), err=True)


def write_json(tree: dict[str, Any]) -> None:
    """One JSON object on stdout; ASCII only, so that no text in it can steer a terminal."""
    click.echo(json.dumps(tree, indent=1, allow_nan=False))


def write_error(error: FieldbookError, *, as_json: bool) -> None:
    """An error with its remedy: `error: ...` on stderr, or one JSON object on stdout."""
    typed, column = getattr(error, "typed", None), getattr(error, "column", 0)
    if as_json:
        tree: dict[str, Any] = {"code": error.code, "text": error.text, "remedy": error.remedy}
        if typed is not None:
            tree |= {"typed": typed, "column": column}
        write_json({"schema": "fieldbook.error/1", "error": tree})
        return
    if typed is not None:  # what was typed, and a mark under the character that is wrong
        start = max(0, column - TYPED_SHOWN) if len(typed) > 2 * TYPED_SHOWN else 0
        note(f"  {typed[start : start + 2 * TYPED_SHOWN]}")
        note(f"  {' ' * len(plain(typed[start:column]))}^")
    text = f"error: {error}"
    note(text if len(text) <= LONGEST_ERROR else text[:LONGEST_ERROR] + "…")


class Progress:
    """One line on stderr that is overwritten; silent where stderr is no terminal."""

    def __init__(self) -> None:
        self._shown = sys.stderr.isatty()
        self._open = False

    def show(self, text: str) -> None:
        """Replace the line."""
        if self._shown:
            click.echo(f"\r\x1b[K{plain(text)}", err=True, nl=False)
            self._open = True

    def close(self) -> None:
        """Leave the last line standing and go to the next."""
        if self._open:
            click.echo("", err=True)
            self._open = False
