"""A program on a pseudo-terminal of 80x24, read through pyte as a person would see it, driven by keys."""

from __future__ import annotations

import os
import select
import struct
import subprocess
import sys
import time
from collections.abc import Sequence

import pyte

KEYS = {
    "enter": "\r",
    "escape": "\x1b",
    "tab": "\t",
    "up": "\x1b[A",
    "down": "\x1b[B",
    "left": "\x1b[D",
    "right": "\x1b[C",
}


class Terminal:
    """One child on one pseudo-terminal."""

    def __init__(
        self, command: Sequence[str], *, columns: int = 80, lines: int = 24, env: dict[str, str] | None = None
    ) -> None:
        import fcntl
        import pty
        import termios

        self.screen = pyte.Screen(columns, lines)
        self._stream = pyte.ByteStream(self.screen)
        master, slave = pty.openpty()
        fcntl.ioctl(slave, termios.TIOCSWINSZ, struct.pack("HHHH", lines, columns, 0, 0))
        outside = {key: value for key, value in os.environ.items() if key not in ("NO_COLOR", "COLORTERM")}
        fixed = {"TERM": "xterm-256color", "COLORTERM": "truecolor", "LANG": "C.UTF-8", "PYTHONUTF8": "1"}
        surroundings = {**outside, **fixed, **(env or {})}
        self.child = subprocess.Popen(
            list(command),
            stdin=slave,
            stdout=slave,
            stderr=slave,
            close_fds=True,
            start_new_session=True,
            env=surroundings,
        )
        os.close(slave)
        self._master = master

    def _read(self, wait_s: float) -> bool:
        ready, _, _ = select.select([self._master], [], [], wait_s)
        if not ready:
            return False
        try:
            data = os.read(self._master, 65536)
        except OSError:  # the child has closed its side
            return False
        # pyte 0.8 takes "CSI > ... u" (keyboard protocol) for cursor restore; a terminal ignores what it does not know
        self._stream.feed(data.replace(b"\x1b[>1u", b"").replace(b"\x1b[<u", b""))
        return bool(data)

    def text(self) -> str:
        """The screen as text."""
        return "\n".join(line.rstrip() for line in self.screen.display)

    def see(self, *words: str, within_s: float = 20.0) -> None:
        """Read until all the words stand on the screen together."""
        deadline = time.monotonic() + within_s
        while not all(word in self.text() for word in words):
            if time.monotonic() > deadline:
                raise AssertionError(f"never came: {words}\n{self.text()}")
            self._read(0.1)

    def press(self, *keys: str) -> None:
        """Keys by name, or characters."""
        for key in keys:
            os.write(self._master, KEYS.get(key, key).encode())
            if key == "escape":  # a lone escape is known by the silence after it
                self._read(0.2)

    def wait(self, within_s: float = 15.0) -> int:
        """Exit code of the child."""
        deadline = time.monotonic() + within_s
        while self.child.poll() is None:
            if time.monotonic() > deadline:
                raise AssertionError(f"the program did not end\n{self.text()}")
            self._read(0.1)
        return self.child.returncode

    def vanish(self) -> None:
        """The window is closed: the terminal's other side is gone, the program goes on."""
        os.close(self._master)
        self._master = -1

    def close(self) -> None:
        """End the child, close the terminal."""
        if self.child.poll() is None:
            self.child.kill()
        self.child.wait()
        if self._master >= 0:
            os.close(self._master)


def python() -> str:
    """The interpreter that runs the tests."""
    return sys.executable
