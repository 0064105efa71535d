"""Every error a user can meet, as one tree, with its exit code.

    FieldbookError                       text, remedy, exit_code
    ├── UsageError            2          wrong argument, session file or setting; nothing was written
    ├── LinkError             3          a port, host or file that cannot be opened or was lost for good
    ├── BookError             4          not a book, newer than this program, damaged, locked
    ├── ReductionError        5          this occupation cannot be reduced; `code` names why
    └── Interrupted         130          stopped by the operator; all that was received is committed

An error says what, where, and the remedy. The text is for a tired person: one sentence each.
"""

from __future__ import annotations

from enum import IntEnum


class ExitCode(IntEnum):
    """Exit codes of the `fieldbook` command, fixed for scripts."""

    OK = 0
    DOES_NOT_HOLD = 1
    USAGE = 2
    LINK = 3
    BOOK = 4
    REDUCTION = 5
    INTERRUPTED = 130


class FieldbookError(Exception):
    """An error with a remedy.

    Args:
        text: what is wrong and where, one sentence.
        remedy: what to do about it, one sentence.
        code: short machine-readable word, for JSON output.
    """

    exit_code: ExitCode = ExitCode.USAGE
    default_code = "error"

    def __init__(self, text: str, remedy: str = "", *, code: str | None = None) -> None:
        super().__init__(text)
        self.text = text
        self.remedy = remedy
        self.code = code or self.default_code

    def __str__(self) -> str:
        return f"{self.text} {self.remedy}".strip()


class UsageError(FieldbookError):
    """A wrong argument, session file or setting. Nothing was written."""

    exit_code = ExitCode.USAGE
    default_code = "usage"


class LinkError(FieldbookError):
    """A link that cannot be opened, or is lost for good."""

    exit_code = ExitCode.LINK
    default_code = "link"


class BookError(FieldbookError):
    """A file that is no book, is newer than this program, is damaged, or is locked by a recorder."""

    exit_code = ExitCode.BOOK
    default_code = "book"


class ReductionError(FieldbookError):
    """An occupation that cannot be reduced: no usable fix, a frame, geoid or grid that cannot be reached."""

    exit_code = ExitCode.REDUCTION
    default_code = "not_reduced"


class Interrupted(FieldbookError):
    """Stopped by the operator; everything received is committed."""

    exit_code = ExitCode.INTERRUPTED
    default_code = "interrupted"
