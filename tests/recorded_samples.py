"""The samples for tests: where they are, what is true of them, and how one is recorded."""

from __future__ import annotations

import threading
import tomllib
from pathlib import Path
from typing import Any

ROOT = Path(__file__).parents[1]
SAMPLES = ROOT / "sample_sessions"
SAMPLE_NAMES = ("kestrel-ridge-1", "kestrel-ridge-2", "saltpan-1", "saltpan-2")


def record_into(book: Path, session_path: Path) -> int:
    """Record one session's file into a book as `fieldbook observe` does; the occupation's number."""
    from fieldbook.clock import SystemClock
    from fieldbook.links.address import parse_link
    from fieldbook.occupy.foreground import Wish, observe
    from fieldbook.settings.session import load_session

    session = load_session(session_path)
    address = parse_link(session.receiver.link, session_path.parent)
    return observe(book, Wish(session, address), SystemClock(), threading.Event()).occupation


def truth_of(name: str) -> dict[str, Any]:
    """truth.toml of a sample."""
    return tomllib.loads((SAMPLES / name / "truth.toml").read_text(encoding="utf-8"))
