"""Starting a recorder that outlives whoever started it.

The child gets its own session (on Windows its own process group without a console), so that closing the terminal or
killing the screen does not reach it. It says `started` or its error as one line on a pipe, then lets go of the pipe;
nothing is written beside the book. Whether a recorder runs is asked of the lock, never of a process number.
"""

from __future__ import annotations

import json
import os
import subprocess
import sys
import threading
from pathlib import Path
from typing import Any

import fieldbook
from fieldbook.book.lock import held
from fieldbook.errors import BookError, FieldbookError, LinkError, UsageError

START_WAIT_S = 20.0
STARTED = "started"
REAPER = "fieldbook-reaper"


def start_recorder(
    book_path: Path, occupation: int, *, link_text: str | None = None, backup: Path | None = None
) -> None:
    """Start a recorder on an open occupation and wait until bytes can come in.

    Args:
        book_path: the book.
        occupation: number of an open occupation.
        link_text: another link than the one the occupation was begun with; relative to the current folder.
        backup: file or folder for copies of the book; if None that of the user's settings, if any.

    Raises:
        BookError: another recorder holds the book, or the new one did not start.
        LinkError: the link cannot be opened.
        UsageError: no such open occupation.
    """
    command = [sys.executable, "-P", "-m", "fieldbook.occupy", str(book_path.absolute()), str(occupation)]
    if link_text is not None:
        command += ["--link", link_text]
    if backup is not None:
        command += ["--backup", str(backup.absolute())]
    child = subprocess.Popen(  # noqa: S603 - our own interpreter and module
        command,
        stdin=subprocess.DEVNULL,
        stdout=subprocess.PIPE,
        stderr=subprocess.DEVNULL,
        env=_environment(),
        **_apart(),
    )
    # whoever started it may live on for days: a recorder that has ended must not stay as a zombie
    threading.Thread(target=child.wait, name=REAPER, daemon=True).start()
    said = _first_line(child)
    if said != STARTED:
        if child.poll() is None and not said:
            child.terminate()  # neither started nor refused: better none than one nobody knows of
        child.wait()
        raise _error(said)


def recorder_alive(book_path: Path) -> bool:
    """Whether some recorder holds the lock of this book."""
    return held(book_path)


def error_line(error: FieldbookError) -> str:
    """An error as one line on the pipe."""
    tree = {"exit": int(error.exit_code), "code": error.code, "text": error.text, "remedy": error.remedy}
    return json.dumps(tree)


def _environment() -> dict[str, str]:
    """The same package as here, and nothing that happens to lie in the current folder (`-P`)."""
    root = str(Path(fieldbook.__file__).parents[1])
    before = os.environ.get("PYTHONPATH")
    return {**os.environ, "PYTHONPATH": root if not before else os.pathsep.join((root, before))}


def _apart() -> dict[str, Any]:
    if sys.platform == "win32":
        flags = subprocess.DETACHED_PROCESS | subprocess.CREATE_NEW_PROCESS_GROUP | subprocess.CREATE_NO_WINDOW
        return {"creationflags": flags}
    return {"start_new_session": True}


def _first_line(child: subprocess.Popen[bytes]) -> str:
    """The child's first line, or an empty text if it ends or says nothing in time."""
    said: list[bytes] = []
    pipe = child.stdout
    assert pipe is not None  # noqa: S101 - stdout=PIPE

    def listen() -> None:
        said.append(pipe.readline())
        pipe.close()

    listener = threading.Thread(target=listen, name="fieldbook-start", daemon=True)
    listener.start()
    listener.join(START_WAIT_S)
    return said[0].decode("utf-8", "replace").strip() if said else ""


def _error(said: str) -> FieldbookError:
    try:
        tree = json.loads(said)
        kind = {2: UsageError, 3: LinkError, 4: BookError}.get(tree["exit"], BookError)
        return kind(tree["text"], tree["remedy"], code=tree["code"])
    except (ValueError, KeyError, TypeError):
        return BookError(
            "The recorder did not start.",
            "Run `fieldbook observe` in a terminal to see why.",
            code="not_started",
        )
