"""Recording a file, durable, against a bare `pynmea2.parse` loop over the same file. Goal: at most 1.0 x.

'Durable' is the whole of `observe`: dry pass, decoding, every commit, sealing, packing, the `end` entry.
"""

from __future__ import annotations

import json
import statistics
import subprocess
import sys
import tempfile
from pathlib import Path

from receiver_log import log

SAMPLE = Path(__file__).parents[1] / "settings" / "contract_sample.toml"
EPOCHS, RUNS = 12_000, 3
GOAL = 1.0

BARE = """
import sys, time, pynmea2
lines = open(sys.argv[1], encoding="ascii").read().splitlines()
began = time.perf_counter()
for line in lines:
    pynmea2.parse(line, check=True)
print(time.perf_counter() - began)
"""
OURS = """
import sys, threading, time
from pathlib import Path
from fieldbook.clock import SystemClock
from fieldbook.links.address import parse_link
from fieldbook.occupy.foreground import Wish, observe
from fieldbook.settings.session import load_session
session = load_session(Path(sys.argv[2]))
began = time.perf_counter()
wish = Wish(session, parse_link("file:" + sys.argv[1], Path.cwd()))
result = observe(Path(sys.argv[3]), wish, SystemClock(), threading.Event())
took = time.perf_counter() - began
assert result.ended_by == "end of file"
print(took, result.epochs)
"""


def _run(script: str, *arguments: object) -> list[str]:
    command = [sys.executable, "-c", script, *(str(argument) for argument in arguments)]
    return subprocess.run(command, check=True, capture_output=True, text=True).stdout.split()


def main() -> None:
    """Print the ratio beside its goal."""
    with tempfile.TemporaryDirectory() as folder:
        file = Path(folder) / "receiver.nmea"
        file.write_bytes(log(EPOCHS))
        ratios, bare_s, ours_s = [], 0.0, 0.0
        for number in range(RUNS):
            bare_s = float(_run(BARE, file)[0])
            took, epochs = _run(OURS, file, SAMPLE, Path(folder) / f"{number}.book")
            assert int(epochs) == EPOCHS
            ours_s = float(took)
            ratios.append(ours_s / bare_s)
        sentences = file.read_bytes().count(b"\n")
    print(
        f"recording {sentences} sentences ({EPOCHS} epochs) {ours_s:.2f} s, bare pynmea2.parse {bare_s:.2f} s:"
        f" {statistics.median(ratios):.2f} x (goal {GOAL:.1f} x; all runs {json.dumps([round(r, 2) for r in ratios])})"
    )


if __name__ == "__main__":
    sys.path.insert(0, str(Path(__file__).parent))
    main()
