"""Bytes of an ended book per epoch, raw and decoded, against `gzip -9` of the raw log. Goal: at most 1.5 x."""

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

SAMPLE = Path(__file__).parents[1] / "settings" / "contract_sample.toml"
GOAL = 1.5


def measure(name: str, raw: bytes, epochs: int) -> str:
    """One line: bytes per epoch of the book and of gzip -9, and their ratio."""
    with tempfile.TemporaryDirectory() as folder:
        file, book = Path(folder) / "receiver.nmea", Path(folder) / "job.book"
        file.write_bytes(raw)
        wish = Wish(load_session(SAMPLE), parse_link(f"file:{file}", Path.cwd()))
        result = observe(book, wish, SystemClock(), threading.Event())
        assert result.epochs == epochs
        size = book.stat().st_size
    packed = len(gzip.compress(raw, 9))
    return (
        f"{name}: book {size / epochs:.0f} bytes an epoch, gzip -9 of the log {packed / epochs:.0f}:"
        f" {size / packed:.2f} x (goal {GOAL:.1f} x)"
    )


def main() -> None:
    """Print the ratios beside their goal."""
    for name, epochs, step_s, sky in (
        ("20 min at 1 Hz, all sentences", 1200, 1.0, True),
        ("20 min at 1 Hz, position sentences only", 1200, 1.0, False),
        ("1 h at 10 Hz, position sentences only", 36000, 0.1, False),
        ("3 h at 1 Hz, all sentences", 10800, 1.0, True),
    ):
        print(measure(name, log(epochs, step_s=step_s, sky=sky), epochs))


if __name__ == "__main__":
    main()
