"""Bytes of an ended book per epoch, raw and decoded, against `gzip -9` of the raw log. Goal: at most 1.5 x.

The samples as they lie in `sample_sessions/`, then generated logs. The book is the whole file: entries, tables, all.
"""

from __future__ import annotations

import gzip
import tempfile
import threading
from pathlib import Path

from receiver_log import log

from fieldbook.clock import SystemClock
from fieldbook.links.address import parse_link
from fieldbook.occupy.foreground import Wish, observe
from fieldbook.settings.session import load_session

ROOT = Path(__file__).parents[2]
SAMPLE = ROOT / "tests" / "settings" / "contract_sample.toml"
GOAL = 1.5


def measure(name: str, raw: bytes, epochs: int | None = None, session: Path = SAMPLE) -> str:
    """One line: bytes per epoch of the book and of gzip -9, and their ratio."""
    with tempfile.TemporaryDirectory() as folder:
        file, book = Path(folder) / "receiver.nmea", Path(folder) / "job.book"
        file.write_bytes(raw)
        wish = Wish(load_session(session), parse_link(f"file:{file}", Path.cwd()))
        result = observe(book, wish, SystemClock(), threading.Event())
        assert epochs in (None, result.epochs)
        epochs = result.epochs
        size = book.stat().st_size
    packed = len(gzip.compress(raw, 9))
    return (
        f"{name}: book {size / epochs:.0f} bytes an epoch, gzip -9 of the log {packed / epochs:.0f}:"
        f" {size / packed:.2f} x (goal {GOAL:.1f} x)"
    )


def sample_log(folder: Path) -> bytes:
    """The receiver's log of a sample, not compressed."""
    (file,) = folder.glob("receiver.nmea*")
    return gzip.decompress(file.read_bytes()) if file.suffix == ".gz" else file.read_bytes()


def main() -> None:
    """Print the ratios beside their goal."""
    for session in sorted((ROOT / "sample_sessions").glob("*/session.toml")):
        print(measure(f"sample {session.parent.name}", sample_log(session.parent), session=session))
    for name, epochs, step_s, sky in (
        ("20 min at 1 Hz, all sentences", 1200, 1.0, True),
        ("20 min at 1 Hz, position sentences only", 1200, 1.0, False),
        ("1 h at 10 Hz, position sentences only", 36000, 0.1, False),
        ("3 h at 1 Hz, all sentences", 10800, 1.0, True),
    ):
        print(measure(name, log(epochs, step_s=step_s, sky=sky), epochs))


if __name__ == "__main__":
    main()
